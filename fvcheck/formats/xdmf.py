"""XDMF files, versions 2 and 3: uniform grids, temporal and spatial collections.

Format: "XDMF Model and Format", https://www.xdmf.org. The reader never leaves
the folder of the file.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.check import check_piece
from fvcheck.formats.xdmf_items import Items
from fvcheck.formats.xdmf_mesh import read_mesh, shape_of
from fvcheck.formats.xdmf_tree import Element, parse
from fvcheck.formats.xdmf_values import attributes, rows_of, values_of
from fvcheck.hints import Hint
from fvcheck.mesh.piece import Array, Export, Piece, RowReader, Wanted


@dataclass(frozen=True)
class _State:
    """The uniform grids of one time."""

    time: float | None
    grids: tuple[Element, ...]


def sniff(head: bytes, path: Path) -> bool:
    """Whether the file is XML with the root element ``Xdmf``."""
    text = head.replace(b"\0", b"").lstrip(b"\xef\xbb\xbf\xff\xfe \t\r\n")
    return text.startswith(b"<") and b"<Xdmf" in text


def open_export(path: Path) -> Export:
    """Open an XDMF file. Raises `FormatError` when it is damaged or needs what is not read here."""
    path = Path(path)
    root = parse(path)
    domains = root.all("Domain")
    if not domains:
        raise FormatError("there is no Domain", where=path, mend="The file is damaged; export it again.")
    with Items(path) as items:
        states = _domain(domains[0], items)
    known = [state.time for state in states if state.time is not None]
    if known and len(known) < len(states):
        raise FormatError(
            "some grids of the series have no time", where=path, mend="Give every grid its Time."
        )
    times = tuple(known) if known else tuple(float(n) for n in range(len(states))) if len(states) > 1 else ()
    cache: dict[str, tuple[object, Piece]] = {}

    def load(step: int) -> Sequence[Piece]:
        with Items(path) as items:
            grids = states[step].grids
            pieces = [_grid(grid, str(n), items, cache) for n, grid in enumerate(grids)]
        return _merge(pieces)

    def read(step: int, wanted: Mapping[str, Wanted]) -> dict[str, dict[str, Array]]:
        with Items(path) as items:
            return _rows(states[step].grids, wanted, items, cache)

    rows = RowReader(lambda step: _layout(states[step].grids), read)
    return Export(path, "XDMF", load, times, _hints(states), rows=rows)


def _hints(states: list[_State]) -> tuple[Hint, ...]:
    geometries = [geometry for state in states for grid in state.grids for geometry in grid.all("Geometry")]
    if any(geometry.get("GeometryType", "Type").upper().startswith("ORIGIN_") for geometry in geometries):
        text = "origin and spacing of a grid are read with the slowest axis first, as its dimensions are"
        return (Hint("xdmf-origin-order", text),)
    return ()


def _domain(domain: Element, items: Items) -> list[_State]:
    """States of all grids of a domain; a bare mesh beside a series of results is left out."""
    series = [_states(grid, items) for grid in domain.all("Grid")]
    if not series:
        raise FormatError(
            "there is no Grid", where=items.where(domain), mend="Export the mesh and its fields."
        )
    if any(len(states) > 1 for states in series):
        bare = [
            not any(grid.all("Attribute") for state in states for grid in state.grids) for states in series
        ]
        series = [states for states, empty in zip(series, bare) if not empty] or series
    return _together(series, items.where(domain))


def _together(series: list[list[_State]], where: str) -> list[_State]:
    """Several grids side by side as one series; a single state counts for all times."""
    count = max(len(states) for states in series)
    if any(len(states) not in (1, count) for states in series):
        raise FormatError("grids side by side have different numbers of times", where=where)
    states = []
    for step in range(count):
        parts = [states_[step if len(states_) > 1 else 0] for states_ in series]
        times = {s.time for states_, s in zip(series, parts) if len(states_) == count and s.time is not None}
        if len(times) > 1:
            raise FormatError(f"grids side by side have different times {sorted(times)[:4]}", where=where)
        states.append(_State(next(iter(times), None), tuple(grid for part in parts for grid in part.grids)))
    return states


def _states(grid: Element, items: Items) -> list[_State]:
    where = items.where(grid)
    kind = grid.get("GridType", "Type", default="Uniform").lower()
    if kind == "uniform":
        return [_State(_time(grid, items), (grid,))]
    children = [_states(child, items) for child in grid.all("Grid")]
    if kind not in ("collection", "tree") or not children:
        raise FormatError(
            f"a grid of the type '{kind[:40]}' with {len(children)} grids cannot be read", where=where
        )
    collection = grid.get("CollectionType", default="Spatial").lower()
    if kind == "tree" or collection == "spatial":
        states = _together(children, where)
        own = _time(grid, items)
        return [replace(states[0], time=own)] if len(states) == 1 and own is not None else states
    if collection != "temporal":
        raise FormatError(f"a collection of the type '{collection[:40]}' cannot be read", where=where)
    if any(len(states) != 1 for states in children):
        raise FormatError("a series lies within a series", where=where)
    flat = [states[0] for states in children]
    listed = _time_list(grid, len(flat), items)
    return flat if listed is None else [replace(state, time=time) for state, time in zip(flat, listed)]


def _time(grid: Element, items: Items) -> float | None:
    for element in grid.all("Time"):
        kind = element.get("TimeType", "Type", default="Single").lower()
        text = element.get("Value")
        where = items.where(element)
        if kind == "single" and text:
            try:
                value = float(text)
            except ValueError:
                value = float("nan")
            if not np.isfinite(value):
                raise FormatError(f"the time '{text[:40]}' is no number", where=where)
            return value
        if kind != "single":
            raise FormatError(f"a time of the type '{kind[:40]}' does not fit one grid", where=where)
        values = items.read(items.only(element)[0]).reshape(-1)
        if len(values) != 1 or not np.isfinite(values[0]):
            raise FormatError("the time is no single number", where=where)
        return float(values[0])
    return None


def _time_list(grid: Element, count: int, items: Items) -> list[float] | None:
    for element in grid.all("Time"):
        where = items.where(element)
        kind = element.get("TimeType", "Type", default="Single").lower()
        values = items.read(items.only(element)[0]).reshape(-1).astype(float)
        if kind == "hyperslab" and len(values) == 3 and values[2] == count:
            values = values[0] + values[1] * np.arange(count)
        elif kind != "list":
            raise FormatError(f"a time of the type '{kind[:40]}' does not fit {count} grids", where=where)
        if len(values) != count or not np.isfinite(values).all():
            raise FormatError(f"{len(values)} times are listed for {count} grids", where=where)
        return [float(value) for value in values]
    return None


def _grid(grid: Element, place: str, items: Items, cache: dict[str, tuple[object, Piece]]) -> Piece:
    """One uniform grid with its attributes; its mesh from the cache if it is that of the step before."""
    mesh, shape = _mesh(grid, place, items, cache)
    data: dict[str, dict[str, Array]] = {"node": {}, "cell": {}}
    for attribute, name, centre in attributes(grid):
        if name in data[centre]:
            raise FormatError(f"two attributes are called '{name}'", where=items.where(attribute))
        count = len(mesh.points) if centre == "node" else len(mesh.types)
        data[centre][name] = values_of(attribute, count, centre, shape, items)
    piece = replace(mesh, point_data=data["node"], cell_data=data["cell"], name=grid.get("Name"))
    return check_piece(piece, items.where(grid))


def _mesh(
    grid: Element, place: str, items: Items, cache: dict[str, tuple[object, Piece]]
) -> tuple[Piece, tuple[int, ...] | None]:
    """The mesh of a grid, and its points per axis if it is structured."""
    where = items.where(grid)
    topologies, geometries = grid.all("Topology"), grid.all("Geometry")
    if len(topologies) != 1 or len(geometries) != 1:
        raise FormatError(
            f"a grid has {len(topologies)} topologies and {len(geometries)} geometries instead of one each",
            where=where,
            mend="The file is damaged or incomplete; export it again.",
        )
    key = (_key(topologies[0]), _key(geometries[0]))
    if place not in cache or cache[place][0] != key:
        mesh = check_piece(read_mesh(topologies[0], geometries[0], items), where)
        cache[place] = (key, mesh)
    return cache[place][1], shape_of(topologies[0], items)


def _layout(grids: Sequence[Element]) -> object:
    """See `RowReader.layout`; None for grids on several meshes."""
    parts = [[*grid.all("Topology"), *grid.all("Geometry")] for grid in grids]
    keys = {tuple(_key(part) for part in mesh) for mesh in parts}
    arrays = [
        (centre, name, attribute.get("AttributeType", "Type"))
        for grid in grids
        for attribute, name, centre in attributes(grid)
    ]
    if len(keys) != 1 or len(parts[0]) != 2 or len({array[:2] for array in arrays}) < len(arrays):
        return None
    return keys.pop(), tuple(arrays)


def _rows(
    grids: Sequence[Element],
    wanted: Mapping[str, Wanted],
    items: Items,
    cache: dict[str, tuple[object, Piece]],
) -> dict[str, dict[str, Array]]:
    """See `RowReader.read`."""
    mesh, shape = _mesh(grids[0], "0", items, cache)
    out: dict[str, dict[str, Array]] = {location: {} for location in wanted}
    for grid in grids:
        for attribute, name, centre in attributes(grid):
            location = "point" if centre == "node" else "cell"
            if location in wanted and name in wanted[location].names:
                count = len(mesh.points) if centre == "node" else len(mesh.types)
                rows = wanted[location].rows
                out[location][name] = rows_of(attribute, count, centre, shape, items, rows)
    return out


def _key(element: Element) -> object:
    """The same for elements that describe the same values."""
    inline = element.get("Format", default="XML").upper() == "XML" and len(element.text) > 1000
    return (
        element.tag,
        tuple(sorted(element.attributes.items())),
        id(element) if inline else element.text.strip(),
        tuple(_key(child) for child in element.children),
    )


def _merge(pieces: list[Piece]) -> list[Piece]:
    """Grids that share one mesh and differ in their fields, as some writers store them, put together."""
    merged: list[Piece] = []
    for piece in pieces:
        for place, other in enumerate(merged):
            same = all(
                np.array_equal(getattr(piece, name), getattr(other, name))
                for name in ("types", "offsets", "nodes", "points")
            )
            if same:
                merged[place] = replace(
                    other,
                    point_data=_union(other.point_data, piece.point_data),
                    cell_data=_union(other.cell_data, piece.cell_data),
                )
                break
        else:
            merged.append(piece)
    return merged


def _union(ours: dict[str, Array], theirs: dict[str, Array]) -> dict[str, Array]:
    doubled = [name for name in theirs if name in ours and not np.array_equal(ours[name], theirs[name])]
    if doubled:
        raise FormatError(f"two grids on the same mesh hold different values of '{doubled[0]}'")
    return {**ours, **theirs}
