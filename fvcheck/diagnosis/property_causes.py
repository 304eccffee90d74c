"""Properties of the fluid that more than one law tells: viscosity and density."""

from __future__ import annotations

import numpy as np

from fvcheck.diagnosis.cause import (
    Setting,
    Told,
    both,
    factor_of,
    is_number,
    scaled,
    with_fluid,
)
from fvcheck.diagnosis.fitting import Fit

Array = np.ndarray


def tell_viscosity(known: Setting, fit: Fit) -> Told | None:
    found = factor_of(fit)
    if found is None:
        return None
    f, low, high = found
    half, rho, told = high - f, known.density, known.flow.fluid.viscosity
    f, low = max(f, 0.0), max(low, 0.0)
    text = f"viscosity factor {f:.4g}"
    if rho != 1.0 and is_number(f, half, rho):
        text += ": it was given as kinematic (mu/rho)"
    elif rho != 1.0 and is_number(f, half, 1.0 / rho):
        text += ": it was divided by the density"
    if isinstance(told, int | float) and told > 0:
        value = f * told
        return Told(text, f, (low, high), f"--viscosity {value:.5g}", with_fluid(viscosity=value))
    roles = [r for r in known.flow.fields if r.removeprefix("kinematic_") in ("viscosity", "eddy_viscosity")]
    change = both(*(scaled(role, f) for role in roles)) if roles else None
    return Told(text, f, (low, high), f"multiply the viscosity array by {f:.4g}", change)


def tell_density(known: Setting, fit: Fit) -> Told | None:
    found = factor_of(fit)
    if found is None or found[1] <= 0.0:  # no density may as well be zero
        return None
    f, low, high = found
    fluid = known.flow.fluid
    if fluid.ideal_gas:
        if "density" in known.flow.fields or fluid.gas_constant is None:
            return None
        value = fluid.gas_constant / max(f, 1e-300)
        text = f"density factor {f:.4g}, gas constant {value:.5g}"
        return Told(text, f, (low, high), f"--gas-constant {value:.5g}", with_fluid(gas_constant=value))
    text = f"density factor {f:.4g}"
    if isinstance(fluid.density, int | float):
        value = max(f, 1e-300) * fluid.density
        return Told(text, f, (low, high), f"--density {value:.5g}", with_fluid(density=value))
    return Told(text, f, (low, high), f"multiply the density array by {f:.4g}", scaled("density", f))
