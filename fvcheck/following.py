"""Watching a run that still writes."""

from __future__ import annotations

import signal
import time
from collections.abc import Callable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from fvcheck.errors import FvcheckError, SetupError
from fvcheck.hints import Hint
from fvcheck.mesh.piece import Export
from fvcheck.overtime import Entry, History
from fvcheck.recording import Recorder
from fvcheck.series import Snapshot, file_list, natural, of_exports
from fvcheck.surfaces import ControlSurface

# Files that list others: where there is one, it says what belongs to the run.
_LISTS = (".pvd", ".xdmf", ".xmf")

# Looks at an unchanged file that cannot be read before it is given up as damaged.
_TRIES = 5

# Snapshots before a run may be called settled.
_LEAST = 8

Stamp = tuple[int, int]


@dataclass
class _Watch:
    """What is known of the files of a run between two looks."""

    seen: dict[Path, Stamp] = field(default_factory=dict)
    done: dict[Path, Stamp] = field(default_factory=dict)
    failed: dict[Path, int] = field(default_factory=dict)
    why: dict[Path, str] = field(default_factory=dict)

    def fresh(self, files: Sequence[Path]) -> list[Path]:
        """Files that have not changed since the last look and have not been read as they are."""
        out = []
        for path in files:
            try:
                status = path.stat()
            except OSError:
                continue  # gone again: a writer renames its draft
            stamp = (status.st_size, status.st_mtime_ns)
            if self.seen.get(path) == stamp and self.done.get(path) != stamp and stamp[0] > 0:
                out.append(path)
            elif self.seen.get(path) != stamp:
                self.failed.pop(path, None)
            self.seen[path] = stamp
        return out

    def read(self, path: Path) -> None:
        self.done[path] = self.seen[path]
        self.failed.pop(path, None)

    def fail(self, path: Path, error: FvcheckError) -> bool:
        """Count a failure; True where it is one too many and the file is left out until it changes."""
        self.failed[path] = self.failed.get(path, 0) + 1
        self.why[path] = str(error)
        if self.failed[path] < _TRIES:
            return False
        self.done[path] = self.seen[path]
        return True


def follow(
    target: str | Path | Sequence[str | Path],
    surfaces: Sequence[ControlSurface] | None = None,
    laws: Sequence[str] | None = None,
    *,
    every: float = 1.0,
    limit: int | None = None,
    patience: float | None = None,
    until_settled: bool = True,
    steady: bool = False,
    on_step: Callable[[Entry], None] | None = None,
    settings: dict[str, Any] | None = None,
    reading: dict[str, Any] | None = None,
) -> History:
    """The history of a run, snapshot by snapshot as they are written.

    target : a directory, a pattern, or files that grow or appear
    every : seconds between two looks; a file counts as written when it has not changed from one to the next
    limit : snapshots after which to end; patience : seconds without a new one
    until_settled : end when every quantity has settled, after eight snapshots
    on_step : called with each new entry
    settings : arguments of `history` beside those here; reading : those of `open_flow`

    Ctrl-C ends it too; what was taken is kept. A file that cannot be read is
    tried again, and left out with a hint when it stays as it is. SetupError when
    it ends without any snapshot.
    """
    watch = _Watch()
    left_out: dict[str, str] = {}
    recorder: Recorder | None = None
    last_news = time.monotonic()
    ended = ""
    with _interrupts() as stopped:
        while not ended:
            for export in _new_exports(watch, files_of(target), left_out):
                recorder, news = _take_in(
                    recorder, export, steady, surfaces, laws, settings or {}, reading or {}
                )
                for _ in range(news):
                    try:
                        entry = recorder.take(look_ahead=False)
                    except FvcheckError as error:
                        if recorder.taken == 0 and not watch.fail(export.path, error):
                            recorder = None  # half written after all, though it could be opened
                            break
                        if recorder.taken == 0:
                            raise
                        left_out[str(export.path)] = str(error)
                        recorder.drop()
                        continue
                    last_news = time.monotonic()
                    if on_step is not None and not (recorder.unsteady and recorder.taken == 1):
                        if recorder.unsteady and recorder.taken == 2:
                            on_step(recorder.entry(0))  # a first one without storage says nothing yet
                        on_step(entry)
                    ended = _end(recorder, limit, until_settled) or (
                        "stopped from the keyboard" if stopped else ""
                    )
                    if ended:
                        break
                else:
                    watch.read(export.path)
                if ended:
                    break
            if stopped:
                ended = ended or "stopped from the keyboard"
            elif not ended and patience is not None and time.monotonic() - last_news > patience:
                ended = f"nothing new for {patience:g} s"
            if not ended:
                time.sleep(every)
    if recorder is None or not recorder.taken:
        why = "; ".join(watch.why.values())
        raise SetupError(f"{ended}, and no snapshot could be read", where=why or str(target))
    for path, reason in left_out.items():
        recorder.add_hint(Hint("snapshot-left-out", f"{path}: {reason}"))
    return recorder.history(ended)


