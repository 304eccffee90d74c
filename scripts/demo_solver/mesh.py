"""Cells and faces of a plane mesh of polygons."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from scipy.sparse import csr_array

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Mesh:
    """A plane mesh with N cells, F faces of which the last B bound the domain.

    points : (n, 2) float. Node coordinates [m].
    offsets, nodes : cell i has the nodes ``nodes[offsets[i]:offsets[i+1]]``, counter-clockwise.
    face_nodes : (F, 2) int. A face runs from its first node to its second, owner on its left.
    owner : (F,) int. Cell that the face normal leaves.
    neighbour : (F-B,) int. Cell that the normal of an interior face enters.
    patch : (B,) int. Patch of each boundary face, an index into ``names``.
    """

    points: Array
    offsets: Array
    nodes: Array
    face_nodes: Array
    owner: Array
    neighbour: Array
    patch: Array
    names: tuple[str, ...]

    @property
    def n_cells(self) -> int:
        return self.offsets.size - 1

    @property
    def n_faces(self) -> int:
        return self.owner.size

    @property
    def n_inner(self) -> int:
        """Number of interior faces; they come first."""
        return self.neighbour.size

    @cached_property
    def cell_of_node(self) -> Array:
        """(k,) int: the cell to which each entry of ``nodes`` belongs."""
        return np.repeat(np.arange(self.n_cells), np.diff(self.offsets))

    @cached_property
    def _cell_moments(self) -> tuple[Array, Array]:
        following = np.arange(1, self.nodes.size + 1)
        following[self.offsets[1:] - 1] = self.offsets[:-1]
        # Corners relative to the first one of each cell: the products lose no digits far from the origin.
        origin = self.points[self.nodes[self.offsets[:-1]]]
        a = self.points[self.nodes] - origin[self.cell_of_node]
        b = a[following]
        cross = a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0]
        volume = 0.5 * np.add.reduceat(cross, self.offsets[:-1])
        moment = np.add.reduceat(cross[:, None] * (a + b), self.offsets[:-1]) / 6
        return volume, origin + moment / volume[:, None]

    @property
    def volume(self) -> Array:
        """(N,) float: cell areas, that is volumes per metre of depth [m²]."""
        return self._cell_moments[0]

    @property
    def centre(self) -> Array:
        """(N, 2) float: cell centroids [m]."""
        return self._cell_moments[1]

    @cached_property
    def area(self) -> Array:
        """(F, 2) float: face normals times face lengths [m]; boundary normals leave the domain."""
        along = self.points[self.face_nodes[:, 1]] - self.points[self.face_nodes[:, 0]]
        return np.column_stack([along[:, 1], -along[:, 0]])

    @cached_property
    def face_centre(self) -> Array:
        """(F, 2) float: face midpoints [m]."""
        return self.points[self.face_nodes].mean(axis=1)

    @cached_property
    def delta(self) -> Array:
        """(F, 2) float: owner's centroid to neighbour's, or to the midpoint of a boundary face [m]."""
        end = self.face_centre.copy()
        end[: self.n_inner] = self.centre[self.neighbour]
        return end - self.centre[self.owner]

    @cached_property
    def divergence(self) -> csr_array:
        """(N, F) sparse: adds up over the faces of each cell what leaves it."""
        rows = np.concatenate([self.owner, self.neighbour])
        columns = np.concatenate([np.arange(self.n_faces), np.arange(self.n_inner)])
        signs = np.concatenate([np.ones(self.n_faces), -np.ones(self.n_inner)])
        return csr_array((signs, (rows, columns)), shape=(self.n_cells, self.n_faces))

    def on(self, *names: str) -> Array:
        """(B,) bool: which boundary faces lie on the patches of these names."""
        return np.isin(self.patch, [self.names.index(name) for name in names])


def build_mesh(
    points: Array, cells: Sequence[Array], names: Sequence[str], patch_at: Callable[[Array], Array]
) -> Mesh:
    """Number the faces of a mesh given as node numbers of its cells.

    points : (n, 2) float; nodes that no cell uses are dropped
    cells : (m, k) int arrays, one per kind of cell, each row counter-clockwise
    patch_at : for (B, 2) midpoints of boundary faces their indices into ``names``

    Raises ValueError if a cell is not counter-clockwise or an edge has more than two cells.
    """
    nodes = np.concatenate([block.ravel() for block in cells])
    counts = np.concatenate([np.full(len(block), block.shape[1]) for block in cells])
    used, nodes = np.unique(nodes, return_inverse=True)
    points = points[used]
    offsets = np.concatenate([[0], np.cumsum(counts)])
    cell = np.repeat(np.arange(counts.size), counts)

    following = np.arange(1, nodes.size + 1)
    following[offsets[1:] - 1] = offsets[:-1]
    edges = np.column_stack([nodes, nodes[following]])
    low, high = edges.min(axis=1), edges.max(axis=1)
    order = np.lexsort((cell, high, low))
    new = np.ones(order.size, dtype=bool)
    new[1:] = (np.diff(low[order]) != 0) | (np.diff(high[order]) != 0)
    first = np.flatnonzero(new)
    sides = np.diff(np.append(first, order.size))
    if sides.max() > 2:
        raise ValueError("an edge of the mesh has more than two cells")

    inner, outer = order[first[sides == 2]], order[first[sides == 1]]
    face_nodes = edges[np.concatenate([inner, outer])]
    mesh = Mesh(
        points=points,
        offsets=offsets,
        nodes=nodes,
        face_nodes=face_nodes,
        owner=cell[np.concatenate([inner, outer])],
        neighbour=cell[order[first[sides == 2] + 1]],
        patch=patch_at(points[face_nodes[inner.size :]].mean(axis=1)),
        names=tuple(names),
    )
    if mesh.volume.min() <= 0:
        raise ValueError("a cell of the mesh is not counter-clockwise")
    return mesh


def jittered_rectangle(
    box: tuple[float, float, float, float], nx: int, ny: int, jitter: float = 0.2, seed: int = 1
) -> Mesh:
    """A rectangle of nx × ny irregular quadrangles, about half of them cut into triangles.

    Meant for tests: no grid line is straight, no two cells are alike. ``box`` is
    (x0, y0, x1, y1); inner nodes move by up to ``jitter`` times the spacing. The
    patches are left, right, bottom and top.
    """
    x0, y0, x1, y1 = box
    rng = np.random.default_rng(seed)
    x, y = np.meshgrid(np.linspace(x0, x1, nx + 1), np.linspace(y0, y1, ny + 1))
    shift = (
        rng.uniform(-jitter, jitter, (2, ny + 1, nx + 1))
        * np.array([(x1 - x0) / nx, (y1 - y0) / ny])[:, None, None]
    )
    shift[:, [0, -1], :] = 0
    shift[:, :, [0, -1]] = 0
    points = np.column_stack([(x + shift[0]).ravel(), (y + shift[1]).ravel()])

    corner = (np.arange(ny)[:, None] * (nx + 1) + np.arange(nx)).ravel()
    quads = np.column_stack([corner, corner + 1, corner + nx + 2, corner + nx + 1])
    cut = rng.random(quads.shape[0]) < 0.5
    triangles = np.concatenate([quads[cut][:, [0, 1, 2]], quads[cut][:, [0, 2, 3]]])

    def patch_at(mid: Array) -> Array:
        gaps = np.abs(np.column_stack([mid[:, 0] - x0, mid[:, 0] - x1, mid[:, 1] - y0, mid[:, 1] - y1]))
        return gaps.argmin(axis=1)

    return build_mesh(points, [quads[~cut], triangles], ("left", "right", "bottom", "top"), patch_at)
