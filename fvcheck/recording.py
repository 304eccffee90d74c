"""Taking the snapshots of a run, one by one."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any, TypeVar

import numpy as np

from fvcheck.balancing import default_surfaces
from fvcheck.errors import FvcheckError, SetupError
from fvcheck.evolution import Evolution, Taken
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import Law
from fvcheck.ledger import Result, Row, case_dict
from fvcheck.overtime import Entry, History
from fvcheck.series import Series, same_cells
from fvcheck.surfaces import ControlSurface
from fvcheck.trends import Trend, trend_of

Array = np.ndarray
T = TypeVar("T")


@dataclass(frozen=True)
class Record:
    """What a snapshot says by itself: of each surface, its case, remarks of the series and of the flow."""

    taken: tuple[Taken, ...]
    case: dict[str, Any]
    notes: tuple[Hint, ...]
    hints: tuple[Hint, ...]


def named_at(number: int, function: Callable[..., T], *arguments: Any) -> T:
    """``function(*arguments)``; an error of a later snapshot that does not say where names it."""
    try:
        return function(*arguments)
    except FvcheckError as error:
        if number == 0 or error.where:
            raise
        raise type(error)(error.what, where=f"snapshot {number}", mend=error.mend) from None


class Recorder:
    """Takes the snapshots of a series one by one; at any time `history` gives what there is."""

    def __init__(
        self,
        series: Series,
        surfaces: Sequence[ControlSurface] | None = None,
        laws: Iterable[str | Law] | None = None,
        *,
        reference: tuple[float, float] | None = None,
        **settings: Any,
    ) -> None:
        self.series, self.reference = series, reference
        self._surfaces = None if surfaces is None else list(surfaces)
        self._laws = None if laws is None else list(laws)
        self._settings = {"tolerance": {}, "scale": {}, "sources": (), "about": (0.0, 0.0)} | {
            name: value for name, value in settings.items() if value is not None
        }
        self._evolutions: list[Evolution] = []
        self._cases: list[dict[str, Any]] = []
        self._final: list[tuple[Any, ...]] = []
        self._hints: dict[Hint, None] = dict.fromkeys(series.hints)
        self._notes: list[Hint] = []
        self.unsteady = series.times is not None and len(series) > 0

    @property
    def taken(self) -> int:
        """Number of snapshots taken so far."""
        return len(self._cases)

    def take(self, look_ahead: bool = True) -> Entry:
        """The next snapshot. ``look_ahead``: those behind it may be read for the motion of the mesh."""
        return self.add(self._measured(self.taken, look_ahead))

    def measured(self, first: int, last: int, starts: Sequence[tuple[ControlSurface, float]]) -> list[Record]:
        """What snapshots first … last-1 say, for another recorder to add, which began with ``starts``."""
        self._begin([surface for surface, _ in starts])
        for evolution, start in zip(self._evolutions, starts):
            evolution.start = start
        # The one before is looked at too, so that mesh and fits are those of one that comes from there.
        return [named_at(number, self._measured, number) for number in range(first - 1, last)][1:]

    @property
    def judged(self) -> dict[str, Any]:
        """Laws and settings, as arguments of another recorder."""
        return {"laws": self._laws} | self._settings

    @property
    def starts(self) -> list[tuple[ControlSurface, float]]:
        """Surfaces as they were placed at the first snapshot, and its time."""
        return [evolution.start for evolution in self._evolutions if evolution.start is not None]

    def _measured(self, number: int, look_ahead: bool = True) -> Record:
        self._notes = []
        velocity = None
        if self.unsteady and len(self.series) > 1 and (look_ahead or number > 0):
            velocity = self._velocity(number)
        flow = self.series.flow(number, self._needed() if velocity is None else None)
        if not self._evolutions:
            self._start(flow)
        if self.unsteady and flow.has_rates:
            self._note(
                Hint("rates-over-series", "rates of change are in the export: storage is taken from them")
            )
        before = [evolution.recompiled for evolution in self._evolutions]
        taken = tuple(evolution.measured(flow, velocity) for evolution in self._evolutions)
        if number > 0 and velocity is None and before != [e.recompiled for e in self._evolutions]:
            self._note_mesh(number, flow)
        return Record(taken, case_dict(flow), tuple(self._notes), flow.hints)

    def add(self, record: Record) -> Entry:
        """Take in the next snapshot."""
        for evolution, taken in zip(self._evolutions, record.taken):
            evolution.add(taken, f"{record.case['file']}, step {record.case['step']}")
        for note in record.notes:
            if not any(known.code == note.code for known in self._hints):
                self._hints[note] = None
        self._cases.append(record.case)
        self._hints |= dict.fromkeys(record.hints)
        self._settle()
        return self.entry(self.taken - 1)

    def _start(self, flow: Flow) -> None:
        surfaces = self._surfaces or default_surfaces(flow)
        names = [surface.name for surface in surfaces]
        if len(set(names)) < len(names) or not all(names):
            from fvcheck.surfaces import name_all

            surfaces = list(name_all(surfaces))
        self._begin(surfaces)

    def _begin(self, surfaces: Sequence[ControlSurface]) -> None:
        self._evolutions = [
            Evolution(surface, self._laws, unsteady=self.unsteady, **self._settings) for surface in surfaces
        ]

    def _needed(self) -> dict[str, Array | None] | None:
        """What all volumes together take from a flow; None where one must see all of it."""
        out: dict[str, Array | None] = {}
        for evolution in self._evolutions:
            needed = evolution.needed()
            if needed is None:
                return None
            for location, rows in needed.items():
                known = out.get(location, rows)
                if known is rows or known is None or rows is None:
                    out[location] = rows if known is rows else None
                else:
                    out[location] = np.union1d(known, rows)
        return out or None

    def _velocity(self, number: int) -> Array | None:
        velocity = self.series.point_velocity(number)
        if velocity is not None:
            self._note_motion()
        return velocity

    def _note_motion(self) -> None:
        self._note(Hint("mesh-moves", "the mesh moves between snapshots; the domain boundary moves with it"))

    def _note_mesh(self, number: int, flow: Flow) -> None:
        moved = any(evolution.surface.motion is not None for evolution in self._evolutions)
        mesh_changed = number > 0 and not same_cells(flow.mesh, self.series.mesh(number - 1))
        if mesh_changed:
            self._note(Hint("mesh-changes", f"the mesh of snapshot {number} is another one than that before"))
        elif not moved and flow.mesh is not self.series.mesh(number - 1):
            self._note_motion()

    def add_hint(self, hint: Hint) -> None:
        """Take in what was noticed outside."""
        self._hints[hint] = None

    def drop(self) -> None:
        """Leave the next snapshot out, which cannot be read."""
        self.series.remove(self.taken)
        for evolution in self._evolutions:
            evolution.shorten(self.taken)

    def _note(self, hint: Hint) -> None:
        """A remark of the snapshot at hand; one of its kind is kept."""
        self._notes.append(hint)

    def _settle(self) -> None:
        """Keep what will not change any more, before the contents behind it are given up."""
        while self._evolutions and len(self._final) < self.taken:
            number = len(self._final)
            if not all(evolution.settled(number) for evolution in self._evolutions):
                return
            self._final.append(tuple(evolution.ledger(number) for evolution in self._evolutions))

    def entry(self, number: int) -> Entry:
        """A snapshot's ledgers, storage by the snapshots that are there so far."""
        if number < len(self._final):
            ledgers = self._final[number]
        else:
            ledgers = tuple(evolution.ledger(number) for evolution in self._evolutions)
        snapshot, case = self.series.snapshots[number], self._cases[number]
        hints = tuple(dict.fromkeys(hint for ledger in ledgers for hint in ledger.hints))
        return Entry(case["file"], case["step"], snapshot.time, snapshot.number, Result(case, ledgers, hints))

    def history(self, ended: str = "") -> History:
        """What the snapshots taken so far say together; SetupError before the first one."""
        if not self.taken:
            raise SetupError("no snapshot has been read", mend="Name files that hold at least one.")
        entries = tuple(self.entry(number) for number in range(self.taken))
        steps = np.array([e.time if self.unsteady else k for k, e in enumerate(entries)], float)
        totals = {}
        if self.unsteady:
            for place, evolution in enumerate(self._evolutions):
                scales = [[row.scale or 0.0 for row in e.result.ledgers[place].rows] for e in entries]
                if found := evolution.totals(scales):
                    totals[entries[0].result.ledgers[place].name] = found
        hints = dict(self._hints)
        for entry in entries:
            hints |= dict.fromkeys(entry.result.hints)
        if self.unsteady and len(steps) > 1 and np.all(steps == np.round(steps)) and steps[-1] >= 2.0:
            note = "the times are whole numbers; they count as times, with storage"
            hints[Hint("time-or-iteration", note)] = None
        if self.unsteady and self.taken == 2:
            note = "storage by fewer than three snapshots is of first order in the step"
            hints[Hint("few-snapshots", note)] = None
        return History(
            entries,
            self.unsteady,
            tuple(_trends(entries, steps, self.reference)),
            totals,
            tuple(hints),
            ended,
        )


