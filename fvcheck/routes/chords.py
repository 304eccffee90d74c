"""A round body meshed with chords: how far its force may be off since the wall lies beside the curve.

Whether data belong to the polygon or to the curve is not in a file. On the curve,
two things are off by the sagitta s of an edge, and neither by what polynomials of
rising degree differ from one another:

- what is integrated along the chord in place of the arc. The difference is
  ∫ ∇·(−p 1 + τ) dA = ∫ ρ u·∇u dA over the segment between them, of area ⅔ s L:
  zero at a wall without slip, first in an inviscid flow.
- the slope at the wall, where fits to cell values take the wall's velocity at the
  middle of the chord, a distance s too far out.
"""

from __future__ import annotations

import numpy as np

from fvcheck.laws import State
from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.pieces import DRAWN
from fvcheck.sampling.known import known_values
from fvcheck.sampling.quadrature import PER_PIECE
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray

# Sides that turn by more at their ends are corners of the body, not chords of a curve.
_CORNER = np.radians(50.0)

# What friction is off by, in s over the height of the cell at the wall. The slope of a cubic through
# the wall and three averages changes by 3.1 s/d; the fits gave 3.1 to 3.6 on flow between cylinders
# and 5.7 on a Stokes sphere, all of one sign.
_SLOPE = 6.0


def sagittas(mesh: Mesh, body: str) -> Array:
    """(e,) per `Mesh.patch_edges`: how far the arc that an edge may stand for rises above it.

    s = Lθ/8, θ the lesser of the turns at both ends; zero beside a corner and where the
    boundary is straight or turns the other way.
    """
    edges = mesh.boundary.edges[mesh.boundary.patch == mesh.boundary.names.index(body)]
    a, b = mesh.points[edges[:, 0]], mesh.points[edges[:, 1]]
    along = b - a
    length = np.hypot(*along.T)
    angle = np.arctan2(along[:, 1], along[:, 0])
    before, after = np.full((2, len(edges)), -1)
    order = np.argsort(edges[:, 0])
    at = np.minimum(np.searchsorted(edges[order, 0], edges[:, 1]), len(edges) - 1)
    follows = edges[order[at], 0] == edges[:, 1]
    after[follows] = order[at][follows]
    before[after[follows]] = np.flatnonzero(follows)

    def turn(one: Array, two: Array) -> Array:
        by = (angle[two] - angle[one] + np.pi) % (2.0 * np.pi) - np.pi
        by = np.where((one < 0) | (two < 0), np.nan, by)  # an open end has the turn of the other
        return np.where(np.abs(by) > _CORNER, 0.0, by)

    here = np.arange(len(edges))
    ends = np.stack([turn(before, here), turn(here, after)])
    ends = np.where(np.isnan(ends), ends[::-1], ends)
    same = ends[0] * ends[1] > 0.0
    return 0.125 * length * np.where(same, np.abs(ends).min(axis=0), 0.0)


def chord_rows(volume: SampledVolume, body: str, viscous: Array) -> tuple[Array, Array]:
    """Rows (q, 7), as of `terms.rows`, of what the chords may leave out and of what friction may be off by.

    viscous : (q, 3) flux of momentum and of its moment by friction, at the line quadrature points
    """
    from scipy.spatial import cKDTree

    mesh, overlay = volume.flow.mesh, volume.overlay
    assert not np.any(overlay.patch == DRAWN)
    edges = mesh.points[mesh.patch_edges(body)]
    middle = 0.5 * (overlay.start + overlay.end)
    _, edge = cKDTree(edges.mean(axis=1)).query(middle)
    rise = np.repeat(sagittas(mesh, body)[edge], PER_PIECE)
    state = volume.line_state(BEST)
    left_out = _inertia(state) * (2.0 / 3.0 * rise * np.hypot(*volume.normals.T))[:, None]
    if volume.axis is not None:
        left_out[:, 1 - volume.axis] = 0.0
    arm = volume.places - np.asarray(volume.about)
    moment = arm[:, 0] * left_out[:, 1] - arm[:, 1] * left_out[:, 0]
    if volume.axis is not None:
        moment[:] = 0.0
    none = np.zeros((len(rise), 2))
    chords = np.column_stack([left_out, moment, left_out, none])
    share = np.zeros(len(rise))
    known = known_values(volume.flow, "velocity") if "velocity" in volume.flow.fields else None
    if known is not None:
        cell = np.repeat(overlay.cell, PER_PIECE)
        length = np.hypot(*(edges[:, 1] - edges[:, 0]).T)
        height = mesh.areas[cell] / np.repeat(length[edge], PER_PIECE)
        share = _SLOPE * rise / height * np.isin(cell, known[0].cells)
    slope = viscous * share[:, None]
    return chords, np.column_stack([slope, none, slope[:, :2]])


def _inertia(state: State) -> Array:
    """(q, 2) ρ u·∇u [N/m³]."""
    speed = np.einsum("qij,qj->qi", state.velocity_gradient[:, :2, :2], state.velocity[:, :2])
    return state.density[:, None] * speed
