"""Reader of Exodus II files, classic netCDF and netCDF-4.

Own, because the general readers cut coordinates to float32, know no polygons,
end the process on missing coordinates, or read the first step only. Variables
stay as stored, one scalar array per component. Side sets and node sets become
patches; blocks of boundary lines name the cell array ``exodus:block``.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from functools import lru_cache
from pathlib import Path

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import cellblocks as cb
from fvcheck.formats import exodus_mesh, exodus_sets
from fvcheck.formats.check import DAMAGED, check_piece
from fvcheck.formats.exodus_mesh import ElementBlock
from fvcheck.formats.exodus_store import Store, open_store
from fvcheck.formats.timeline import times_of
from fvcheck.mesh.piece import Array, Export, Piece

_SUFFIXES = (".exo", ".e", ".ex2", ".exii", ".g")
_BLOCK = "exodus:block"
_MOST_VARIABLES = 10_000
# What netCDF puts where nothing was written (NC_FILL_DOUBLE, NC_FILL_FLOAT).
_FILL = 9.9692099683868690e36


def sniff(head: bytes, path: Path) -> bool:
    """Whether a file is netCDF with Exodus dimensions, or a damaged HDF5 file with an Exodus ending."""
    from fvcheck.formats import hdf5_safe

    named = path.suffix.lower() in _SUFFIXES
    if head.startswith(b"CDF"):
        return named or b"num_el_blk" in head or b"num_nodes" in head
    if not hdf5_safe.is_hdf5(head):
        return False
    try:
        with hdf5_safe.open_hdf5(path) as file:
            return hdf5_safe.member(file, "num_el_blk", path) is not None or (
                hdf5_safe.member(file, "coordx", path) is not None
            )
    except FormatError:
        return named


def open_export(path: Path) -> Export:
    """Open an Exodus II file; the mesh is read at the first ``load``, variables at each.

    Raises `FormatError` for what is no Exodus file or a damaged one.
    """
    with open_store(path) as store:
        if store.dim("num_nodes") is None or store.dim("num_el_blk") is None:
            raise FormatError(
                "there are no nodes or no element blocks", where=path, mend="Export the case as Exodus II."
            )
        times = _times(store, path)

    @lru_cache(maxsize=1)
    def mesh() -> tuple[Piece, list[ElementBlock]]:
        with open_store(path) as store:
            return _mesh(store, path)

    def load(step: int) -> Sequence[Piece]:
        piece, blocks = mesh()
        with open_store(path) as store:
            point_data = _point_data(store, step, len(times), len(piece.points), path)
            cell_data = piece.cell_data | _cell_data(store, step, len(times), blocks, path)
        return [check_piece(replace(piece, point_data=point_data, cell_data=cell_data), path)]

    return Export(path, "Exodus II", load, times_of(times, path))


def _times(store: Store, path: Path) -> tuple[float, ...]:
    """All stored times; empty when there are no steps."""
    if "time_whole" not in store:
        if store.dim("time_step") or "vals_nod_var1" in store or "vals_elem_var1eb1" in store:
            raise FormatError("the steps have no times", where=path, mend=DAMAGED)
        return ()
    if 0 in store.shape("time_whole"):
        return ()
    values = store.numbers("time_whole")
    if len(store.shape("time_whole")) != 1 or (np.abs(values) > 0.99 * _FILL).any():
        raise FormatError("the times of the steps cannot be read", where=path, mend=DAMAGED)
    steps = store.dim("time_step")
    # In netCDF-4 the unlimited dimension may show as 0: its length is that of its variables.
    if steps and steps != len(values):
        raise FormatError(f"there are {steps} steps and {len(values)} times", where=path, mend=DAMAGED)
    return tuple(float(value) for value in values)


def _mesh(store: Store, path: Path) -> tuple[Piece, list[ElementBlock]]:
    blocks = exodus_mesh.blocks(store, path)
    cells = [block.cells for block in blocks]
    types, offsets, nodes = cb.join(cells)
    solid = exodus_mesh.faces(store, blocks, path)
    top = cb.top_dimension(cells)
    ids = np.repeat(np.array([block.id for block in blocks], dtype=np.int64), [len(cell) for cell in cells])
    lines = {
        block.id: block.name for block in blocks if len(block.cells) and block.cells.dimension == top - 1
    }
    piece = Piece(
        exodus_mesh.points(store, path),
        types,
        offsets,
        nodes,
        cell_data={_BLOCK: ids},
        faces=solid,
        patches=exodus_sets.patches(store, blocks, solid, path),
        tag_names={_BLOCK: lines} if lines else {},
    )
    return check_piece(piece, path), blocks


def _point_data(store: Store, step: int, steps: int, count: int, path: Path) -> dict[str, Array]:
    names = _variables(store, "name_nod_var", "num_nod_var", path) if steps else []
    joint = bool(names) and "vals_nod_var" in store
    table = store.numbers("vals_nod_var", step) if joint else None
    out = {}
    for i, name in enumerate(names):
        own = f"vals_nod_var{i + 1}"
        if table is not None and (table.ndim != 2 or len(table) != len(names)):
            raise FormatError("the variables at nodes cannot be read", where=path, mend=DAMAGED)
        values = _row(store, own, step, steps, name, path) if table is None else table[i]
        out[name] = _filled(values, name, count, path)
    return out


def _cell_data(
    store: Store, step: int, steps: int, blocks: list[ElementBlock], path: Path
) -> dict[str, Array]:
    names = _variables(store, "name_elem_var", "num_elem_var", path) if steps else []
    truth = np.ones((len(blocks), len(names)), dtype=bool)
    if names and "elem_var_tab" in store:
        table = store.numbers("elem_var_tab")
        if table.shape != truth.shape:
            raise FormatError("the table of variables by block cannot be read", where=path, mend=DAMAGED)
        truth = table != 0
    top = cb.top_dimension([block.cells for block in blocks])
    out = {}
    for i, name in enumerate(names):
        if not truth[:, i].any():
            continue
        parts = []
        for j, block in enumerate(blocks):
            own = f"vals_elem_var{i + 1}eb{block.number}"
            if not len(block.cells):
                continue
            if truth[j, i] and own in store:
                values = _row(store, own, step, steps, name, path)
                parts.append(_filled(values, name, len(block.cells), path))
            elif block.cells.dimension == top:
                raise FormatError(
                    f"the variable '{name}' is missing on block '{block.name}'",
                    where=path,
                    mend="Export it on every block.",
                )
            else:
                parts.append(np.full(len(block.cells), np.nan, dtype=np.float32))
        out[name] = np.concatenate(parts)
    return out


def _variables(store: Store, name: str, dim: str, path: Path) -> list[str]:
    if name not in store and not store.dim(dim):
        return []
    names = store.words(name)
    sound = all(word and word.isprintable() for word in names) and len(names) <= _MOST_VARIABLES
    if not sound or len(set(names)) < len(names) or store.dim(dim) not in (None, len(names)):
        raise FormatError(f"the names of the variables ('{name}') are damaged", where=path, mend=DAMAGED)
    return names


def _row(store: Store, own: str, step: int, steps: int, name: str, path: Path) -> Array:
    """The values of a variable at a step, which must be stored for all steps."""
    stored = store.shape(own)[:1] if own in store else (0,)
    if stored != (steps,):
        raise FormatError(
            f"the variable '{name}' is stored for {stored[0] if stored else 0} of {steps} steps",
            where=path,
            mend=DAMAGED,
        )
    return store.numbers(own, step)


def _filled(values: Array, name: str, count: int, path: Path) -> Array:
    """The values; NaN where netCDF says that none was written."""
    if values.shape != (count,) or values.dtype.kind != "f":
        raise FormatError(
            f"the variable '{name}' has {values.size} values for {count}", where=path, mend=DAMAGED
        )
    never = values == values.dtype.type(_FILL)
    return np.where(never, values.dtype.type(np.nan), values) if never.any() else values