def _trends(entries: Sequence[Entry], steps: Array, reference: tuple[float, float] | None) -> Iterator[Trend]:
    for place, ledger in enumerate(entries[0].result.ledgers):
        for number, row in enumerate(ledger.rows):
            rows: list[Row] = [entry.result.ledgers[place].rows[number] for entry in entries]
            scale = max((r.scale or 0.0 for r in rows), default=0.0)
            limit = 0.01 * (row.tolerance_percent or 1.0)
            if ledger.closed and scale > 0:
                values = np.array([100.0 * (r.imbalance or 0.0) / scale for r in rows])
                name = f"{row.label} imbalance"
                yield trend_of(ledger.name, name, "%", steps, values, 100.0 * limit, reference)
            if any(r.inflow or r.outflow for r in rows) and not _same(rows):
                flux = np.array([r.flux for r in rows])
                size = max(r.inflow + r.outflow for r in rows)
                name = f"{row.label} flux"
                yield trend_of(ledger.name, name, row.unit, steps, flux, limit * size, reference)
            if row.law == "momentum" and ledger.closed and row.boundary:
                force = np.array([reaction(r) for r in rows])
                size = float(np.abs(force).max())
                name = f"{row.label} force"
                yield trend_of(ledger.name, name, row.unit, steps, force, limit * size, reference)


def reaction(row: Row) -> float:
    """Force of the fluid on all boundary within a surface, by the ledger: −(storage + flux − source)."""
    return (row.source or 0.0) - (row.storage or 0.0) - row.flux


def _same(rows: Sequence[Row]) -> bool:
    """Whether a row's flux is its imbalance: nothing else enters the balance."""
    return all(
        row.imbalance is not None and abs(row.flux - row.imbalance) <= 1e-9 * (row.scale or 0.0)
        for row in rows
    )
