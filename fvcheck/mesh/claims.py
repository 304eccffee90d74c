"""What the file says about patches: which edges they claim, by whatever means."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np

from fvcheck.errors import MeshError
from fvcheck.mesh.celltypes import polygons_of, segments_of
from fvcheck.mesh.gather import Raw, expand_cells
from fvcheck.mesh.piece import Piece
from fvcheck.mesh.stored import as_array

Array = np.ndarray

_TAG_NAMES = (
    "patch", "patchid", "patch_id", "boundary", "boundaryid", "boundary_id", "gmsh:physical", "cell_tags",
    "medit:ref", "cellentityids", "region", "regionid", "region_id", "bc", "bcid", "bc_id", "physical",
    "marker", "tag",
)  # fmt: skip
_TAG_WORDS = re.compile(r"(?:^|[^a-z])(?:id|ids|tag|tags|ref|marker|markers|physical|patch|boundary|group)$")
_NO_TAG = re.compile(r"global|original|process|rank|ghost|partition|element.?id|cell.?id|geometrical")

_SEAM = re.compile(r"interface|interior|internal|connect|abutting", re.IGNORECASE)

LINE, FACE = 0, 1


@dataclass(frozen=True, eq=False)
class Claims:
    """Edges that patches claim, in raw point numbers.

    names : patch names, in the order of the file
    ends (s, 2), patch (s,), face (s,) number of the line cell or named face a
    segment came from, ``origin`` (s,) `LINE` or `FACE`; sorted by precedence
    vertices : (patch, raw points) of patches given by their points
    """

    names: tuple[str, ...]
    kinds: dict[str, str]
    ends: Array
    patch: Array
    face: Array
    origin: Array
    vertices: tuple[tuple[int, Array], ...]

    def is_wall(self, patch: Array) -> Array:
        """(e,) whether a patch bounds the flow: it is one (not -1), and not named after a seam of blocks."""
        return np.array([not _SEAM.search(name) for name in self.names] + [False])[patch]


class _Collector:
    def __init__(self) -> None:
        self.numbers: dict[str, int] = {}
        self.kinds: dict[str, str] = {}
        self.ends: list[Array] = []
        self.patch: list[Array] = []
        self.face: list[Array] = []
        self.origin: list[Array] = []
        self.vertices: list[tuple[int, Array]] = []
        self.n_faces = 0

    def number(self, name: str) -> int:
        return self.numbers.setdefault(name, len(self.numbers))

    def add(self, ends: Array, patch: Array, face: Array, origin: int, n_faces: int) -> None:
        self.ends.append(ends)
        self.patch.append(patch)
        self.face.append(face + self.n_faces)
        self.origin.append(np.full(len(ends), origin))
        self.n_faces += n_faces

    def result(self) -> Claims:
        def joined(arrays: list[Array], empty: Array) -> Array:
            return np.concatenate(arrays) if arrays else empty

        none = np.zeros(0, np.int64)
        return Claims(
            names=tuple(self.numbers),
            kinds=self.kinds,
            ends=joined(self.ends, none.reshape(0, 2)),
            patch=joined(self.patch, none),
            face=joined(self.face, none),
            origin=joined(self.origin, none),
            vertices=tuple(self.vertices),
        )


def collect(pieces: Sequence[Piece], raw: Raw, front: Array | None) -> Claims:
    """Claims of named faces, then of tagged line cells, then of line cells in a block of their own.

    ``front`` (n,) marks the raw points of the front plane of a one-cell-thick
    export, where faces are polygons; None for a plane file.
    """
    found = _Collector()
    for piece, base in zip(pieces, raw.point_start):
        for name, faces in piece.patches.items():
            number = found.number(name)
            if faces.kind:
                found.kinds.setdefault(name, faces.kind)
            nodes, offsets = np.asarray(faces.nodes, np.int64), np.asarray(faces.offsets, np.int64)
            _check(name, nodes, offsets, len(piece.points))
            nodes = nodes + base
            if faces.by_vertex:
                found.vertices.append((number, nodes if front is None else nodes[front[nodes]]))
                continue
            ends, face = _pairs(offsets, nodes, front, closed=front is not None)
            found.add(ends, np.full(len(ends), number), face, FACE, len(offsets) - 1)
    _collect_cells(found, pieces, raw, front)
    return found.result()


def _check(name: str, nodes: Array, offsets: Array, n_points: int) -> None:
    if len(nodes) and (nodes.min() < 0 or nodes.max() >= n_points):
        raise MeshError(
            f"patch '{name}' uses a point that does not exist", mend="The patch lists are damaged."
        )
    if len(offsets) == 0 or offsets[0] != 0 or offsets[-1] != len(nodes) or (np.diff(offsets) < 0).any():
        raise MeshError(f"the faces of patch '{name}' do not fit their nodes", mend="The file is damaged.")


def _collect_cells(found: _Collector, pieces: Sequence[Piece], raw: Raw, front: Array | None) -> None:
    dimension = 1 if front is None else 2
    cells = raw.cells_of(dimension)
    patch = np.full(len(cells), -1, np.int64)
    owner = raw.piece_of_cell(cells)
    for p in np.unique(owner).tolist():
        mine = owner == p
        local = cells[mine] - raw.cell_start[p]
        full = (raw.dimension[raw.cell_start[p] : raw.cell_start[p + 1]] == dimension + 1).any()
        block = "" if full else pieces[p].name.rstrip("/").rsplit("/", 1)[-1]
        patch[mine] = _patch_of_cells(found, pieces[p], local, block)
    # Unmarked cells are kept: they may lie inside the domain, which a hint then says.
    if front is None:
        lines = expand_cells(raw, cells, segments_of)
        ends = lines.nodes.reshape(-1, 2)
        face = np.searchsorted(cells, lines.source)
    else:
        sides = expand_cells(raw, cells, lambda kind, size: polygons_of(kind, size, False))
        ends, polygon = _pairs(sides.offsets, sides.nodes, front, closed=True)
        face = np.searchsorted(cells, sides.source[polygon])
    found.add(ends, patch[face], face, LINE, len(cells))


def _patch_of_cells(found: _Collector, piece: Piece, local: Array, block: str) -> Array:
    """Patch number of each line cell of a piece; -1 where nothing names one."""
    out = np.full(len(local), -1, np.int64)
    name = tag_array(piece, local)
    if name is None or (block and not piece.tag_names.get(name)):
        # A block's own name says more than a bare number.
        return np.full(len(local), found.number(block)) if block else out
    ids = np.asarray(piece.cell_data[name]).reshape(-1)[local].astype(np.int64)
    names = piece.tag_names.get(name, {})
    present = np.unique(ids).tolist()
    for number in [n for n in names if n in present]:  # in the order of the file
        out[ids == number] = found.number(names[number])
    for number in present:
        if number not in names and number != 0:
            out[ids == number] = found.number(f"patch-{number}")
    return out


def tag_array(piece: Piece, local: Array) -> str | None:
    """Name of the integer cell array that marks patches on the line cells ``local``, or None."""
    best: tuple[int, int, str] | None = None
    for order, (name, array) in enumerate(piece.cell_data.items()):
        array = as_array(array)
        named = name in piece.tag_names
        if array.size != len(piece.types):
            continue
        if array.dtype.kind not in "iu" and not (named and np.isfinite(np.asarray(array, float)).all()):
            continue
        word = name.lower()
        if named:
            rank = 0
        elif _NO_TAG.search(word) and word not in _TAG_NAMES:
            continue
        elif word in _TAG_NAMES:
            rank = 1 + _TAG_NAMES.index(word)
        elif _TAG_WORDS.search(re.sub(r"(?<=[a-z])(?=[A-Z])", "_", name).lower()):
            rank = 1 + len(_TAG_NAMES)
        else:
            continue
        ids = np.unique(np.asarray(array).reshape(-1)[local])
        if not (ids != 0).any() and not any(int(i) in piece.tag_names.get(name, {}) for i in ids):
            continue
        if not named and len(local) > 16 and len(ids) > len(local) // 2:
            continue  # a running number, not a mark
        if best is None or (rank, order) < best[:2]:
            best = (rank, order, name)
    return None if best is None else best[2]


def _pairs(offsets: Array, nodes: Array, front: Array | None, *, closed: bool) -> tuple[Array, Array]:
    """Neighbouring nodes of faces that lie in the front plane; with the number of their face.

    Three such nodes are two ends and a middle in whatever order: all three
    pairs are given, those that are no edges are never matched.
    """
    sizes = np.diff(offsets)
    face = np.repeat(np.arange(len(sizes)), sizes)
    if front is not None:
        seen = front[nodes]
        count = np.bincount(face[seen], minlength=len(sizes))
        seen &= (count < sizes)[face]  # a face in the front plane is no side face
    else:
        seen = np.ones(len(nodes), bool)
    count = np.bincount(face[seen], minlength=len(sizes))
    following = np.arange(1, len(nodes) + 1)
    if closed:
        following[offsets[1:][sizes > 0] - 1] = offsets[:-1][sizes > 0]
    inside = np.ones(len(nodes), bool)
    if not closed:
        inside[offsets[1:][sizes > 0] - 1] = False
    good = seen & inside & (count[face] != 3)
    good[good] = seen[following[good]]
    ends = np.column_stack([nodes[good], nodes[following[good]]])
    number = face[good]
    three = np.flatnonzero(count == 3)
    if len(three):
        trio = nodes[seen & np.isin(face, three)].reshape(-1, 3)
        ends = np.vstack([ends, trio[:, :2], trio[:, 1:], trio[:, [0, 2]]])
        number = np.concatenate([number, three, three, three])
    return ends, number
