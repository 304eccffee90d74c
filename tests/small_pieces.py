"""Small pieces to build meshes from, for the tests."""

from __future__ import annotations

import numpy as np

from fvcheck.mesh.piece import NamedFaces, Piece

POLYGON_TYPES = {3: 5, 4: 9}


def piece(points, cells, types=None, **more) -> Piece:
    """Cells as lists of nodes; types default to triangle, quad, polygon; points may be plane."""
    points = np.asarray(points)
    points = points if points.dtype == np.float32 else points.astype(float)
    if points.shape[1] == 2:
        points = np.column_stack([points, np.zeros(len(points), points.dtype)])
    types = [POLYGON_TYPES.get(len(c), 7) for c in cells] if types is None else types
    sizes = [len(c) for c in cells]
    return Piece(
        points=points,
        types=np.array(types, np.uint8),
        offsets=np.concatenate([[0], np.cumsum(sizes, dtype=np.int64)]).astype(np.int64),
        nodes=np.array([n for c in cells for n in c], np.int64),
        **more,
    )


def named(*faces, by_vertex=False, kind="") -> NamedFaces:
    offsets = np.concatenate([[0], np.cumsum([len(f) for f in faces])]).astype(np.int64)
    return NamedFaces(offsets, np.array([n for f in faces for n in f], np.int64), by_vertex, kind)


def block(nx, ny, x0=0.0, y0=0.0, x1=1.0, y1=1.0):
    """Points (n, 2) and quads of a regular block, x fastest."""
    x, y = np.meshgrid(np.linspace(x0, x1, nx + 1), np.linspace(y0, y1, ny + 1))
    row = nx + 1
    quads = [
        [j * row + i, j * row + i + 1, (j + 1) * row + i + 1, (j + 1) * row + i]
        for j in range(ny)
        for i in range(nx)
    ]
    return np.column_stack([x.ravel(), y.ravel()]), quads


def with_hole(nx=6, ny=4, missing=((2, 1),), **where):
    """A block without some of its quads."""
    points, quads = block(nx, ny, **where)
    return points, [q for k, q in enumerate(quads) if (k % nx, k // nx) not in missing]


def renumbered(p: Piece, rng, *, turn=True) -> Piece:
    """The same plane piece with points and cells in another order and cells turned at random."""
    n, m = len(p.points), len(p.types)
    point_order, cell_order = rng.permutation(n), rng.permutation(m)
    new = np.argsort(point_order)
    cells = []
    for i in cell_order:
        nodes = new[p.nodes[p.offsets[i] : p.offsets[i + 1]]]
        if turn and rng.random() < 0.5:
            nodes = nodes[::-1]
        cells.append(np.roll(nodes, rng.integers(len(nodes))).tolist())
    return piece(p.points[point_order], cells, p.types[cell_order])


def length(mesh, name):
    step = mesh.points[mesh.patch_edges(name)]
    return float(np.hypot(*(step[:, 1] - step[:, 0]).T).sum())


def codes(assembly):
    return [hint.code for hint in assembly.hints]
