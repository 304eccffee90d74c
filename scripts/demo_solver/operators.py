"""Gradients, face values and fluxes of one unknown: second order on any cells.

The usual collocated finite-volume pieces (Ferziger & Peric, "Computational
Methods for Fluid Dynamics"; Jasak 1996): least-squares gradients, linear
interpolation with a skewness correction, diffusion split into a part along the
line of centroids and a correction by the interpolated gradient. No limiter, so
that a steady run converges to rounding.
"""

from __future__ import annotations

import numpy as np
from scipy.sparse import coo_array, csr_array

from .mesh import Mesh

Array = np.ndarray


def dot(a: Array, b: Array) -> Array:
    """Contract the last axis of ``a`` (rows of vectors or of gradients) with the vectors ``b``."""
    return np.einsum("i...j,ij->i...", a, b)


def times(scalar: Array, a: Array) -> Array:
    """Multiply each row of ``a`` by its scalar."""
    return scalar.reshape(-1, *[1] * (a.ndim - 1)) * a


class Unknown:
    """How one unknown is discretised: the mesh, and what holds at the boundary.

    A boundary face either has a fixed value, or takes one from its cell: with a
    zero normal gradient, or, where ``extrapolated`` (the pressure), with the
    cell's own gradient.

    Arrays of cells are (N,) or (N, 2), of faces (F,) or (F, 2), of boundary faces
    (B,) or (B, 2); gradients carry one more axis at the end, the direction.
    """

    def __init__(self, mesh: Mesh, fixed: Array, value: Array, *, extrapolated: bool = False) -> None:
        self.mesh = mesh
        self.fixed = fixed
        self.value = value
        area, delta, owner = mesh.area, mesh.delta, mesh.owner
        inner = slice(0, mesh.n_inner)
        along = dot(delta, area)

        self.stretch = dot(area, area) / along
        """(F,) |S|² / d·S, the over-relaxed share of a face's diffusion along d (Jasak 1996)."""
        self.cross = area - times(self.stretch, delta)
        """(F, 2) what is left of the face normal beside ``stretch * delta``."""

        reach = mesh.face_centre - mesh.centre[owner]
        self.weight = dot(reach, area)[inner] / along[inner]
        """(F-B,) share of the neighbour in a value interpolated to an interior face."""
        self.skew = reach[inner] - times(self.weight, delta[inner])
        """(F-B, 2) from where d meets the face to the midpoint of the face."""
        self.reach = (reach, mesh.face_centre[inner] - mesh.centre[mesh.neighbour])
        """From the centroids of owner and neighbour to the midpoint of the face."""

        normal = times(1 / np.sqrt(dot(area, area)), area)
        self.offset = reach[mesh.n_inner :].copy()
        """(B, 2) the step over which a boundary value without fixing is extrapolated."""
        if not extrapolated:
            self.offset -= times(dot(reach, normal)[mesh.n_inner :], normal[mesh.n_inner :])
        self._gradient = least_squares(mesh, fixed)

    def gradient(self, cells: Array) -> Array:
        """Least-squares gradient in every cell, exact for linear fields."""
        data = np.concatenate([cells, self.value])
        return np.stack([matrix @ data for matrix in self._gradient], axis=-1)

    def between(self, cells: Array) -> Array:
        """Linear interpolation along the line of centroids, interior faces only."""
        mesh = self.mesh
        return times(1 - self.weight, cells[mesh.owner[: mesh.n_inner]]) + times(
            self.weight, cells[mesh.neighbour]
        )

    def at_boundary(self, cells: Array, gradient: Array) -> Array:
        """Values on the boundary faces."""
        owner = self.mesh.owner[self.mesh.n_inner :]
        free = cells[owner] + dot(gradient[owner], self.offset)
        fixed = self.fixed.reshape(-1, *[1] * (cells.ndim - 1))
        return np.where(fixed, self.value, free)

    def at_faces(self, cells: Array, gradient: Array) -> Array:
        """Values at the midpoints of all faces, by central interpolation."""
        inner = self.between(cells) + dot(self.between(gradient), self.skew)
        return np.concatenate([inner, self.at_boundary(cells, gradient)])

    def convected(self, cells: Array, gradient: Array, flux: Array) -> Array:
        """Values that the mass flux carries through all faces.

        The mean of linear upwind and central interpolation (after Fromm 1968):
        their leading errors in phase have opposite signs.
        """
        mesh = self.mesh
        inner = slice(0, mesh.n_inner)
        owner = mesh.owner[inner]
        from_owner = cells[owner] + dot(gradient[owner], self.reach[0][inner])
        from_neighbour = cells[mesh.neighbour] + dot(gradient[mesh.neighbour], self.reach[1])
        downstream = (flux[inner] >= 0).reshape(-1, *[1] * (cells.ndim - 1))
        values = self.at_faces(cells, gradient)
        values[inner] = 0.5 * (values[inner] + np.where(downstream, from_owner, from_neighbour))
        return values

    def normal_gradient(self, cells: Array, gradient: Array) -> Array:
        """∇φ·S on all faces; zero on boundary faces without a fixed value."""
        mesh = self.mesh
        owner = mesh.owner[mesh.n_inner :]
        across = self.at_neighbour(cells) - cells[mesh.owner]
        interpolated = np.concatenate([self.between(gradient), gradient[owner]])
        result = times(self.stretch, across) + dot(interpolated, self.cross)
        result[mesh.n_inner :][~self.fixed] = 0
        return result

    def at_neighbour(self, cells: Array) -> Array:
        """Values at the far end of ``delta`` of all faces."""
        return np.concatenate([cells[self.mesh.neighbour], self.value])

    def implicit(self, flux: Array, diffusivity: float) -> csr_array:
        """(N, N) matrix of first-order upwind convection and diffusion along ``delta``.

        A good stand-in for the second-order operator in a defect correction: an
        M-matrix whatever the mesh. The imbalance of ``flux`` in a cell is left out.
        """
        mesh = self.mesh
        inner = slice(0, mesh.n_inner)
        owner = mesh.owner[inner]
        conduct = diffusivity * self.stretch
        take = conduct - np.minimum(flux, 0)
        give = conduct[inner] + np.maximum(flux[inner], 0)
        diagonal = np.bincount(owner, take[inner], mesh.n_cells) + np.bincount(
            mesh.neighbour, give, mesh.n_cells
        )
        diagonal += np.bincount(mesh.owner[mesh.n_inner :], take[mesh.n_inner :] * self.fixed, mesh.n_cells)
        cell = np.arange(mesh.n_cells)
        rows = np.concatenate([cell, owner, mesh.neighbour])
        columns = np.concatenate([cell, mesh.neighbour, owner])
        entries = np.concatenate([diagonal, -take[inner], -give])
        return coo_array((entries, (rows, columns)), shape=(mesh.n_cells,) * 2).tocsr()


