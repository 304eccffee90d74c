"""Remarks on what a sampled volume had to leave out."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fvcheck.hints import Hint
from fvcheck.laws import Law
from fvcheck.sampling.sampler import DEGREES
from fvcheck.volume import BEST, SampledVolume


def sampling_hints(volume: SampledVolume, laws: Sequence[Law]) -> list[Hint]:
    """Remarks on what the laws left out, and on data that support less than the highest degree."""
    out = []
    low = 1.0 - volume.degree_shares()[str(DEGREES[-1])]
    if low > 1e-9:
        out.append(
            Hint(
                "degree-fell",
                f"{volume.surface.name or volume.surface.kind}: on {100 * low:.2g} % of its length the data "
                "jump, and plain linear sampling within their range is used there",
            )
        )
    state = volume.line_state(BEST)
    if state.viscosity is None and any("viscous" in law.fluxes for law in laws):
        out.append(Hint("inviscid", "no viscosity is known: momentum and energy are taken as inviscid"))
    conducting = any("conductive" in law.fluxes for law in laws)
    frictionless = state.viscosity is not None and not np.any(state.viscosity)
    unknown = conducting and state.conductivity is None and not frictionless
    if unknown and "temperature" in state.fields:
        out.append(Hint("no-conduction", "no conductivity is known: heat is carried by the flow only"))
    told = volume.has_rates or volume.unsteady
    if volume.surface_velocity is not None and not told and volume.overlay.closed:
        out.append(
            Hint(
                "steady-in-moving-frame",
                f"{volume.surface.name}: the content of the moving surface is taken as constant",
            )
        )
    return out
