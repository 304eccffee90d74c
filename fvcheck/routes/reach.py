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

# A single surface has no neighbours to average with, and pressures are steepest near the body.
# On seven second-order runs past a bar (3,000 cells, several angles) the force across the stream
# was off by 0.2 to 0.3 % of the force (rms) nearer than this, by 0.05 to 0.15 % beyond.
_NEAR_ALONE = 0.25

# A band narrower than this ratio of distances holds too few surfaces to average over.
_WIDEST = 0.5

# Sides of the body looked at per place, and parts that a long one is cut into.
_CANDIDATES, _MOST_PARTS = 4, 64

# Cells of a band: more take time and change nothing, on so fine a mesh.
_MOST_CELLS = 20_000

# Cells that a surface stays away from the body.
_CELLS = 2.0


def body_size(mesh: Mesh, body: str) -> float:
    """The longer side of the box around a body [m]."""
    x = mesh.points[mesh.patch_edges(body)].reshape(-1, 2)
    return float((x.max(axis=0) - x.min(axis=0)).max())


def is_closed(mesh: Mesh, body: str) -> bool:
    """Whether the patch bounds a body all around, so that a pressure level has no force on it."""
    return all(closed for _, closed in patch_chains(mesh, body))


def surface_range(flow: Flow, body: str) -> tuple[float, float]:
    """(nearest, farthest) distance from a body at which single surfaces measure its force best."""
    return _range(flow, body, _NEAR_ALONE)


def _range(flow: Flow, body: str, nearest: float) -> tuple[float, float]:
    mesh = flow.mesh
    size, gap = body_size(mesh, body), clearance(mesh, body)
    patch = mesh.boundary.names.index(body)
    cells = mesh.boundary.cells[mesh.boundary.patch == patch]
    cell = float(np.sqrt(np.median(mesh.areas[cells])))
    x0, y0, x1, y1 = mesh.bounds
    # A body that touches a wall has no gap: its own size has to do.
    far = min(_FAR * size, _OF_GAP * gap if gap > 0.0 else np.inf, 0.25 * max(x1 - x0, y1 - y0))
    near = min(max(nearest * size, _CELLS * cell), _WIDEST * far)
    return near, far


def default_distances(near: float, far: float) -> tuple[float, float, float]:
    """Three distances from near to far, in a constant ratio."""
    return near, float(np.sqrt(near * far)), far


def band_range(flow: Flow, body: str) -> tuple[float, float]:
    """(nearest, farthest) distance of the band average; the farthest where more cells change nothing."""
    mesh = flow.mesh
    near, far = _range(flow, body, _NEAR)
    away = distances(mesh, body, mesh.points[mesh.nodes[mesh.offsets[:-1]]], far)
    between = np.sort(away[(away > near) & (away < far)])
    return near, float(between[_MOST_CELLS]) if len(between) > _MOST_CELLS else far


def distances(mesh: Mesh, body: str, places: Array, limit: float) -> Array:
    """(n,) distance of places (n, 2) from a body, inf where it is beyond ``limit`` along x or y.

    To the nearest of the sides whose middles are nearest: long sides are cut first,
    so that hardly ever another one is nearer, and then by little.
    """
    from scipy.spatial import cKDTree

    start, end = _even_sides(mesh.points[mesh.patch_edges(body)])
    low = np.minimum(start, end).min(axis=0) - limit
    high = np.maximum(start, end).max(axis=0) + limit
    near = np.flatnonzero(((places >= low) & (places <= high)).all(axis=1))
    x = places[near]
    found = np.full(len(near), np.inf)
    count = min(_CANDIDATES, len(start))
    _, candidates = cKDTree(0.5 * (start + end)).query(x, k=count)
    for k in candidates.reshape(len(near), count).T:
        step, from_start = end[k] - start[k], x - start[k]
        t = np.sum(from_start * step, axis=1) / np.sum(step * step, axis=1)
        away = from_start - np.clip(t, 0.0, 1.0)[:, None] * step
        np.minimum(found, np.hypot(*away.T), out=found)
    out = np.full(len(places), np.inf)
    out[near] = found
    return out


def _even_sides(edges: Array) -> tuple[Array, Array]:
    """Starts and ends of sides (e, 2, 2), those longer than the median cut into equal parts."""
    length = np.hypot(*(edges[:, 1] - edges[:, 0]).T)
    parts = np.clip(np.ceil(length / np.median(length)), 1, _MOST_PARTS).astype(int)
    number = np.arange(parts.sum()) - np.repeat(np.cumsum(parts) - parts, parts)
    a, step = (np.repeat(v, parts, axis=0) for v in (edges[:, 0], edges[:, 1] - edges[:, 0]))
    share = (number / np.repeat(parts, parts))[:, None]
    return a + share * step, a + (share + 1.0 / np.repeat(parts, parts)[:, None]) * step
