"""The ledger of every cell: what crosses each mesh edge, once, and what is made in each cell.

A block of cells then has the sum over its cells, in which inner edges cancel
exactly. Blocks need no cutting, and any number of them costs sums only.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, field

import numpy as np

from fvcheck.flow import Flow
from fvcheck.laws import Law, MissingData, State
from fvcheck.laws.state import Datum
from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.overlay import lay_over
from fvcheck.overlay.pieces import DRAWN, Overlay, triangles_of
from fvcheck.sampling.quadrature import PER_PIECE
from fvcheck.sampling.sampler import DEGREES
from fvcheck.surfaces import ControlSurface
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray

# Cells sampled at a time: bounds the memory to some hundred megabytes.
_AT_ONCE = 30_000

# Edge data by degree 1, 2, 3, and by the degree that the data support.
LEVELS = (*DEGREES, BEST)

# Samples with a shaken last digit, see `SampledVolume.shaken_line_states`.
_SHAKES, _SHAKE_COVERAGE = 6, 3.0


@dataclass(frozen=True)
class Term:
    """A quantity beside the law's own ledger, in the sign of an imbalance.

    line : (State, n) -> (q, c) through unit normals; area : State -> (q, c) per volume; None for none
    """

    line: Callable[[State, Array], Array | None] | None = None
    area: Callable[[State], Array | None] | None = None


@dataclass(frozen=True, eq=False)
class Column:
    """One quantity on all edges and in all cells, in the sign of an imbalance; in the order of ``LEVELS``.

    edge : (4, e, c) through edges, positive out of their owner
    cell : (4, m, c) in cells, or None
    """

    edge: Array
    cell: Array | None

    def __mul__(self, factor: float) -> Column:
        return Column(self.edge * factor, None if self.cell is None else self.cell * factor)

    def __add__(self, other: Column) -> Column:
        cells = [part for part in (self.cell, other.cell) if part is not None]
        return Column(self.edge + other.edge, sum(cells[1:], start=cells[0]) if cells else None)


@dataclass(frozen=True, eq=False)
class MeshEdges:
    """Every edge of a mesh once.

    start, end : (e,) points, the owner on their left; triangle : (e, 3) of the owner that holds it
    owner : (e,) cell; other : (e,) the cell on the right, -1 for none
    patch : (e,) of the boundary, `DRAWN` for inner edges
    """

    start: Array
    end: Array
    triangle: Array
    owner: Array
    other: Array
    patch: Array


@dataclass(frozen=True, eq=False)
class CellLedgers:
    """Ledgers of all cells of a flow.

    columns : law name -> its imbalance; terms : name -> the columns of `Term`s
    parts : law name -> part name -> column, whose sum over parts and "source" is the imbalance
    outside : (e,) bool, edges whose errors have one sign and add up
    shaken : law name -> (s, e, c) what a shaken last digit changes
    magnitude : law name -> (e, c) |flux| without what cannot matter
    cells : (m,) which cells of the mesh; centres : (m, 2) of them
    datum : levels on the border of the domain, for all cells alike
    missing : terms that the data do not allow
    """

    flow: Flow
    edges: MeshEdges
    columns: dict[str, Column]
    parts: dict[str, dict[str, Column]]
    terms: dict[str, Column]
    outside: Array
    shaken: dict[str, Array]
    magnitude: dict[str, Array]
    centres: Array
    cells: Array
    datum: Datum
    missing: tuple[str, ...] = field(default=())

    @property
    def areas(self) -> Array:
        """(m,) of the cells."""
        return self.flow.mesh.areas[self.cells]


class _SampledCells(SampledVolume):
    """Samples on a list of edges; volume terms are taken cell by cell."""

    passes = False  # states are wanted at places in all cells

    level_datum: Datum

    def __init__(self, flow: Flow, overlay: Overlay, laws: Sequence[Law], datum: Datum) -> None:
        self.level_datum = datum
        super().__init__(flow, ControlSurface.domain(name="cells"), overlay, laws)

    def needs_area(self, law: Law) -> bool:
        return True

    def _find_datum(self) -> Datum:
        return self.level_datum


def edges_of(mesh: Mesh) -> MeshEdges:
    """Every edge of the mesh once, with the triangle of its owner that holds it."""
    triangles, first = triangles_of(mesh, np.arange(mesh.n_cells))
    cell = np.repeat(np.repeat(np.arange(mesh.n_cells), np.diff(first)), 3)
    row = np.repeat(np.arange(len(triangles)), 3)
    a, b = triangles.ravel(), np.roll(triangles, -1, axis=1).ravel()
    key = np.minimum(a, b) * np.int64(mesh.n_points) + np.maximum(a, b)
    order = np.argsort(key, kind="stable")
    begins = np.flatnonzero(np.concatenate([[True], np.diff(key[order]) != 0]))
    count = np.diff(np.concatenate([begins, [len(order)]]))
    lead = order[begins]
    partner = np.where(count > 1, order[np.minimum(begins + 1, len(order) - 1)], -1)
    other = np.where(partner >= 0, cell[partner], -1)
    keep = other != cell[lead]  # both sides in one cell: a diagonal of its triangulation
    lead, other = lead[keep], other[keep]
    patch = np.full(len(lead), DRAWN)
    ends = mesh.boundary.edges
    known = np.minimum(*ends.T) * np.int64(mesh.n_points) + np.maximum(*ends.T)
    sort = np.argsort(known)
    if len(known):
        at = sort[np.minimum(np.searchsorted(known[sort], key[lead]), len(known) - 1)]
        on = (known[at] == key[lead]) & (other < 0)
        patch[on] = mesh.boundary.patch[at[on]]
    return MeshEdges(a[lead], b[lead], triangles[row[lead]], cell[lead], other, patch)


def _overlay_of(mesh: Mesh, edges: MeshEdges, chosen: Array, cells: Array) -> Overlay:
    none = np.empty(0, np.int64)
    return Overlay(
        start=mesh.points[edges.start[chosen]],
        end=mesh.points[edges.end[chosen]],
        triangle=edges.triangle[chosen],
        cell=edges.owner[chosen],
        patch=edges.patch[chosen],
        winding=np.ones(len(chosen), np.int64),
        whole=cells,
        corners=np.empty((0, 3, 2)),
        corner_triangle=np.empty((0, 3), np.int64),
        corner_cell=none,
        corner_weight=none,
        closed=True,
    )


def centres_of(mesh: Mesh) -> Array:
    """(m, 2) mean of each cell's corners."""
    total = np.add.reduceat(mesh.points[mesh.nodes], mesh.offsets[:-1], axis=0)
    return total / np.diff(mesh.offsets)[:, None]


