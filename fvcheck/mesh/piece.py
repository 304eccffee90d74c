"""What a reader hands over: the cells and data of a file, as stored.

Every format is brought to one vocabulary, the cell types and node orders of
the open VTK file formats (https://docs.vtk.org, "VTK File Formats"), so that
everything behind the readers knows one kind of mesh only.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path

import numpy as np

from fvcheck.hints import Hint

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Faces:
    """Faces of the polyhedral cells of a piece (VTK type 42).

    ``face_offsets`` (f+1,), ``face_nodes``: nodes of face j are
    ``face_nodes[face_offsets[j]:face_offsets[j+1]]``.
    ``cell_offsets`` (m+1,), ``cell_faces``: faces of cell i; an empty range
    for cells that are no polyhedra.
    """

    face_offsets: Array
    face_nodes: Array
    cell_offsets: Array
    cell_faces: Array


@dataclass(frozen=True, eq=False)
class NamedFaces:
    """A boundary patch as the file names it, by the nodes of its faces.

    In a plane file a face is an edge (two nodes, or two ends and a mid-node);
    in a file one cell thick it is a polygon. Face j has the nodes
    ``nodes[offsets[j]:offsets[j+1]]`` (numbers of this piece's points, from 0).
    When the file lists vertices only, ``by_vertex`` is set, each face holds one
    node, and an edge belongs to the patch if all its nodes do.
    """

    offsets: Array
    nodes: Array
    by_vertex: bool = False
    kind: str = ""
    """Type the file states (a CGNS BCType such as ``BCWallViscous``), else empty."""


@dataclass(frozen=True, eq=False)
class Piece:
    """One block, zone or partition of an export, unchecked.

    points : (n, 3) float32 or float64
    types : (m,) uint8, VTK cell types
    offsets : (m+1,) int64; nodes of cell i are ``nodes[offsets[i]:offsets[i+1]]``
    nodes : (k,) int64, from 0, in VTK's node order
    point_data, cell_data : name -> (n,) or (n, c) array; cell arrays run over
        *all* cells of the piece, line cells included
    ghost : (m,) bool or None; cells that another partition owns
    tag_names : array name -> {id: name}, for integer cell arrays whose ids mark
        patches (physical groups, families)
    """

    points: Array
    types: Array
    offsets: Array
    nodes: Array
    point_data: dict[str, Array] = field(default_factory=dict)
    cell_data: dict[str, Array] = field(default_factory=dict)
    name: str = ""
    ghost: Array | None = None
    faces: Faces | None = None
    patches: dict[str, NamedFaces] = field(default_factory=dict)
    tag_names: dict[str, dict[int, str]] = field(default_factory=dict)
    cut: Array | None = None
    """(n,) bool or None: points from which the edges to cells start that were left out (`mesh.near`)."""
    left_out: int = 0
    points_left_out: int = 0
    """Plane cells left out, and points that only these use."""


@dataclass(frozen=True)
class Wanted:
    """Arrays at one location, and the raw points or cells (k,), increasing, that values are wanted of.

    Raw numbers run over all pieces of a step, one behind another; rows None stands for all.
    """

    names: tuple[str, ...]
    rows: Array | None


@dataclass(frozen=True)
class RowReader:
    """How a format reads single rows of a step.

    layout : step -> something that is equal for steps that have the same mesh and arrays of
        the same names and kinds; None where this cannot be told without reading them
    read : (step, {"point": …, "cell": …}) -> at each location, array name -> values of the rows
    """

    layout: Callable[[int], object]
    read: Callable[[int, Mapping[str, Wanted]], dict[str, dict[str, Array]]]


Part = Callable[[], Iterable[Piece]]


@dataclass(frozen=True)
class Export:
    """A file, opened: what it is, its times, and how to load one step.

    ``load(step)`` returns the pieces of step ``step`` (0 … steps-1).
    ``times`` is empty when the file holds a single state without a time.
    ``parts(step)``, of an export in several pieces, gives what reads some of them when called,
    in their order; making the list of these is cheap.
    ``rows``, of a format that can, reads single rows of a step.
    """

    path: Path
    format: str
    load: Callable[[int], Sequence[Piece]]
    times: tuple[float, ...] = ()
    hints: tuple[Hint, ...] = ()
    parts: Callable[[int], Iterable[Part]] | None = None
    rows: RowReader | None = None

    @property
    def steps(self) -> int:
        """Number of stored states, at least 1."""
        return max(1, len(self.times))

    def stream(self, step: int) -> Iterator[Piece]:
        """The pieces of a step, each read when it is its turn and not held; all at once without parts."""
        if self.parts is None:
            yield from self.load(step)
            return
        for part in self.parts(step):
            yield from part()
