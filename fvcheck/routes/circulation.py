"""Lift from the circulation, L = −ρ U Γ (Kutta 1902; Joukowski 1906)."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fvcheck.errors import SetupError, SurfaceError
from fvcheck.flow import Flow
from fvcheck.laws import State
from fvcheck.routes.contour import sampled
from fvcheck.routes.estimate import Estimate, Reference
from fvcheck.routes.terms import View, tally
from fvcheck.surfaces import ControlSurface
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray

ASSUMES = (
    "steady plane flow of one density, a uniform approach stream of the reference velocity along the "
    "direction of drag, no wall near, and a contour outside of layers and wake"
)

# Variation of the total pressure along the contour, in dynamic pressures, above which
# the contour counts as lying in viscous flow or in a stream that is not uniform.
_ROTATIONAL = 0.02


def circulation(flow: Flow, view: View, distances: Sequence[float], reference: Reference | None) -> Estimate:
    """−ρUΓ of the farthest contour around the body that no other patch cuts; lift only.

    SetupError or SurfaceError where an assumption does not hold: no reference, an
    axisymmetric run, contours that meet walls, total pressure that varies along all
    of them.
    """
    if reference is None:
        raise SetupError(
            "the reference velocity is not known", mend="Give --reference VELOCITY,LENGTH,DENSITY."
        )
    if view.axis is not None:
        raise SetupError("an axisymmetric run has no lift")
    if flow.fluid.ideal_gas:
        raise SetupError("the density varies")
    refused = "no contour is free of other patches"
    for distance in sorted(distances, reverse=True):
        volume = sampled(flow, ControlSurface.around(view.body, distance), view)
        mine = flow.mesh.boundary.names.index(view.body)
        if np.any((volume.patch != mine) & ~volume.drawn):
            continue
        varies = _variation_of_head(volume, reference)
        if varies <= _ROTATIONAL:
            return _lift(volume, view, reference, distance)
        refused = (
            f"the total pressure varies by {100 * varies:.3g} % of the dynamic pressure along the "
            f"contour at {distance:.4g}: it lies in a wake, or the stream is not uniform"
        )
    raise SurfaceError(refused)


def _variation_of_head(volume: SampledVolume, reference: Reference) -> float:
    """Standard deviation of the total pressure along the drawn contour, in dynamic pressures.

    These are the reference's or, where it is told too large for this flow, those found there.
    """
    state = volume.line_state(BEST)
    dynamic = 0.5 * state.density * np.sum(state.velocity[:, :2] ** 2, axis=1)
    head = state.pressure + dynamic
    weight = np.hypot(*volume.normals.T) * volume.drawn
    mean = float(np.average(head, weights=weight))
    scale = min(reference.pressure, float(np.average(dynamic, weights=weight)))
    spread = float(np.sqrt(np.average((head - mean) ** 2, weights=weight)))
    return spread / scale if scale > 0 else np.inf


def _lift(volume: SampledVolume, view: View, reference: Reference, distance: float) -> Estimate:
    tangent = np.column_stack([-volume.normals[:, 1], volume.normals[:, 0]]) * volume.drawn[:, None]
    factor = -reference.density * reference.velocity

    def lift(state: State) -> Array:
        return factor * np.einsum("qi,qi->q", state.velocity[:, :2], tangent)

    value, band = tally(volume, lift)
    aligned = view.direction[0] == 1.0
    return Estimate(
        view.body,
        "circulation",
        force=(None, value) if aligned else (None, None),
        sampling_band=(None, band.sampling) if aligned else (None, None),
        resolution_band=(None, band.resolution) if aligned else (None, None),
        lift=value,
        moment_about=view.about,
        direction=view.direction,
        bands={"lift": {"sampling": band.sampling, "resolution": band.resolution}},
        distance=distance,
        assumptions=ASSUMES,
    )