def cell_ledgers(
    flow: Flow, laws: Sequence[Law], terms: dict[str, Term], only: Array | None = None
) -> CellLedgers:
    """Ledgers of all cells, and further terms; terms whose data are missing are left out.

    only : cells whose ledgers are wanted; those of others are then not what they would be

    Raises MissingData for a law that cannot be evaluated.
    """
    mesh = flow.mesh
    edges, centres = edges_of(mesh), centres_of(mesh)
    domain = ControlSurface.domain(name="domain").resolve(mesh)
    datum = SampledVolume(flow, domain, lay_over(mesh, domain), ()).datum
    chunks = _chunks(mesh, centres)
    # An edge belongs to the chunk of its owner.
    chunk_of = np.zeros(mesh.n_cells, np.int64)
    for number, cells in enumerate(chunks):
        chunk_of[cells] = number
    owner_chunk = chunk_of[edges.owner]
    build = _Build(len(edges.owner), mesh.n_cells)
    outside = np.zeros(len(edges.owner), bool)
    wanted = np.ones(mesh.n_cells + 1, bool)
    if only is not None:
        wanted[:] = False
        wanted[only] = True
    needed = wanted[edges.owner] | (wanted[edges.other] & (edges.other >= 0))
    missing: dict[str, None] = {}
    for number, all_cells in enumerate(chunks):
        chosen, cells = np.flatnonzero((owner_chunk == number) & needed), all_cells[wanted[all_cells]]
        if len(chosen) == 0:
            continue
        volume = _SampledCells(flow, _overlay_of(mesh, edges, chosen, cells), laws, datum)
        _take(volume, laws, terms, chosen, build, missing)
        group = volume.line_group[::PER_PIECE]
        for law in laws:
            outside[chosen] |= volume.reaching(law)[group]
    return CellLedgers(
        flow=flow,
        edges=edges,
        columns={law.name: build.column(f"law:{law.name}") for law in laws},
        parts={
            law.name: {
                key.partition("/")[2]: build.column(key)
                for key in build.edge | build.cell
                if key.startswith(f"part:{law.name}/")
            }
            for law in laws
        },
        terms={name: build.column(name) for name in terms if name not in missing},
        outside=outside,
        shaken={law.name: build.shaken[law.name] for law in laws if law.name in build.shaken},
        magnitude={law.name: build.magnitude[law.name] for law in laws},
        centres=centres,
        cells=np.arange(mesh.n_cells),
        datum=datum,
        missing=tuple(missing),
    )


