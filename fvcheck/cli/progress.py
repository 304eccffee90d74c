"""Progress of long work, on standard error of a terminal; nothing in a pipe."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager


@contextmanager
def progress(what: str, quiet: bool = False) -> Iterator[Callable[[int | None], None]]:
    """A function to be called after each part with the number of all parts, None where it is unknown."""
    if quiet or not sys.stderr.isatty():
        yield lambda total: None
        return
    from rich.console import Console
    from rich.progress import BarColumn, MofNCompleteColumn, Progress, TextColumn, TimeRemainingColumn

    columns = (TextColumn("{task.description}"), BarColumn(), MofNCompleteColumn(), TimeRemainingColumn())
    with Progress(*columns, console=Console(stderr=True), transient=True) as bar:
        task = bar.add_task(what, total=None)
        yield lambda total: bar.update(task, total=total, advance=1)
