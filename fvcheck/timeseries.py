"""The ledger over time steps or iterations."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import Any

from fvcheck.forceseries import ForceSeries, force_series
from fvcheck.laws import Law
from fvcheck.mesh.piece import Export
from fvcheck.overtime import Entry, History
from fvcheck.recording import Recorder
from fvcheck.series import Series, open_series
from fvcheck.spreading import entries_of
from fvcheck.surfaces import ControlSurface


def history(
    files: str | Path | Export | Series | Sequence[str | Path],
    surfaces: Sequence[ControlSurface] | ControlSurface | None = None,
    laws: Iterable[str | Law] | None = None,
    *,
    tolerance: dict[str, float] | None = None,
    scale: dict[str, float] | None = None,
    sources: Sequence[Any] | None = None,
    about: tuple[float, float] | None = None,
    steady: bool = False,
    reference: tuple[float, float] | None = None,
    bodies: str | Sequence[str] | None = None,
    forces: Mapping[str, Any] | None = None,
    on_step: Callable[[Entry, int], None] | None = None,
    on_force: Callable[[int], None] | None = None,
    workers: int | None = None,
    scheduler: str | None = None,
    **reading: Any,
) -> History:
    """The ledger of every snapshot of a run.

    files : a file with several states, a pattern, several files, or a `Series`
    surfaces, laws, tolerance, scale, sources, about : as in `balance_all`
    steady : the snapshots are iterations towards a steady state, whatever times
        they carry: no storage
    reference : (length, velocity) for the Strouhal number
    bodies : with the forces on these bodies, an empty sequence for all; forces : further arguments
        of `fvcheck.forces` for them (see `fvcheck.forceseries`)
    on_step : called with each entry and the number of all, for a progress bar; on_force : with
        the number of all after the forces of each
    workers, scheduler : snapshots are taken there, all but the first, as in
        `fvcheck.spreading.entries_of`; forces are taken here
    reading : as in `open_flow`, ``step`` left out

    With times, the storage of each row is the rate of change of its content by
    three snapshots, second order in the step at both ends too and for uneven
    steps; the difference to the next order is its ``time_band``, part of the
    sampling band. A moving surface stands as drawn at the first snapshot and
    moves on from there. Raises what `open_flow` and `balance` do; a snapshot
    that fails is named.
    """
    series = files if isinstance(files, Series) else open_series(files, **reading)
    if steady:
        series = series.steady()
    chosen = [surfaces] if isinstance(surfaces, ControlSurface) else surfaces
    recorder = Recorder(
        series,
        chosen,
        laws,
        tolerance=tolerance,
        scale=scale,
        sources=sources,
        about=about,
        reference=reference,
    )
    for entry in entries_of(recorder, files, reading, workers=workers, scheduler=scheduler):
        if on_step is not None:
            on_step(entry, len(series))
    found = recorder.history()
    if bodies is None:
        return found
    more = force_series(series, bodies or None, strouhal=reference, on_step=on_force, **(forces or {}))
    return with_forces(found, more)


def with_forces(found: History, more: ForceSeries) -> History:
    """The history with the forces of the same snapshots and their trends."""
    hints = tuple(dict.fromkeys([*found.hints, *more.hints]))
    return replace(found, forces=more.found, trends=(*found.trends, *more.trends), hints=hints)
