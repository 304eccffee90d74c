"""CGNS files in their HDF5 form: bases, zones, times.

Standard: "CGNS Standard Interface Data Structures" (SIDS) and its HDF5 mapping,
https://cgns.github.io.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from functools import partial
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.cgns_patches import all_conditions, conditions, families, patch_names
from fvcheck.formats.cgns_tree import Node, root_of
from fvcheck.formats.cgns_zone import filled, read_mesh, read_solutions
from fvcheck.formats.check import check_piece
from fvcheck.mesh.piece import Export, Part, Piece

_ADF = b"ADF Database"
_Cache = dict[tuple[str, str], tuple[str, Piece]]


def sniff(head: bytes, path: Path) -> bool:
    """Whether the file is CGNS: HDF5 with a CGNSLibraryVersion, or the older ADF form."""
    return _ADF in head[:64] or (safe.is_hdf5(head) and safe.has_root(path, "CGNSLibraryVersion"))


@dataclass(frozen=True)
class _Times:
    """Times of a base and, if the zones change, the names of the zones at each."""

    values: tuple[float, ...] = ()
    zones: tuple[tuple[str, ...], ...] = ()
    steps: int = 1


def open_export(path: Path) -> Export:
    """Open a CGNS file. Raises `FormatError` for the ADF form, links into other files and damage."""
    path = Path(path)
    _refuse_adf(path)
    with safe.open_hdf5(path) as file:
        bases = _bases(file, path)
        series = [_times(base) for base, _ in bases]
        names = patch_names(all_conditions(bases))
    times = max((one.values for one in series), key=len)
    if any(one.values not in ((), times) for one in series):
        raise FormatError("the bases have different times", where=path, mend="Export one base only.")
    cache: _Cache = {}

    def parts(step: int, cache: _Cache | None = None) -> Iterator[Part]:
        empty = True
        with safe.open_hdf5(path) as file:
            stored = _bases(file, path)
            for (base, zones), one in zip(stored, series):
                for zone in zones:
                    if one.zones and zone.name not in one.zones[step]:
                        continue
                    name = f"{base.name}/{zone.name}" if len(stored) > 1 else zone.name
                    kept = {} if cache is None else cache
                    yield partial(_read, base, zone, name, step, one, names, kept, path)
                    empty = False
        if empty:
            raise FormatError(f"there are no zones at step {step}", where=path, mend=safe.DAMAGED)

    def load(step: int) -> Sequence[Piece]:
        return [piece for part in parts(step, cache) for piece in part()]

    return Export(path, "CGNS", load, times, parts=parts)


def _read(*of_zone: Any) -> list[Piece]:
    return [_piece(*of_zone)]


def _refuse_adf(path: Path) -> None:
    try:
        with path.open("rb") as stream:
            head = stream.read(64)
    except OSError as error:
        raise FormatError(f"the file cannot be opened: {error.strerror}", where=path) from None
    if _ADF in head:
        raise FormatError(
            "this is the old ADF form of CGNS, which is not read",
            where=path,
            mend="Convert it to HDF5, for instance with adf2hdf of the CGNS library, or export CGNS/HDF5.",
        )


def _bases(file: Any, path: Path) -> list[tuple[Node, list[Node]]]:
    """The bases that have zones, and their zones."""
    found = [
        (base, list(base.children("Zone_t"))) for base in root_of(file, str(path)).children("CGNSBase_t")
    ]
    bases = [(base, zones) for base, zones in found if zones]
    if not bases:
        raise FormatError(
            "there is no CGNS base with zones", where=path, mend="Export the mesh with its zones."
        )
    return bases


def _times(base: Node) -> _Times:
    node = base.first("BaseIterativeData_t")
    if node is None:
        return _Times()
    held = node.child("TimeValues") or node.child("IterationValues")
    steps = int(node.integers(1)[0])
    if held is None:
        if steps == 1:
            return _Times()
        raise FormatError(f"{steps} steps are declared without times", where=node.where, mend=safe.DAMAGED)
    values = held.numbers().reshape(-1).astype(np.float64)
    if len(values) != steps or not np.isfinite(values).all():
        raise FormatError(
            f"{steps} steps are declared, {len(values)} finite times expected",
            where=held.where,
            mend=safe.DAMAGED,
        )
    pointers = node.child("ZonePointers")
    zones: tuple[tuple[str, ...], ...] = ()
    if pointers is not None:
        lines = pointers.lines()
        if not lines or len(lines) % steps:
            raise FormatError(f"the zones do not fit {steps} steps", where=pointers.where, mend=safe.DAMAGED)
        each = len(lines) // steps
        zones = tuple(tuple(lines[k * each : (k + 1) * each]) for k in range(steps))
    return _Times(tuple(float(value) for value in values), zones, steps)


def _pointers(zone: Node, begin: str, step: int, steps: int) -> list[str] | None:
    """Nodes that the iterative data of a zone name for a step, or None if they name none."""
    node = zone.first("ZoneIterativeData_t")
    found: list[str] = []
    for child in node.children("DataArray_t") if node is not None else ():
        if not (child.name.startswith(begin) and child.name.endswith("Pointers")):
            continue
        lines = child.lines()
        if len(lines) != steps:
            raise FormatError(
                f"{len(lines)} names are listed for {steps} steps", where=child.where, mend=safe.DAMAGED
            )
        if lines[step] and lines[step] != "Null":
            found.append(lines[step].rsplit("/", 1)[-1])
    return found or None


def _piece(
    base: Node,
    zone: Node,
    name: str,
    step: int,
    times: _Times,
    names: dict[tuple[str, str], str],
    cache: _Cache,
    path: Path,
) -> Piece:
    grid = (_pointers(zone, "GridCoordinates", step, times.steps) or ["GridCoordinates"])[0]
    wanted = _pointers(zone, "FlowSolution", step, times.steps)
    if wanted is None and times.steps > 1:
        raise FormatError(
            f"the zone does not say which solution belongs to step {step}",
            where=zone.where,
            mend="Export FlowSolutionPointers, or one step per file.",
        )
    known = cache.get((base.name, zone.name))
    if known is None or known[0] != grid:
        mesh = read_mesh(zone, grid, int(base.integers(2)[0]), conditions(zone, families(base)), names)
        mesh = check_piece(replace(mesh, name=name), path)
        cache[base.name, zone.name] = (grid, mesh)
    else:
        mesh = known[1]
    points, cells = read_solutions(zone, wanted)
    return check_piece(
        replace(mesh, point_data=points, cell_data={**filled(cells, len(mesh.types)), **mesh.cell_data}), path
    )