def files_of(target: str | Path | Sequence[str | Path]) -> list[Path]:
    """The files of a run that are there now, in natural order.

    Of a directory: the one list of files (PVD, XDMF) in it, else the exports of the commonest ending.
    """
    from fvcheck.formats.registry import FORMATS

    if not isinstance(target, str | Path) or not Path(target).is_dir():
        try:
            return [path for path in file_list(target) if path.exists()]
        except SetupError:
            return []  # a pattern that meets nothing yet
    known = {suffix for form in FORMATS for suffix in form.suffixes}
    by_suffix: dict[str, list[Path]] = {}
    for path in Path(target).iterdir():
        if path.suffix.lower() in known and path.is_file() and not path.name.startswith("."):
            by_suffix.setdefault(path.suffix.lower(), []).append(path)
    for suffix in _LISTS:
        if len(by_suffix.get(suffix, [])) == 1:
            return by_suffix[suffix]
    groups = sorted(by_suffix.values(), key=len)
    return sorted(groups[-1], key=natural) if groups else []


def _new_exports(watch: _Watch, files: Sequence[Path], left_out: dict[str, str]) -> Iterator[Export]:
    from fvcheck.formats.registry import open_export

    for path in watch.fresh(files):
        try:
            export = open_export(path)
            export.load(export.steps - 1)
        except FvcheckError as error:
            if watch.fail(path, error):
                left_out[str(path)] = str(error)
            continue
        except OSError as error:
            watch.fail(path, SetupError(error.strerror or str(error), where=path))
            continue
        left_out.pop(str(path), None)
        yield export


def _take_in(
    recorder: Recorder | None,
    export: Export,
    steady: bool,
    surfaces: Sequence[ControlSurface] | None,
    laws: Sequence[str] | None,
    settings: dict[str, Any],
    reading: dict[str, Any],
) -> tuple[Recorder, int]:
    """The recorder with the new snapshots of an export behind those it has, and how many these are."""
    if recorder is None:
        series = of_exports([export], reading)
        return Recorder(series.steady() if steady else series, surfaces, laws, **settings), len(series)
    known = recorder.series.snapshots
    same = [s for s in known if s.export.path == export.path]
    if same:
        first = max(s.step for s in same) + 1
        steps = range(first, export.steps)
    else:
        steps = range(export.steps)
    added = []
    last = known[-1]
    for step in steps:
        at = export.times[step] if export.times and recorder.unsteady else None
        if recorder.unsteady and (at is None or last.time is None or at <= last.time):
            continue  # a copy of what is there, or a restart that goes over it again
        last = Snapshot(export, step, at, last.number + 1 if export.steps > 1 else _number(export.path, last))
        added.append(last)
    recorder.series.extended(added)
    return recorder, len(added)


def _number(path: Path, last: Snapshot) -> int:
    """The iteration that a file's name tells, if it lies behind the last one's."""
    import re

    found = [int(part) for part in re.findall(r"\d+", path.stem)]
    return found[-1] if found and found[-1] > last.number else last.number + 1


def _end(recorder: Recorder, limit: int | None, until_settled: bool) -> str:
    if limit is not None and recorder.taken >= limit:
        return f"the limit of {limit} snapshots is reached"
    if until_settled and recorder.taken >= _LEAST and recorder.history().settled:
        return "settled"
    return ""


@contextmanager
def _interrupts() -> Iterator[list[bool]]:
    """A list that is filled by Ctrl-C, so that no snapshot is left half taken; a second one interrupts."""
    stopped: list[bool] = []

    def note(number: int, frame: Any) -> None:
        if stopped:
            raise KeyboardInterrupt
        stopped.append(True)

    try:
        before = signal.signal(signal.SIGINT, note)
    except ValueError:  # not the main thread: whoever runs it ends it
        yield stopped
        return
    try:
        yield stopped
    finally:
        signal.signal(signal.SIGINT, before)
