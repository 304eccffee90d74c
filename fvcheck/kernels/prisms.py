"""Faces of 3D cells that lie in one of two planes, parallel or meeting in an axis."""

from __future__ import annotations

import numpy as np
from numba import njit

FRONT, BACK, BETWEEN, ELSEWHERE, AXIS = 0, 1, 2, 3, 4


@njit(cache=True)
def front_faces(cells, offsets, nodes, template, cell_faces, face_offsets, face_nodes, side):
    """The one face of each templated cell whose nodes all lie in the front plane.

    cells (c,); template t has faces ``cell_faces[t]:cell_faces[t+1]`` of local
    nodes; side (n,) where each point lies; points on the axis of a wedge lie in
    both planes. Returns offsets (c+1,), nodes; the range is empty for a cell
    without exactly one front and one back face.
    """
    out_offsets = np.zeros(len(cells) + 1, np.int64)
    out = np.empty(len(nodes), np.int64)
    k = 0
    for i in range(len(cells)):
        base = offsets[cells[i]]
        fronts, backs, found = 0, 0, -1
        for f in range(cell_faces[template[i]], cell_faces[template[i] + 1]):
            front, back, axis = 0, 0, 0
            for s in range(face_offsets[f], face_offsets[f + 1]):
                where = side[nodes[base + face_nodes[s]]]
                front += where == FRONT
                back += where == BACK
                axis += where == AXIS
            size = face_offsets[f + 1] - face_offsets[f]
            if front > 0 and front + axis == size:
                fronts += 1
                found = f
            backs += back > 0 and back + axis == size
        if fronts == 1 and backs == 1:
            for s in range(face_offsets[found], face_offsets[found + 1]):
                out[k] = nodes[base + face_nodes[s]]
                k += 1
        out_offsets[i + 1] = k
    return out_offsets, out[:k].copy()


@njit(cache=True)
def front_faces_of_polyhedra(first, last, cell_faces, face_offsets, face_nodes, side):
    """As `front_faces`, for cells whose faces are ``cell_faces[first[i]:last[i]]`` of global nodes."""
    out_offsets = np.zeros(len(first) + 1, np.int64)
    out = np.empty(len(face_nodes), np.int64)
    k = 0
    for i in range(len(first)):
        fronts, backs, found = 0, 0, -1
        for c in range(first[i], last[i]):
            f = cell_faces[c]
            front, back, axis = 0, 0, 0
            for s in range(face_offsets[f], face_offsets[f + 1]):
                where = side[face_nodes[s]]
                front += where == FRONT
                back += where == BACK
                axis += where == AXIS
            size = face_offsets[f + 1] - face_offsets[f]
            if front > 0 and front + axis == size:
                fronts += 1
                found = f
            backs += back > 0 and back + axis == size
        if fronts == 1 and backs == 1:
            for s in range(face_offsets[found], face_offsets[found + 1]):
                out[k] = face_nodes[s]
                k += 1
        out_offsets[i + 1] = k
    return out_offsets, out[:k].copy()
