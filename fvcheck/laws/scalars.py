"""Transported scalars: one law for each name."""

from __future__ import annotations

from functools import cache

import numpy as np

from fvcheck.laws.law import Law, register_family
from fvcheck.laws.parts import column, field_source
from fvcheck.laws.state import State

Array = np.ndarray

FAMILY = "scalar"


@cache
def scalar_law(name: str) -> Law:
    """ρφ carried by the flow and mixed down its gradient: −Γ∇φ·n with Γ = ρD + μ_t/Sc_t.

    φ [per mass] is the field ``scalar:NAME``, D [m²/s] is ``fluid.diffusivity[NAME]``,
    a source [per volume and second] the field ``scalar_source:NAME``. φ counts
    from its mean on the border, as a level only multiplies the mass imbalance.
    """

    def content(s: State) -> Array:
        return column(s.density * (s.scalar(name).value - s.datum.scalars.get(name, 0.0)))

    def diffusion(s: State, n: Array) -> Array | None:
        gamma = s.mixing(name)
        if gamma is None:
            return None
        return column(-gamma * np.einsum("qi,qi->q", s.scalar(name).gradient, n))

    return Law(
        name=f"{FAMILY}:{name}",
        components=(None,),
        unit="kg/s/m",
        density=content,
        fluxes={"diffusive": diffusion},
        source=lambda s: field_source(s, f"scalar_source:{name}"),
        datum=f"{FAMILY}:{name}",
        summary=f"{name} in equals {name} out, or is stored",
    )


register_family(FAMILY, scalar_law)
