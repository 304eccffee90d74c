"""Set-up errors that the momentum law tells."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np

from fvcheck.diagnosis.cause import (
    Cause,
    Change,
    Setting,
    Told,
    both,
    factor_of,
    is_number,
    linear,
    scaled,
    tell_number,
    with_fluid,
)
from fvcheck.diagnosis.fitting import Fit, Model
from fvcheck.diagnosis.property_causes import tell_density, tell_viscosity
from fvcheck.fields import Field
from fvcheck.flow import Flow

Array = np.ndarray

_PRESSURE_UNITS = {1e3: "kPa", 1e2: "hPa or mbar", 1e5: "bar", 1e6: "MPa", 101325.0: "atm"}


def momentum_causes(known: Setting) -> list[Cause]:
    gas, gravity = known.flow.fluid.ideal_gas, known.flow.fluid.gravity
    weight = known.density * np.asarray(gravity)
    out = [
        Cause("pressure-factor", linear("pressure"), lambda f: _pressure(known, f)),
        Cause("viscosity-factor", linear("viscous"), lambda f: tell_viscosity(known, f)),
    ]
    if np.any(weight) and known.flow.fluid.pressure_kind in ("static", "reduced"):
        out.append(
            Cause(
                "hydrostatic-pressure",
                Model(("force-x", "force-y"), 1, lambda t: -t[0] * weight),
                lambda f: _hydrostatic(known, f),
                frozenset({"uniform-force-x", "uniform-force-y", "uniform-force"}),
                fixed=True,
            )
        )
    if not np.any(weight) and not gas:
        out.append(Cause("density-factor", linear("convective"), lambda f: tell_density(known, f)))
    out += [
        Cause("uniform-force-x", linear("force-x"), lambda f: _force(known, f, (0,))),
        Cause("uniform-force-y", linear("force-y"), lambda f: _force(known, f, (1,))),
        Cause("uniform-force", linear("force-x", "force-y"), lambda f: _force(known, f, (0, 1))),
        Cause("buoyancy-x", linear("warmth-x", "force-x"), lambda f: _buoyancy(known, f, 0)),
        Cause("buoyancy-y", linear("warmth-y", "force-y"), lambda f: _buoyancy(known, f, 1)),
        Cause("resistance", linear("resistance"), lambda f: _resistance(f, 1)),
        Cause("resistance-quadratic", linear("resistance-2"), lambda f: _resistance(f, 2)),
        Cause(
            "rotating-frame",
            Model(
                ("coriolis", "centrifugal", "force-x", "force-y"),
                3,
                lambda t: np.array([t[0], t[0] ** 2, t[1], t[2]]),
                lambda free: [np.array([free[0], free[2], free[3]])],
            ),
            lambda f: _frame(known, f),
        ),
        Cause(
            "velocity-factor",
            Model(
                ("convective", "viscous"),
                1,
                lambda t: np.array([t[0] ** 2 - 1.0, t[0] - 1.0]),
                lambda free: [np.array([f]) for f in np.geomspace(1e-3, 1e3, 13)],
            ),
            _velocity,
        ),
        Cause("turbulence-energy", linear("turbulence"), _turbulence),
    ]
    one = {cause.name: cause for cause in out}
    for first, second in (
        ("pressure-factor", "viscosity-factor"),
        ("pressure-factor", "uniform-force"),
        ("viscosity-factor", "uniform-force"),
        ("pressure-factor", "buoyancy-y"),
        ("viscosity-factor", "buoyancy-y"),
        ("resistance", "resistance-quadratic"),
    ):
        out.append(_pair(one[first], one[second]))
    return out


def _pair(first: Cause, second: Cause) -> Cause:
    split = first.model.unknowns

    def tell(fit: Fit) -> Told | None:
        parts = [
            c.tell(replace(fit, theta=fit.theta[s], half=fit.half[s]))
            for c, s in ((first, slice(None, split)), (second, slice(split, None)))
        ]
        if parts[0] is None or parts[1] is None:
            return None
        a, b = parts[0], parts[1]
        return Told(
            f"{a.cause}, and {b.cause}",
            a.coefficient,
            a.interval,
            f"{a.setting}; {b.setting}",
            both(a.change, b.change),
        )

    model = Model(first.model.columns + second.model.columns, split + second.model.unknowns)
    return Cause(f"{first.name}+{second.name}", model, tell)


def _pressure(known: Setting, fit: Fit) -> Told | None:
    found = factor_of(fit)
    if found is None:
        return None
    f, low, high = found
    half, rho, kind = high - f, known.density, known.flow.fluid.pressure_kind
    text, setting = f"pressure factor {f:.4g}", f"multiply the pressure array by {f:.4g}"
    change: Change = scaled("pressure", f)
    told = rho != 1.0 and not isinstance(known.flow.fluid.density, type(None))
    if kind == "static" and told and is_number(f, half, rho):
        text += ": the pressure is kinematic (p/rho)"
        setting, change = "--pressure-kind kinematic", with_fluid(pressure_kind="kinematic")
    elif kind == "kinematic" and told and is_number(f, half, 1.0 / rho):
        text += ": the pressure is static, not p/rho"
        setting, change = "--pressure-kind static", with_fluid(pressure_kind="static")
    else:
        for size, unit in _PRESSURE_UNITS.items():
            if is_number(f, half, size):
                text += f", as of a pressure in {unit}"
    return Told(text, f, (low, high), setting, change if "pressure" in known.flow.fields else None)


def _hydrostatic(known: Setting, fit: Fit) -> Told | None:
    lacks = known.flow.fluid.pressure_kind == "static"
    kind = "reduced" if lacks else "static"
    return tell_number(
        fit,
        1.0 if lacks else -1.0,
        "the pressure lacks the weight of the fluid" if lacks else "the pressure holds the weight",
        f"--pressure-kind {kind}",
        with_fluid(pressure_kind=kind),
    )


def _force(known: Setting, fit: Fit, which: tuple[int, ...]) -> Told | None:
    size, half = np.zeros(2), np.zeros(2)
    size[list(which)], half[list(which)] = fit.theta, fit.half
    if np.any(np.abs(fit.theta) <= fit.half):
        return None
    lead = which[int(np.argmax(np.abs(fit.theta)))]
    parts = " and ".join(f"{size[c]:.4g} in {'xy'[c]}" for c in which)
    g = np.asarray(known.flow.fluid.gravity) + size / known.density
    setting = f"--gravity {g[0]:.4g},{g[1]:.4g}, or a force of that size as --field body_force=ARRAY"
    change = with_fluid(gravity=(float(g[0]), float(g[1])))
    if known.flow.fluid.pressure_kind == "reduced" or known.flow.fluid.expansion:
        setting, change = "--field body_force=ARRAY of that size", _with_force(lambda flow, where: size)
    interval = (float(size[lead] - half[lead]), float(size[lead] + half[lead]))
    return Told(f"uniform force per volume {parts}", float(size[lead]), interval, setting, change)


def _with_force(force: Callable[[Flow, Field], Array]) -> Change:
    """A body force field added, at the location of the velocity."""

    def change(flow: Flow) -> Flow:
        u = flow.fields["velocity"]
        values = np.zeros((len(u.values), 3))
        values[:, :2] = force(flow, u)
        old = flow.fields.get("body_force")
        if old is not None:
            if old.location != u.location:
                return flow
            values = values + old.values
        added = Field(name="body_force", location=u.location, values=values)
        return replace(flow, fields={**flow.fields, "body_force": added})

    return change


def _buoyancy(known: Setting, fit: Fit, c: int) -> Told | None:
    b, even = (float(v) for v in fit.theta)
    half = float(fit.half[0])
    if abs(b) <= half:
        return None
    neutral = known.temperature - even / b
    fluid, rho = known.flow.fluid, known.density
    along = fluid.gravity[c]
    changes: dict[str, Any] = {}
    if along == 0.0:
        # Gravity is not told: its own for SI values, else 1, with the product right.
        along = -9.81 if 1e-5 < abs(b) / (rho * 9.81) < 0.1 else -1.0
        along = along if b > 0 else -along
        pair = [0.0, 0.0]
        pair[c] = along
        if any(fluid.gravity):
            return Told(
                f"buoyancy in {'xy'[c]}, coefficient {b:.5g} per unit of T", b, (b - half, b + half), ""
            )
        changes |= {"gravity": (pair[0], pair[1])}
        if fluid.pressure_kind == "static":
            changes |= {"pressure_kind": "reduced"}
    before = fluid.expansion or 0.0
    beta = before - b / (rho * along)
    level = before * (fluid.reference_temperature or 0.0) - b / (rho * along) * neutral
    level = level / beta if beta else neutral
    if along and "gravity" in changes and fluid.pressure_kind == "kinematic":
        level -= 1.0 / beta
    changes |= {"expansion": beta, "reference_temperature": level}
    words = [f"--expansion {beta:.5g} --reference-temperature {level:.5g}"]
    if "gravity" in changes:
        g = changes["gravity"]
        words.insert(0, f"--gravity {g[0]:.4g},{g[1]:.4g}")
    if "pressure_kind" in changes:
        words.insert(0, "--pressure-kind reduced")
    text = f"buoyancy in {'xy'[c]}, coefficient {b:.5g} per volume and unit of T, none at T = {neutral:.5g}"
    return Told(text, b, (b - half, b + half), " ".join(words), with_fluid(**changes))


def _resistance(fit: Fit, power: int) -> Told | None:
    k, half = float(fit.theta[0]), float(fit.half[0])
    if abs(k) <= half or (power == 2 and k < 0):
        return None
    law = "velocity" if power == 1 else "velocity squared"
    text = f"resistance proportional to {law}, {k:.4g} per volume"
    if power == 1:
        what = "dies away" if k < 0 else "grows"
        text += f" (or storage: a flow that {what} as a whole; a single state cannot tell)"

    def force(flow: Flow, where: Field) -> Array:
        u = np.asarray(where.values[:, :2], float)
        return -k * u * np.linalg.norm(u, axis=1, keepdims=True) ** (power - 1)

    return Told(
        text,
        k,
        (k - half, k + half),
        f"--field body_force=ARRAY that holds {-k:.4g} times {'u' if power == 1 else '|u| u'}",
        _with_force(force),
    )


def _frame(known: Setting, fit: Fit) -> Told | None:
    rate, half = float(fit.theta[0]), float(fit.half[0])
    if abs(rate) <= half:
        return None
    centre = -fit.theta[1:] / (known.density * rate**2)
    x, y = float(centre[0]), float(centre[1])
    return Told(
        f"rotating frame, {rate:.4g} rad/s about ({x:.4g}, {y:.4g})",
        rate,
        (rate - half, rate + half),
        f"--frame-rate {rate:.5g} --frame-centre {x:.4g},{y:.4g}",
        with_fluid(frame_rate=rate, frame_centre=(x, y)),
    )


def _velocity(fit: Fit) -> Told | None:
    f, half = float(fit.theta[0]), float(fit.half[0])
    if f + half <= 0.0 or abs(f - 1.0) <= half or f == 0.0:
        return None
    text = f"velocity factor {f:.4g}, as of another unit"
    return Told(
        text, f, (f - half, f + half), f"multiply the velocity array by {f:.4g}", scaled("velocity", f)
    )


def _turbulence(fit: Fit) -> Told | None:
    return tell_number(
        fit,
        -1.0,
        "the pressure holds the turbulence energy (2/3 rho k) already",
        "leave the turbulence energy out of the fields",
        lambda flow: replace(
            flow, fields={role: f for role, f in flow.fields.items() if role != "turbulence_energy"}
        ),
    )
