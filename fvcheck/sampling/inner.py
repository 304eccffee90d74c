"""Integrals over the many whole cells of a large volume, for data at points.

The fits of `fvcheck.sampling.sampler` take microseconds a node; over an interior
of 10⁵ cells and more that is most of a ledger. What is integrated there needs
less. Each triangle gets a polynomial that is continuous across its sides, from
the values at nodes and a quadratic about each (polynomial preserving recovery,
Zhang & Naga 2005). For a continuous interpolant U of u, ∫|∇u|² − |∇U|² =
−2∫(u − U)∇²u − ∫|∇(u − U)|²: the error of an integral is that of values, not of
gradients, and inside, where errors of odd order cancel from cell to cell, of
fourth order (superconvergence; compare Babuška & Miller 1984).

Degree 1 is linear interpolation, of second order. Degree 2 takes the middles of
sides from second derivatives, degree 3 from first derivatives, and its gradients
from the cubic through values and gradients: both of fourth order, with errors of
their own, so that their difference bounds them.
"""

from __future__ import annotations

from collections.abc import Callable, Collection, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fvcheck.mesh.mesh import Mesh
from fvcheck.sampling.jumps import EXCESS, LEAST_EXTENT
from fvcheck.sampling.probe import Probe
from fvcheck.sampling.sampled import Sampled
from fvcheck.sampling.sampler import DEGREES

Array = np.ndarray
Integrand = Callable[[Mapping[str, Sampled], Array], Array | None]

# Triangles evaluated at a time: what laws make of them then stays in the cache.
_CHUNK = 4096

# A jump shows where the middles of a side by degrees 2 and 3 differ by this share of the
# range of the data around, and leave it (`probe.EXCESS`). Of sides that leave it, those at a
# step differ by 0.02 in the middle and up to 0.09, those of a wave of eight cells by up to 0.008.
_DISAGREE = 0.015

# Degree 2 serves bands alone: one triangle in so many tells how far it is from degree 3.
_THINNED = 4


@dataclass(frozen=True, eq=False)
class InnerCells:
    """Whole cells over points of their own.

    cells : (k,) mesh cells; local_points : (n,) mesh points of them and the cells around
    points : (n, 2); offsets, nodes : these cells and those around
    triangles : (t, 3) of ``cells``, those of the j-th in rows first[j]:first[j+1]
    point_first, point_cells : cells at each point
    """

    cells: Array
    local_points: Array
    points: Array
    offsets: Array
    nodes: Array
    triangles: Array
    first: Array
    point_first: Array
    point_cells: Array


@dataclass(frozen=True, eq=False)
class Inner:
    """The fields of a probe over whole cells.

    data : (n, f) at the points; jets : (n, 5, f) of the quadratics
    roles : role -> rows of its components among all, a velocity out of the plane included
    slots, rows : (f,) such row of each column of ``data``, and the number of all
    fell : (k,) bool, cells at a jump: there only degree 1 is of use
    """

    geometry: InnerCells
    data: Array
    jets: Array
    roles: Mapping[str, int | slice]
    slots: Array
    rows: int
    fell: Array

    def integrate(self, integrand: Integrand, extent: Callable[[Array], Array]) -> dict[int, Array]:
        """Degree -> (k, c) integral over each cell of what ``integrand`` makes of fields at places (q, 2).

        extent : places -> (q,) out-of-plane extent. Empty where the integrand gives nothing
        """
        count = len(self.geometry.triangles)
        parts = []
        for begin in range(0, count, _CHUNK):
            run = slice(begin, begin + _CHUNK)
            third = self._run(run, 3, integrand, extent)
            if third is None:
                return {}
            first = self._run(run, 1, integrand, extent)
            some = slice(run.start, run.stop, _THINNED)
            second = self._run(some, 2, integrand, extent)
            assert first is not None and second is not None
            # One in so many stands for its neighbours, with as much more of its difference.
            apart = np.zeros_like(third)
            apart[::_THINNED] = _THINNED * (third[::_THINNED] - second)
            parts.append([first, third - apart, third])
        sums = [np.concatenate(part) for part in zip(*parts)]
        first = self.geometry.first
        if len(first) - 1 < count:
            sums = [np.add.reduceat(part, first[:-1], axis=0) for part in sums]
        return dict(zip(DEGREES, sums))

    def _run(
        self, run: slice, degree: int, integrand: Integrand, extent: Callable[[Array], Array]
    ) -> Array | None:
        """(t, c) integrals over a run of triangles."""
        from fvcheck.kernels.inner import in_triangles

        geometry = self.geometry
        triangles = np.ascontiguousarray(geometry.triangles[run])
        places, values, gradients, twice = in_triangles(
            geometry.points, triangles, self.data, self.jets, degree, self.slots, self.rows
        )
        fields = {
            role: Sampled(values[rows].T, np.moveaxis(gradients[rows], -1, 0))
            for role, rows in self.roles.items()
        }
        made = integrand(fields, places.T)
        if made is None:
            return None
        weighted = made * extent(places.T)[:, None]
        per = len(weighted) // len(twice)
        return weighted.reshape(per, len(twice), -1).sum(axis=0) * (0.5 / per * twice)[:, None]


