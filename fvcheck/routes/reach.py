"""How far from a body to measure, by the gap to what is next to it and the cells around it."""

from __future__ import annotations

import numpy as np

from fvcheck.flow import Flow
from fvcheck.mesh.boundary import clearance, patch_chains
from fvcheck.mesh.mesh import Mesh

Array = np.ndarray

# In body sizes: nearer, layers on the body are not resolved by most meshes; farther,
# the mesh coarsens. Of the gap to the next boundary a fifth is left to its layer.
_NEAR, _FAR, _OF_GAP = 0.15, 1.0, 0.8

# A band narrower than this ratio of distances holds too few surfaces to average over.
_WIDEST = 0.5

# Cells that a surface stays away from the body.
_CELLS = 2.0


def body_size(mesh: Mesh, body: str) -> float:
    """The longer side of the box around a body [m]."""
    x = mesh.points[mesh.patch_edges(body)].reshape(-1, 2)
    return float((x.max(axis=0) - x.min(axis=0)).max())


def is_closed(mesh: Mesh, body: str) -> bool:
    """Whether the patch bounds a body all around, so that a pressure level has no force on it."""
    return all(closed for _, closed in patch_chains(mesh, body))


def default_range(flow: Flow, body: str) -> tuple[float, float]:
    """(nearest, farthest) distance from a body at which its force is best measured."""
    mesh = flow.mesh
    size, gap = body_size(mesh, body), clearance(mesh, body)
    patch = mesh.boundary.names.index(body)
    cells = mesh.boundary.cells[mesh.boundary.patch == patch]
    cell = float(np.sqrt(np.median(mesh.areas[cells])))
    x0, y0, x1, y1 = mesh.bounds
    # A body that touches a wall has no gap: its own size has to do.
    far = min(_FAR * size, _OF_GAP * gap if gap > 0.0 else np.inf, 0.25 * max(x1 - x0, y1 - y0))
    near = min(max(_NEAR * size, _CELLS * cell), _WIDEST * far)
    return near, far


def default_distances(near: float, far: float) -> tuple[float, float, float]:
    """Three distances from near to far, in a constant ratio."""
    return near, float(np.sqrt(near * far)), far
