"""The band average: the momentum ledger of all surfaces between two distances at once.

With ψ = 1 on the body and 0 beyond the band, and Π = ρu u + p 1 − τ,

    F = ∫ Π·∇ψ dA + ∫ ψ (s − ∂(ρu)/∂t) dA − ∫_other patches ψ Π·n ds

for any continuous ψ (the momentum law times ψ, by parts); by the coarea formula
this is a mean over the level lines of ψ, and sampling errors that differ from
line to line average out (Babuška & Miller 1984; Giles et al. 1997).

ψ is the quadratic interpolant, on the triangles of the cells, of a smooth step of
the distance: ∫ ∇ψ dA is then exact, so that a pressure level has no force.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fvcheck.errors import SurfaceError
from fvcheck.flow import Flow
from fvcheck.laws import Law, State
from fvcheck.laws.state import Datum
from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.pieces import edge_pieces, edge_triangles
from fvcheck.routes.contour import NAMES, pair, reaching, shaken_sums
from fvcheck.routes.estimate import Estimate
from fvcheck.routes.reach import distances
from fvcheck.routes.terms import Terms, View, estimate, fluxes, laws, rows, volume_rows
from fvcheck.sampling.quadrature import PER_TRIANGLE
from fvcheck.sampling.sampler import DEGREES
from fvcheck.surfaces import ControlSurface
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray


def band(flow: Flow, view: View, inner: float, outer: float) -> Estimate:
    """The force on a body from the band between two distances from it; SurfaceError where there is none."""
    if not 0.0 < inner < outer < np.inf:
        raise SurfaceError(
            f"a band from {inner:g} to {outer:g} is none", mend="Give two rising distances above zero."
        )
    volume = _BandVolume(flow, view, inner, outer)

    def crossing(state: State) -> dict[str, Array]:
        return fluxes(volume, state, volume.slope, None)

    def border(state: State) -> dict[str, Array]:
        return fluxes(volume, state, volume.normals * volume.step_there[:, None], None)

    def all_rows(degree: int) -> Array:
        line = volume.per_line_cell(rows(border(volume.line_state(degree)), -1.0))
        area = volume.per_cell(rows(crossing(volume.area_state(degree)), 1.0))
        return np.concatenate([line, area, volume_rows(volume, degree)[0]])

    first, second, third = (all_rows(degree) for degree in DEGREES)
    assert volume.area is not None
    sums = shaken_sums(volume, lambda state: rows(border(state), -1.0))
    more = [rows(crossing(state), 1.0).sum(axis=0) for state in volume.shaken_area_states()]
    terms = Terms(
        by_degree=(first, second, third),
        best=all_rows(BEST) if volume.falls else None,
        shaken=sums + np.array(more).reshape(len(more), sums.shape[1]),
        reaching=np.concatenate([reaching(volume), volume.area.near_jump]),
        parts=_parts(volume, crossing(volume.area_state(BEST)), border(volume.line_state(BEST))),
    )
    return estimate(terms, view, "band", distance=(inner, outer), degrees=_degrees(volume.area.supported))


def smooth_step(distance: Array, inner: float, outer: float) -> Array:
    """1 up to ``inner``, 0 from ``outer`` on; between them 1 − (10 s³ − 15 s⁴ + 6 s⁵), smooth at both ends.

    s runs with the logarithm of the distance: meshes coarsen away from a body, so
    the near surfaces are sampled better and weigh more.
    """
    s = np.log(np.clip(distance, inner, outer) / inner) / np.log(outer / inner)
    return 1.0 - s**3 * (10.0 - 15.0 * s + 6.0 * s * s)


class _BandVolume(SampledVolume):
    """The cells that a band touches, whole, with what lies in them of other patches.

    step, slope : (q,) ψ and (q, 2) ∇ψ times area at the area quadrature points
    step_there : (q,) ψ at the line quadrature points
    """

    passes = False  # states are wanted at places in all cells

    def __init__(self, flow: Flow, view: View, inner: float, outer: float) -> None:
        mesh = flow.mesh
        self._step = lambda x: smooth_step(distances(mesh, view.body, x, outer), inner, outer)
        cells = _cells_between(mesh, view.body, 0.0 if _has_sources(flow) else inner, outer)
        if len(cells) == 0:
            raise SurfaceError(
                f"no cell lies between {inner:g} and {outer:g} from {view.body}",
                mend="Choose distances within the domain.",
            )
        mine = mesh.boundary.names.index(view.body)
        # Others count wherever ψ is above zero, up to where they meet the body.
        ends = mesh.points[mesh.boundary.edges]
        spots = np.concatenate([ends[:, 0], ends[:, 1], ends.mean(axis=1)])
        nearest = distances(mesh, view.body, spots, outer).reshape(3, -1).min(axis=0)
        chosen = np.flatnonzero((nearest < outer) & (mesh.boundary.patch != mine))
        edge, triangle = edge_triangles(mesh, chosen)
        ends = mesh.points[mesh.boundary.edges[edge]]
        overlay = edge_pieces(mesh, edge, triangle, ends[:, 0], ends[:, 1], cells, True)
        surface = ControlSurface.around(view.body, outer)
        super().__init__(flow, surface, overlay, laws(), about=view.about)
        self._set_up_step()

    def needs_area(self, law: Law) -> bool:
        return True

    def _find_datum(self) -> Datum:
        return Datum()  # ψ counts nothing from a level

    def _set_up_step(self) -> None:
        corners = self.area_triangle
        assert corners is not None
        x = self.flow.mesh.points[corners]
        a, b, c = x[:, 0], x[:, 1], x[:, 2]
        # ψ at corners and middles of sides, once per triangle.
        nodes, node = np.unique(corners[::PER_TRIANGLE], return_inverse=True)
        spots = self._step(self.flow.mesh.points[nodes])[node.reshape(-1, 3)]
        at_corner = np.repeat(spots, PER_TRIANGLE, axis=0)
        twice = _cross(b - a, c - a)
        share = np.column_stack([np.zeros(len(a)), _cross(self.area_places - a, c - a) / twice,
                                 _cross(b - a, self.area_places - a) / twice])  # fmt: skip
        share[:, 0] = 1.0 - share[:, 1] - share[:, 2]
        # ∇ of each barycentric weight: the inward normal of the opposite side over twice the area.
        sides = np.stack([c - b, a - c, b - a], axis=1)
        rise = np.stack([-sides[..., 1], sides[..., 0]], axis=-1) / twice[:, None, None]
        step = np.sum(at_corner * share * (2.0 * share - 1.0), axis=1)
        slope = np.einsum("qk,qki->qi", at_corner * (4.0 * share - 1.0), rise)
        for i, j in ((0, 1), (1, 2), (2, 0)):
            middle = np.repeat(self._step(0.5 * (x[::PER_TRIANGLE, i] + x[::PER_TRIANGLE, j])), PER_TRIANGLE)
            step += 4.0 * middle * share[:, i] * share[:, j]
            along = share[:, i, None] * rise[:, j] + share[:, j, None] * rise[:, i]
            slope += 4.0 * middle[:, None] * along
        self.slope = slope * self.area_weights[:, None]
        # From here on what is inside counts by ψ.
        self.area_weights = self.area_weights * step
        start, end = self.overlay.start, self.overlay.end
        count = len(self.places) // max(len(start), 1)
        s, e = np.repeat(start, count, axis=0), np.repeat(end, count, axis=0)
        t = np.hypot(*(self.places - s).T) / np.hypot(*(e - s).T)
        values = [np.repeat(self._step(p), count) for p in (start, 0.5 * (start + end), end)]
        self.step_there = (
            values[0] * (1 - t) * (1 - 2 * t) + values[1] * 4 * t * (1 - t) + values[2] * t * (2 * t - 1)
        )

    def per_cell(self, values: Array) -> Array:
        """(q, c) at area points, summed per cell."""
        return self._per_cell(values)

    def shaken_area_states(self) -> Sequence[State]:
        """States at the area points from data with a shaken last digit, as many as `shaken_line_states`."""
        assert self.area_triangle is not None
        out = []
        for seed in range(len(self.shaken_line_states())):
            shaken = self.probe.shaken(seed)
            raw = shaken.raw(DEGREES[-1], self.area_triangle, self.area_places)
            out.append(self._state(shaken.by_role(raw), self.area_places))
        return out


def _cells_between(mesh: Mesh, body: str, inner: float, outer: float) -> Array:
    """Cells with a corner or a middle of a side nearer than ``outer``, and one beyond ``inner``."""
    following = np.arange(1, len(mesh.nodes) + 1)
    following[mesh.offsets[1:] - 1] = mesh.offsets[:-1]
    here = mesh.points[mesh.nodes]
    middle = distances(mesh, body, 0.5 * (here + here[following]), outer)
    corner = distances(mesh, body, mesh.points, outer)[mesh.nodes]
    nearest = np.minimum.reduceat(np.minimum(corner, middle), mesh.offsets[:-1])
    farthest = np.maximum.reduceat(np.maximum(corner, middle), mesh.offsets[:-1])
    return np.flatnonzero((nearest < outer) & (farthest > inner))


def _degrees(supported: Array) -> dict[str, float]:
    return {str(degree): float(np.mean(supported == degree)) for degree in DEGREES}


def _has_sources(flow: Flow) -> bool:
    fluid = flow.fluid
    told = any(fluid.gravity) or bool(fluid.frame_rate) or "body_force" in flow.fields
    return told or flow.has_rates


def _cross(u: Array, v: Array) -> Array:
    return u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]


def _parts(
    volume: _BandVolume, crossing: dict[str, Array], border: dict[str, Array]
) -> dict[str, tuple[float, float]]:
    out = {NAMES[name]: pair(value.sum(axis=0)) for name, value in crossing.items()}
    total = sum(border.values(), np.zeros((len(volume.patch), 3)))
    for k in np.unique(volume.patch).tolist():
        if np.any(value := -total[volume.patch == k].sum(axis=0)):
            out[volume.flow.mesh.boundary.names[k]] = pair(value)
    return out | volume_rows(volume, BEST)[1]
