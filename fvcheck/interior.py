"""The places inside a control volume at which states are taken, and sums over them cell by cell."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace

import numpy as np

from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.pieces import Overlay, triangles_of
from fvcheck.sampling.inner import InnerCells, inner_cells
from fvcheck.sampling.probe import Probe, Samples
from fvcheck.sampling.quadrature import within
from fvcheck.sampling.sampled import Sampled

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Interior:
    """Quadrature over the part of cells that a control volume holds.

    triangle, places : (q, 3) corners, mesh points, and (q, 2)
    weights : (q,) area times extent out of the plane
    cells, group : (k,) mesh cells, sorted, and (q,) which of them a place lies in
    inner : whole cells that one pass over them integrates, none of ``cells``; None for no such pass
    """

    triangle: Array
    places: Array
    weights: Array
    cells: Array
    group: Array
    inner: InnerCells | None


def interior_of(mesh: Mesh, overlay: Overlay, extent: Callable[[Array], Array], *, by_pass: bool) -> Interior:
    """The places inside an overlay; ``extent``: places (q, 2) -> (q,) out of the plane.

    by_pass : whole cells are left to one pass over them (`sampling.inner`)
    """
    whole = overlay.whole
    inner = inner_cells(mesh, whole, np.unique(overlay.corner_cell)) if by_pass else None
    if inner is not None:
        whole = whole[:0]
    triangles, first = triangles_of(mesh, whole)
    corners = np.concatenate([mesh.points[triangles], overlay.corners])
    u, v = corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]
    sizes = 0.5 * (u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0])
    sizes[len(triangles) :] *= overlay.corner_weight
    # In the few cut cells of a large volume two orders more would not show.
    places, shares = within(corners, coarse=inner is not None)
    per = len(shares)
    triangle = np.repeat(np.concatenate([triangles, overlay.corner_triangle]), per, axis=0)
    weights = (sizes[:, None] * shares).ravel() * extent(places)
    held = np.concatenate([np.repeat(whole, np.diff(first)), overlay.corner_cell])
    cells, group = np.unique(np.repeat(held, per), return_inverse=True)
    return Interior(triangle, places, weights, cells, group, inner)


def keep_averages(
    samples: Samples, probe: Probe, cells: Array, group: Array, weights: Array, whole: Array
) -> Samples:
    """Samples shifted so that each whole cell has the average that the file gives it.

    Blended fits keep averages only to their order: too little across a
    shock, where a volume would seem to gain or lose what it holds.

    cells, group, weights : of an `Interior`
    whole : (k,) bool, cells that lie wholly inside
    """
    weight = sum_groups(group, len(cells), weights[:, None])[whole]
    known = {
        role: field.at(cells).astype(float)
        for of_place in probe.groups
        if of_place.sampler.location == "cell"
        for role, field in zip(of_place.roles, of_place.fields)
    }

    def shifted(sampled: Mapping[str, Sampled]) -> dict[str, Sampled]:
        out = dict(sampled)
        for role, average in known.items():
            value = sampled[role].value.reshape(len(group), -1)
            total = sum_groups(group, len(cells), value * weights[:, None])
            shift = np.zeros_like(total)
            columns = average.shape[1]
            shift[whole, :columns] = average[whole] - total[whole, :columns] / weight
            moved = (value + shift[group]).reshape(sampled[role].value.shape)
            out[role] = Sampled(moved, sampled[role].gradient)
        return out

    by_degree = {degree: shifted(sampled) for degree, sampled in samples.by_degree.items()}
    return replace(samples, by_degree=by_degree, best=shifted(samples.best))


def sum_groups(group: Array, count: int, values: Array) -> Array:
    """(count, c) sums of values (q, c) over the places of each group."""
    return np.column_stack([np.bincount(group, column, count) for column in values.T])