def least_squares(mesh: Mesh, fixed: Array) -> tuple[csr_array, csr_array]:
    """Rows that give ∂x and ∂y from the values of cells and boundary faces.

    Neighbours of a cell are the cells that share a node with it, and its own
    boundary faces where a value is fixed; weights are inverse squared distances.
    Each matrix is (N, N + B), its columns being the cells, then the boundary faces.
    """
    n, start = mesh.n_cells, mesh.n_inner
    touches = csr_array(
        (np.ones(mesh.nodes.size), (mesh.cell_of_node, mesh.nodes)), shape=(n, mesh.points.shape[0])
    )
    near = (touches @ touches.T).tocoo()
    apart = near.row != near.col
    faces = np.flatnonzero(fixed)
    row = np.concatenate([near.row[apart], mesh.owner[start:][faces]])
    column = np.concatenate([near.col[apart], n + faces])
    step = np.concatenate([mesh.centre, mesh.face_centre[start:]])[column] - mesh.centre[row]
    weight = 1 / dot(step, step)

    moments = np.empty((n, 2, 2))
    for i, j in np.ndindex(2, 2):
        moments[:, i, j] = np.bincount(row, weight * step[:, i] * step[:, j], n)
    entries = times(weight, dot(np.linalg.inv(moments)[row], step))
    # The cell's own value takes part with minus the sum of the others.
    own = [-np.bincount(row, entries[:, axis], n) for axis in (0, 1)]
    row = np.concatenate([row, np.arange(n)])
    column = np.concatenate([column, np.arange(n)])

    def rows(axis: int) -> csr_array:
        data = np.concatenate([entries[:, axis], own[axis]])
        return coo_array((data, (row, column)), shape=(n, n + fixed.size)).tocsr()

    return rows(0), rows(1)
