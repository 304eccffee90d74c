"""Cell types of the VTK file formats, as templates of local node numbers.

Node orders after the public description of the VTK file formats
(https://docs.vtk.org, "VTK File Formats" and the cell classes it links).
"""

from __future__ import annotations

from itertools import pairwise
from math import isqrt

import numpy as np

from fvcheck.errors import MeshError

Part = list[int]

_DIMENSION = {
    0: (0, 1, 2),
    1: (3, 4, 21, 35, 68),
    2: (5, 6, 7, 8, 9, 22, 23, 28, 30, 34, 36, 69, 70),
    3: (10, 11, 12, 13, 14, 15, 16, 24, 25, 26, 27, 29, 31, 32, 33, 37, 41, 42, 71, 72, 73, 74),
}
DIMENSION = np.full(256, -1, np.int8)
for _dimension, _types in _DIMENSION.items():
    DIMENSION[list(_types)] = _dimension

POLYHEDRON = 42
_FIXED_SIZE = {5: 3, 8: 4, 9: 4, 22: 6, 23: 8, 28: 9, 30: 6, 34: 7, 3: 2, 21: 3, 35: 4}
_LEAST_SIZE = {6: 3, 7: 3, 36: 6, 4: 2, 68: 2, 69: 3, 70: 4}


def check_size(kind: int, size: int) -> None:
    """Refuse a cell with a number of nodes its type cannot have."""
    fixed = _FIXED_SIZE.get(kind)
    if fixed is not None and size != fixed:
        raise MeshError(
            f"a cell of type {kind} has {size} nodes instead of {fixed}", mend="The cell lists are damaged."
        )
    if size < _LEAST_SIZE.get(kind, 0):
        raise MeshError(f"a cell of type {kind} has only {size} nodes", mend="The cell lists are damaged.")


def polygons_of(kind: int, size: int, keep_centres: bool) -> list[Part]:
    """Polygons that stand for a 2D cell of ``size`` nodes, mid-edge nodes in boundary order."""
    check_size(kind, size)
    if kind in (5, 7, 9):
        return [list(range(size))]
    if kind == 6:  # every second triangle of a strip is turned
        return [[i, i + 1, i + 2] if i % 2 == 0 else [i + 1, i, i + 2] for i in range(size - 2)]
    if kind == 8:
        return [[0, 1, 3, 2]]
    if kind == 22:
        return [[0, 3, 1, 4, 2, 5]]
    if kind == 23:
        return [[0, 4, 1, 5, 2, 6, 3, 7]]
    if kind == 30:
        return [[0, 4, 1, 2, 5, 3]]
    if kind == 28:
        if keep_centres:
            return [[0, 4, 8, 7], [4, 1, 5, 8], [8, 5, 2, 6], [7, 8, 6, 3]]
        return [[0, 4, 1, 5, 2, 6, 3, 7]]
    if kind == 34:
        if keep_centres:
            return [[0, 3, 6, 5], [3, 1, 4, 6], [5, 6, 4, 2]]
        return [[0, 3, 1, 4, 2, 5]]
    if kind == 36:
        if size % 2:
            raise MeshError(f"a quadratic polygon has an odd number of nodes, {size}")
        half = size // 2
        return [[node for i in range(half) for node in (i, half + i)]]
    return _lagrange_triangle(size, keep_centres) if kind == 69 else _lagrange_quad(size, keep_centres)