def serves(probe: Probe) -> bool:
    """Whether the fields of a probe are all at points."""
    return len(probe.groups) == 1 and probe.groups[0].sampler.location == "point"


def inner_cells(mesh: Mesh, cells: Array, around: Array) -> InnerCells:
    """Whole cells, with those cells around them that may share points with them."""
    from fvcheck.kernels import blocks, neighbours
    from fvcheck.overlay.pieces import triangles_of

    marks = np.zeros(mesh.n_cells, np.uint8)
    marks[around] = 1
    marks[cells] = 2
    near = np.flatnonzero(marks > 0)
    mine = marks[near] == 2
    used = blocks.mark_points(mesh.offsets, mesh.nodes, near, mesh.n_points)
    local = np.flatnonzero(used > 0)
    offsets, nodes = blocks.renumber(mesh.offsets, mesh.nodes, near, local, mesh.n_points)
    points = mesh.points[local]
    if len(nodes) == 3 * len(near) and np.all(np.diff(offsets) == 3):
        triangles, first = nodes.reshape(-1, 3)[mine], np.arange(len(cells) + 1)
    else:
        triangles, first = triangles_of(Mesh(points, offsets, nodes, mesh.boundary), np.flatnonzero(mine))
    point_first, point_cells = neighbours.cells_of_points(offsets, nodes, len(local))
    return InnerCells(cells, local, points, offsets, nodes, triangles, first, point_first, point_cells)


def sample_inner(mesh: Mesh, geometry: InnerCells, probe: Probe) -> Inner:
    """The fields of a probe over whole cells; see `serves`."""
    from fvcheck.kernels.inner import jumps, nodal_quadratics
    from fvcheck.kernels.threads import use_for
    from fvcheck.sampling.compiling import compile_sampler

    (group,) = probe.groups
    data = np.column_stack([field.at(geometry.local_points) for field in group.fields]).astype(float)
    use_for(10 * len(data))
    jets, low, high, weak = nodal_quadratics(
        geometry.points, geometry.offsets, geometry.nodes, geometry.point_first, geometry.point_cells, data
    )
    inside = np.zeros(len(data), bool)
    inside[geometry.triangles] = True
    again = np.flatnonzero(weak & inside)
    if len(again):
        # Too few neighbours in one ring, as on the domain boundary: the fits of the surface's kind.
        sampler = compile_sampler(mesh, geometry.local_points[again], "point", degrees=(2,))
        c = sampler.apply_local(
            2, np.hstack([field.at(sampler.sources) for field in group.fields]).astype(float)
        )
        a = sampler.fits[2].frames
        jets[again, :2] = np.einsum("cki,ckf->cif", a, c[:, 1:3])
        bend = np.stack([c[:, [3, 4]], c[:, [4, 5]]], axis=1)
        bend = np.einsum("cki,cklf,clj->cijf", a, bend, a)
        jets[again, 2], jets[again, 3], jets[again, 4] = bend[:, 0, 0], bend[:, 0, 1], bend[:, 1, 1]
    least = LEAST_EXTENT * (data.max(axis=0) - data.min(axis=0))
    at_jump = jumps(geometry.points, geometry.triangles, data, jets, low, high, least, _DISAGREE, EXCESS)
    fell = np.zeros(len(geometry.cells), bool)
    if at_jump.any():
        touched = np.zeros(len(data), bool)
        touched[geometry.triangles[at_jump]] = True
        fell = np.logical_or.reduceat(touched[geometry.triangles].any(axis=1), geometry.first[:-1])
    roles, slots, at = _slots(group.roles, [field.values for field in group.fields], probe.vectors)
    return Inner(geometry, data, jets, roles, slots, at, fell)


def _slots(
    names: Sequence[str], values: Sequence[Array], vectors: Collection[str]
) -> tuple[dict[str, int | slice], Array, int]:
    """Rows of each role, the row of each column of the data, and the number of rows; vectors have three."""
    roles: dict[str, int | slice] = {}
    slots: list[int] = []
    at = 0
    for name, value in zip(names, values):
        roles[name] = slice(at, at + 3) if name in vectors else at
        slots += range(at, at + value.shape[1])
        at += 3 if name in vectors else 1
    return roles, np.array(slots), at
