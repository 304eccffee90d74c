"""Profile drag from a traverse of the wake."""

from __future__ import annotations

import numpy as np

from fvcheck.errors import SetupError, SurfaceError
from fvcheck.flow import Flow
from fvcheck.laws import State
from fvcheck.routes.contour import sampled
from fvcheck.routes.estimate import Estimate, Reference
from fvcheck.routes.terms import View, tally
from fvcheck.surfaces import ControlSurface
from fvcheck.volume import BEST

Array = np.ndarray

FORMULAS = ("momentum", "betz", "jones")

_STREAM = (
    "steady plane flow; a uniform stream of the reference velocity far ahead, unbounded; the line crosses "
    "the whole wake, its ends lie in the outer flow (their total pressure is taken as the stream's)"
)
ASSUMES = {
    "momentum": _STREAM + "; what passes beyond the ends differs from the stream by nothing",
    "betz": _STREAM + "; one density; outside of the wake potential flow, so that only the wake counts",
    "jones": _STREAM + "; one density; from the line on total pressure keeps along streamlines, "
    "and velocities are along the stream",
}

# Differing total pressures at both ends, in dynamic pressures, that put a line into question.
_ENDS = 0.02

# Dynamic over total pressure, below which a deficit would be rounding.
_STILL = 1e-12


def wake(
    flow: Flow, view: View, line: ControlSurface | None, reference: Reference | None, formula: str
) -> Estimate:
    """Drag by the momentum and pressure deficit of an open line behind the body; lift stays unknown.

    With U, p∞ of the stream, P total pressure, u along the stream and ds across it:

    momentum  ∫ (ρu·n (U − u) + (p∞ − p + τ_ss) n_s) ds
    betz      ∫ (P∞ − P) ds + ½ρ ∫ (u* − u)(u* + u − 2U) ds, u*² = u² + 2(P∞ − P)/ρ (Betz 1925)
    jones     2 q ∫ √(g − Cp) (1 − √g) ds, g = (P − p∞)/q (Jones 1936)

    SetupError without a line or reference, SurfaceError where the ends disagree.
    """
    if line is None or line.closed:
        raise SetupError("there is no open line across the wake", mend='Give --wake "line(x y, x y)".')
    if reference is None:
        raise SetupError(
            "the reference velocity is not known", mend="Give --reference VELOCITY,LENGTH,DENSITY."
        )
    if view.axis is not None:
        raise SetupError("the traverse is for plane runs")
    volume = sampled(flow, line, view)
    along = np.array(view.direction)
    # The line may be drawn either way; its normal counts down the stream.
    across = volume.normals @ along
    if across.sum() < 0:
        across = -across
    best = volume.line_state(BEST)
    dynamic = 0.5 * best.density * np.sum(best.velocity[:, :2] ** 2, axis=1)
    total = best.pressure + dynamic
    # A reference that is told too large for this flow must not make all differences small.
    scale = min(reference.pressure, float(dynamic.max()))
    if scale <= _STILL * float(np.abs(total).max()):
        raise SurfaceError("the fluid hardly moves there", where=line.text)
    start, end = line.rings[0][0], line.rings[-1][-1]
    ends = [int(np.argmin(np.hypot(*(volume.places - place).T))) for place in (start, end)]
    apart = abs(float(total[ends[0]] - total[ends[1]])) / scale
    if apart > _ENDS:
        raise SurfaceError(
            f"the total pressures at the ends of the line differ by {100 * apart:.3g} % of the dynamic "
            "pressure: they do not lie in one outer stream",
            where=line.text,
            mend="Make the line longer; in a duct use control-surface or band.",
        )
    head = 0.5 * float(total[ends[0]] + total[ends[1]])
    above = (float(total.max()) - head) / scale
    if above > _ENDS:
        raise SurfaceError(
            f"between its ends the total pressure is higher by {100 * above:.3g} % of the dynamic pressure: "
            "the ends lie in layers on walls, or within the wake",
            where=line.text,
            mend="Let the line end in the outer flow; in a duct use control-surface or band.",
        )

    def deficit(state: State) -> Array:
        rho, u = state.density, state.velocity[:, :2] @ along
        q = 0.5 * rho * reference.velocity**2
        still = head - q
        if formula == "momentum":
            normals = volume.normals * np.sign(float((volume.normals @ along).sum()))
            carried = rho * np.einsum("qi,qi->q", state.velocity[:, :2], normals) * (reference.velocity - u)
            pushed = (still - state.pressure) * across
            if state.stress is not None:
                pushed = pushed + np.einsum("i,qij,qj->q", along, state.stress, normals)
            return carried + pushed
        lost = head - (state.pressure + 0.5 * rho * np.sum(state.velocity[:, :2] ** 2, axis=1))
        if formula == "betz":
            outer = np.sqrt(np.maximum(u**2 + 2.0 * lost / rho, 0.0))
            return (lost + 0.5 * rho * (outer - u) * (outer + u - 2.0 * reference.velocity)) * across
        g = np.maximum(1.0 - lost / q, 0.0)
        cp = (state.pressure - still) / q
        return 2.0 * q * np.sqrt(np.maximum(g - cp, 0.0)) * (1.0 - np.sqrt(g)) * across

    value, band = tally(volume, deficit)
    aligned = view.direction[0] == 1.0
    return Estimate(
        view.body,
        "wake",
        force=(value, None) if aligned else (None, None),
        sampling_band=(band.sampling, None) if aligned else (None, None),
        resolution_band=(band.resolution, None) if aligned else (None, None),
        drag=value,
        moment_about=view.about,
        direction=view.direction,
        bands={"drag": {"sampling": band.sampling, "resolution": band.resolution}},
        formula=formula,
        assumptions=ASSUMES[formula],
    )