def _lagrange_triangle(size: int, keep_centres: bool) -> list[Part]:
    order = (isqrt(8 * size + 1) - 3) // 2
    if (order + 1) * (order + 2) // 2 != size:
        raise MeshError(f"a Lagrange triangle cannot have {size} nodes")
    if order < 3 or not keep_centres:
        return [_outline(3, order, turned=False)]
    where: dict[tuple[int, int], int] = {}
    first, low, span = 0, 0, order
    while span >= 0:  # rings of nodes from outside inwards
        a, b, c = (low, low), (low + span, low), (low, low + span)
        ring = [a] if span == 0 else [a, b, c]
        for p, q in ((a, b), (b, c), (c, a)):
            for s in range(1, span):
                ring.append((p[0] + (q[0] - p[0]) * s // span, p[1] + (q[1] - p[1]) * s // span))
        for node, place in enumerate(ring):
            where[place] = first + node
        first, low, span = first + len(ring), low + 1, span - 3
    parts = []
    for i in range(order):
        for j in range(order - i):
            parts.append([where[i, j], where[i + 1, j], where[i, j + 1]])
            if i + j < order - 1:
                parts.append([where[i + 1, j], where[i + 1, j + 1], where[i, j + 1]])
    return parts


def _lagrange_quad(size: int, keep_centres: bool) -> list[Part]:
    order = isqrt(size) - 1
    if (order + 1) ** 2 != size:
        raise MeshError(
            f"a Lagrange quadrilateral of {size} nodes has different orders along its sides",
            mend="Export with the same order both ways, or linear cells.",
        )
    if order < 2 or not keep_centres:
        return [_outline(4, order, turned=True)]
    inner = order - 1

    def node(i: int, j: int) -> int:
        if i in (0, order) and j in (0, order):
            return {(0, 0): 0, (1, 0): 1, (1, 1): 2, (0, 1): 3}[i // order, j // order]
        if j == 0 or j == order:
            return 4 + i - 1 + (2 * inner if j else 0)
        if i == 0 or i == order:
            return 4 + j - 1 + (inner if i else 3 * inner)
        return 4 + 4 * inner + (i - 1) + inner * (j - 1)

    return [
        [node(i, j), node(i + 1, j), node(i + 1, j + 1), node(i, j + 1)]
        for j in range(order)
        for i in range(order)
    ]


def _outline(corners: int, order: int, *, turned: bool) -> Part:
    """Boundary nodes of a Lagrange cell in order; ``turned``: its last two edges are stored backwards."""
    out = []
    for side in range(corners):
        between = [corners + side * (order - 1) + s for s in range(order - 1)]
        if turned and side >= 2:
            between.reverse()
        out += [side, *between]
    return out


def segments_of(kind: int, size: int) -> list[Part]:
    """Two-node segments of a line cell, in order along it."""
    check_size(kind, size)
    if kind in (3, 4):
        path = list(range(size))
    else:  # ends first, then the nodes between them
        path = [0, *range(2, size), 1]
    return [list(pair) for pair in pairwise(path)]


def _prism(n: int) -> list[Part]:
    sides = [[i, (i + 1) % n, n + (i + 1) % n, n + i] for i in range(n)]
    return [list(range(n)), list(range(n, 2 * n)), *sides]


def _with_middles(faces: list[Part], edges: list[tuple[int, int]], first: int) -> list[Part]:
    """Faces with mid-edge nodes ``first``, ``first + 1``, … of ``edges`` put between the corners."""
    middle = {frozenset(edge): first + i for i, edge in enumerate(edges)}
    out = []
    for face in faces:
        ring = []
        for a, b in zip(face, face[1:] + face[:1]):
            ring.append(a)
            if frozenset((a, b)) in middle:
                ring.append(middle[frozenset((a, b))])
        out.append(ring)
    return out


_HEX_EDGES = [(0, 1), (1, 2), (2, 3), (3, 0), (4, 5), (5, 6), (6, 7), (7, 4), (0, 4), (1, 5), (2, 6), (3, 7)]
_WEDGE_EDGES = [(0, 1), (1, 2), (2, 0), (3, 4), (4, 5), (5, 3), (0, 3), (1, 4), (2, 5)]
_QUADRATIC_HEX = _with_middles(_prism(4), _HEX_EDGES, 8)
_QUADRATIC_WEDGE = _with_middles(_prism(3), _WEDGE_EDGES, 6)

SOLID_FACES: dict[int, tuple[int, list[Part]]] = {
    11: (8, [[0, 1, 3, 2], [4, 5, 7, 6], [0, 1, 5, 4], [2, 3, 7, 6], [0, 2, 6, 4], [1, 3, 7, 5]]),
    12: (8, _prism(4)),
    13: (6, _prism(3)),
    15: (10, _prism(5)),
    16: (12, _prism(6)),
    25: (20, _QUADRATIC_HEX),
    26: (15, _QUADRATIC_WEDGE),
    29: (27, _QUADRATIC_HEX),
    31: (12, _with_middles(_prism(3), _WEDGE_EDGES[:6], 6)),
    32: (18, _QUADRATIC_WEDGE),
    33: (24, _QUADRATIC_HEX),
}
"""3D types that can be one cell thick: number of nodes, faces (centre nodes of faces left out)."""

WEDGE_FACES: dict[int, tuple[int, list[Part]]] = {
    **SOLID_FACES,
    10: (4, [[0, 1, 2], [0, 1, 3], [1, 2, 3], [2, 0, 3]]),
    14: (5, [[0, 1, 2, 3], [0, 1, 4], [1, 2, 4], [2, 3, 4], [3, 0, 4]]),
}
"""Those of a wedge: its cells at the axis may be tetrahedra and pyramids too."""

QUADRATIC_SOLIDS = (25, 26, 29, 32, 33)
