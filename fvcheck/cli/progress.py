"""Progress of long work, on standard error of a terminal; nothing in a pipe."""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from contextlib import contextmanager


def say_first_use() -> None:
    """Say why a first run takes long, on a terminal; anywhere, that every run will."""
    from fvcheck.kernels import cache

    if not cache.kept():
        print(
            "note: the loops of fvcheck are compiled anew in each run, for about half a minute, as no folder "
            "for them can be written. Set NUMBA_CACHE_DIR to one.",
            file=sys.stderr,
        )
    elif sys.stderr.isatty() and cache.cold():
        print("fvcheck compiles its loops on first use; once, about half a minute …", file=sys.stderr)


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
