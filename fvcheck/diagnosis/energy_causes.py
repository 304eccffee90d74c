"""Set-up errors that the laws of heat and of total energy tell."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from fvcheck.diagnosis.cause import (
    Cause,
    Setting,
    Told,
    factor_of,
    linear,
    scaled,
    tell_number,
    with_fluid,
)
from fvcheck.diagnosis.fitting import Fit
from fvcheck.diagnosis.property_causes import tell_density, tell_viscosity
from fvcheck.fields import Field
from fvcheck.flow import Flow

Array = np.ndarray


def heat_causes(known: Setting) -> list[Cause]:
    fluid = known.flow.fluid

    def carried(fit: Fit) -> Told | None:
        found = factor_of(fit)
        if found is None:
            return None
        f, low, high = found
        c = fluid.specific_heat
        if c is None:
            return None
        value = max(f, 1e-300) * c
        text = f"specific-heat (or density) factor {f:.4g}"
        return Told(text, f, (low, high), f"--specific-heat {value:.5g}", with_fluid(specific_heat=value))

    return [
        Cause("conductivity-factor", linear("conductive"), lambda f: _conductivity(known, f)),
        Cause("specific-heat-factor", linear("convective"), carried),
        Cause("dissipation", linear("dissipation"), _dissipation),
        Cause("uniform-heat-source", linear("heating"), _heating),
    ]


def _conductivity(known: Setting, fit: Fit) -> Told | None:
    found = factor_of(fit)
    if found is None:
        return None
    f, low, high = found
    told = known.flow.fluid.conductivity
    text = f"conductivity factor {f:.4g}"
    if isinstance(told, int | float) and told > 0:
        value = max(f, 0.0) * told
        return Told(text, f, (low, high), f"--conductivity {value:.5g}", with_fluid(conductivity=value))
    change = scaled("conductivity", max(f, 0.0)) if "conductivity" in known.flow.fields else None
    return Told(text, f, (low, high), f"multiply the conductivity by {f:.4g}", change)


def _dissipation(fit: Fit) -> Told | None:
    return tell_number(
        fit,
        1.0,
        "the heat of dissipation is missing",
        "viscous_heating = true in [fluid] of the check file",
        with_fluid(viscous_heating=True),
    )


def _heating(fit: Fit) -> Told | None:
    q, half = float(fit.theta[0]), float(fit.half[0])
    if abs(q) <= half:
        return None

    def change(flow: Flow) -> Flow:
        like = flow.fields["temperature"] if "temperature" in flow.fields else flow.fields["velocity"]
        if "heat_source" in flow.fields:
            return flow
        added = Field(name="heat_source", location=like.location, values=np.full(len(like.values), q))
        return replace(flow, fields={**flow.fields, "heat_source": added})

    text = f"uniform heat source {q:.4g} per volume"
    return Told(
        text, q, (q - half, q + half), "[[source]] with law and shape, or --field heat_source=ARRAY", change
    )


def energy_causes(known: Setting) -> list[Cause]:
    def gamma(fit: Fit) -> Told | None:
        told = known.flow.fluid.gamma
        if told is None or "total_energy" in known.flow.fields:
            return None
        ends = [1.0 / (told - 1.0) + float(fit.theta[0]) + s * float(fit.half[0]) for s in (-1, 0, 1)]
        if ends[0] <= 0.0 or abs(fit.theta[0]) <= fit.half[0]:
            return None
        high, value, low = (1.0 + 1.0 / end for end in ends)
        return Told(f"gamma {value:.5g}", value, (low, high), f"--gamma {value:.5g}", with_fluid(gamma=value))

    return [
        Cause("gamma", linear("pressure-carried"), gamma),
        Cause("gas-constant", linear("kinetic-carried"), lambda f: tell_density(known, f)),
        Cause("conductivity-factor", linear("conductive"), lambda f: _conductivity(known, f)),
        Cause("viscosity-factor", linear("viscous"), lambda f: tell_viscosity(known, f)),
        Cause("uniform-heat-source", linear("heating"), _heating),
    ]
