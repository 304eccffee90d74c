"""Snapshots taken one after another here, or in runs by processes and Dask workers."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from functools import partial
from math import ceil
from pathlib import Path
from typing import Any

from fvcheck.errors import FvcheckError, SetupError
from fvcheck.mesh.piece import Export
from fvcheck.overtime import Entry
from fvcheck.recording import Record, Recorder, named_at
from fvcheck.series import Series, open_series
from fvcheck.surfaces import ControlSurface
from fvcheck.tasks import each_done

# Snapshots of a run at most: each looks at the one before its first, too.
_RUN = 8


def entries_of(
    recorder: Recorder,
    files: str | Path | Export | Series | Sequence[str | Path],
    reading: dict[str, Any],
    *,
    workers: int | None = None,
    scheduler: str | None = None,
) -> Iterator[Entry]:
    """Each snapshot of a recorder's series, in order, with the same numbers wherever it is taken.

    files, reading : what the series was opened from, for workers to open it again
    workers, scheduler : as in `fvcheck.tasks.each_done`; the first snapshot is taken here

    Raises what taking a snapshot does, with its number, and SetupError for workers and a series
    that was not opened from files.
    """
    count = len(recorder.series)
    spread = bool(workers) or scheduler is not None
    if spread and isinstance(files, Series | Export):
        raise SetupError("workers open files, and a series in memory is given", mend="Name the files.")
    for number in range(min(1, count) if spread else count):
        yield named_at(number, recorder.take)
    if not spread or count < 2:
        return
    size = min(_RUN, ceil((count - 1) / (workers or _RUN)))
    runs = [(first, min(first + size, count)) for first in range(1, count, size)]
    opened = (_absolute(files), reading, recorder.series.times is None)
    function = partial(_run, *opened, recorder.starts, recorder.judged)
    early: dict[int, list[Record]] = {}
    for number, records in each_done(function, runs, workers=workers, scheduler=scheduler):
        if isinstance(records, FvcheckError):
            raise records
        early[runs[number][0]] = records
        while recorder.taken in early:
            for record in early.pop(recorder.taken):
                yield named_at(recorder.taken, recorder.add, record)


def _absolute(files: Any) -> list[str]:
    """The names as any process finds them."""
    named = [files] if isinstance(files, str | Path) else list(files)
    return [str(Path(name).absolute()) for name in named]


def _run(
    files: list[str],
    reading: dict[str, Any],
    steady: bool,
    starts: list[tuple[ControlSurface, float]],
    judged: dict[str, Any],
    run: tuple[int, int],
) -> list[Record]:
    """What the snapshots of a run say, the series opened here."""
    series = open_series(files if len(files) > 1 else files[0], **reading)
    recorder = Recorder(series.steady() if steady else series, **judged)
    return recorder.measured(*run, starts)
