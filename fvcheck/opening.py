"""Opening the part of a flow that surfaces need, piece by piece.

Of an export in several pieces, cells that no law looks at are dropped before the
next piece is read, here or by processes and workers that read pieces each.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import replace
from functools import partial
from itertools import chain, islice
from typing import Any

from fvcheck.balancing import choose_laws, default_surfaces
from fvcheck.errors import FvcheckError
from fvcheck.flow import Flow, flow_of_export, step_number
from fvcheck.inside import varies_inside
from fvcheck.laws import Law
from fvcheck.mesh.near import Cutter, lone, one_cell
from fvcheck.mesh.piece import Export, Piece
from fvcheck.surfaces import ControlSurface
from fvcheck.tasks import run_tasks

# Surfaces that run along boundary, which is kept anyway.
_ALONG = ("domain", "patch")


def open_near(
    export: Export,
    surfaces: Sequence[ControlSurface] | Callable[[Flow], Sequence[ControlSurface]] | None,
    laws: Iterable[str | Law] | None = None,
    *,
    inside: bool | None = None,
    step: int | str = "last",
    read: Callable[..., Flow] = flow_of_export,
    workers: int | None = None,
    scheduler: str | None = None,
    **reading: Any,
) -> Flow:
    """A flow with what ledgers of ``surfaces`` need; of an export in one piece all of it.

    surfaces : None for those of `fvcheck.balance_all`, or what gives them for a flow that holds
        the cells at the boundary only; what is drawn around a patch needs these first, too, so that
        the pieces are read twice
    laws : as in `fvcheck.balance_all`. Where none of them integrates over the volume, cells
        inside of surfaces are dropped too
    inside : whether these are needed, in place of what the laws say
    read : `flow_of_export`, or what takes its arguments
    workers, scheduler : pieces are read there, as in `fvcheck.tasks.each_done`
    reading : as in `flow_of_export`

    Ledgers are those of the whole flow, digit for digit where no law integrates over the
    volume. Raises what `flow_of_export` and `fvcheck.tasks.each_done` raise, SurfaceError for
    a surface around a patch that is not there.
    """
    number = step_number(export, step)
    reading |= {"step": number}
    if export.parts is None:
        return read(export, **reading)
    names = None if laws is None else list(laws)
    take = partial(_pieces, export, number, workers, scheduler)
    plane = reading.get("plane", "auto")
    told = inside
    if surfaces and not callable(surfaces) and all(s.rings or s.kind in _ALONG for s in surfaces):
        drawn = list(surfaces)
        if inside is None:
            inside = _sampled_inside(export, number, names, reading)
    else:
        rim = flow_of_export(_with(export, take(Cutter.of((), plane, False))), **reading)
        wanted = surfaces(rim) if callable(surfaces) else surfaces or default_surfaces(rim)
        drawn = [surface.resolve(rim.mesh) for surface in wanted]
        if inside is None:
            inside = needs_inside(rim, names)
        del rim
    if not inside:
        flow = read(_with(export, take(Cutter.of(drawn, plane, False))), **reading)
        if told is False or not needs_inside(flow, names):
            return _near(flow, drawn, hollow=True)
        del flow  # the first cell misled
    if any(surface.kind == "domain" for surface in drawn):
        return read(export, **reading)
    return _near(read(_with(export, take(Cutter.of(drawn, plane, True))), **reading), drawn, hollow=False)


def needs_inside(flow: Flow, laws: Iterable[str | Law] | None) -> bool:
    """Whether one of the laws of a steady balance integrates over the volume."""
    return any(varies_inside(flow, law) for law in choose_laws(flow, laws))


def _sampled_inside(
    export: Export, step: int, laws: Sequence[str | Law] | None, reading: dict[str, Any]
) -> bool:
    """What `needs_inside` says of a single cell; True where that cannot be told."""
    cell = next((found for found in map(one_cell, export.stream(step)) if found is not None), None)
    if cell is None:
        return True
    try:
        bare = {name: value for name, value in reading.items() if name != "walls"}
        return needs_inside(flow_of_export(_with(export, [cell]), assembler=lone, **bare), laws)
    except FvcheckError:
        return True  # what is wrong is told when all is read


def _with(export: Export, pieces: Iterable[Piece]) -> Export:
    """The export with pieces at hand in place of its own."""
    held = list(pieces)
    return replace(export, load=lambda step: held, parts=None)


def _near(flow: Flow, surfaces: Sequence[ControlSurface], hollow: bool) -> Flow:
    """The flow with a mesh that knows what it was cut down for."""
    if not flow.mesh.left_out:
        return flow
    near = tuple(surface.text for surface in surfaces)
    return replace(flow, mesh=replace(flow.mesh, near=near, hollow=hollow))


def _pieces(
    export: Export, step: int, workers: int | None, scheduler: str | None, cutter: Cutter
) -> Iterator[Piece]:
    """The pieces of a step, cut down one by one, here or where tasks are run."""
    if not workers and scheduler is None:
        return map(cutter, export.stream(step))
    assert export.parts is not None
    count = sum(1 for _ in export.parts(step))
    function = partial(_part, str(export.path.absolute()), step, cutter)
    found = run_tasks(function, range(count), workers=workers, scheduler=scheduler)
    for pieces in found:
        if isinstance(pieces, FvcheckError):
            raise pieces
    return chain.from_iterable(found)


def _part(path: str, step: int, cutter: Cutter, number: int) -> list[Piece]:
    """The pieces that one part of an export holds, cut down."""
    from fvcheck.formats.registry import open_export

    export = open_export(path)
    assert export.parts is not None
    parts = export.parts(step)  # may hold the file open
    return list(map(cutter, next(islice(parts, number, None))()))