class _Build:
    """Columns being filled, chunk by chunk."""

    def __init__(self, n_edges: int, n_cells: int) -> None:
        self.n_edges, self.n_cells = n_edges, n_cells
        self.edge: dict[str, Array] = {}
        self.cell: dict[str, Array] = {}
        self.shaken: dict[str, Array] = {}
        self.magnitude: dict[str, Array] = {}

    def put_edge(self, key: str, level: int, chosen: Array, values: Array) -> None:
        shape = (len(LEVELS), self.n_edges, values.shape[1])
        self.edge.setdefault(key, np.zeros(shape))[level, chosen] = values

    def put_cell(self, key: str, level: int, cells: Array, values: Array) -> None:
        shape = (len(LEVELS), self.n_cells, values.shape[1])
        self.cell.setdefault(key, np.zeros(shape))[level, cells] = values

    def column(self, key: str) -> Column:
        cell = self.cell.get(key)
        edge = self.edge.get(key)
        if edge is None:
            assert cell is not None
            edge = np.zeros((len(LEVELS), self.n_edges, cell.shape[2]))
        return Column(edge, cell)


def _take(
    volume: _SampledCells,
    laws: Sequence[Law],
    terms: dict[str, Term],
    chosen: Array,
    build: _Build,
    missing: dict[str, None],
) -> None:
    def per_edge(values: Array) -> Array:
        shaped = values.reshape(len(chosen), PER_PIECE, -1)
        # Adding slices is ten times as fast as numpy's sum along so short an axis.
        return sum((shaped[:, k] for k in range(1, PER_PIECE)), start=shaped[:, 0])

    cells = volume.area_cells
    for level, degree in enumerate(LEVELS):
        if degree == BEST and not volume.falls:
            degree = DEGREES[-1]
        for law in laws:
            found = volume.contributions(law, degree)
            for name, values in found.parts.items():
                build.put_edge(f"part:{law.name}/{name}", level, chosen, per_edge(values))
            build.put_edge(f"law:{law.name}", level, chosen, per_edge(found.total))
            if found.source is not None:
                build.put_cell(f"part:{law.name}/source", level, cells, -found.source)
            rest = [
                part
                for part in (
                    None if found.source is None else -found.source,
                    None if found.storage is None else found.storage[: len(cells)],
                )
                if part is not None
            ]
            if rest:
                build.put_cell(f"law:{law.name}", level, cells, sum(rest[1:], start=rest[0]))
            if degree != BEST and level == len(DEGREES) - 1:
                size = np.abs(per_edge(found.total - found.level))
                build.magnitude.setdefault(law.name, np.zeros((build.n_edges, size.shape[1])))[chosen] = size
        for name, term in terms.items():
            if name in missing:
                continue
            try:
                if term.line is not None:
                    flux = term.line(volume.line_state(degree), volume.normals)
                    if flux is None:
                        missing[name] = None
                        continue
                    build.put_edge(name, level, chosen, per_edge(flux))
                if term.area is not None:
                    made = term.area(volume.area_state(degree))
                    if made is None:
                        missing[name] = None
                        continue
                    weighted = made * volume.area_weights[:, None]
                    build.put_cell(name, level, cells, volume._per_cell(weighted))
            except (MissingData, KeyError):
                missing[name] = None
    if volume.probe.precision > 1e-13:
        _shake(volume, laws, chosen, build, per_edge)


def _shake(
    volume: _SampledCells,
    laws: Sequence[Law],
    chosen: Array,
    build: _Build,
    per_edge: Callable[[Array], Array],
) -> None:
    """What a shaken last digit changes in each edge's flux."""
    for number in range(_SHAKES):
        state = volume.shaken_state(number)
        for law in laws:
            total = per_edge(sum(volume.fluxes(law, state).values()))  # type: ignore[arg-type]
            shape = (_SHAKES, build.n_edges, total.shape[1])
            known = build.edge[f"law:{law.name}"][len(DEGREES) - 1, chosen]
            build.shaken.setdefault(law.name, np.zeros(shape))[number, chosen] = total - known


def _chunks(mesh: Mesh, centres: Array) -> list[Array]:
    """Cells in groups of neighbours."""
    count = -(-mesh.n_cells // _AT_ONCE)
    along = int(np.argmax(np.ptp(centres, axis=0)))
    return np.array_split(np.argsort(centres[:, along], kind="stable"), count)
