"""Fields of a MED file: their steps, and their values on points and cells."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import cellblocks as cb
from fvcheck.formats import hdf5_safe
from fvcheck.formats.check import DAMAGED
from fvcheck.formats.timeline import Key
from fvcheck.mesh.piece import Array, Piece

_WHOLE = "MED_NO_PROFILE_INTERNAL"


@dataclass(frozen=True)
class Field:
    """A field of the mesh: its name, number of components and the group of each step.

    ``real``: declared to hold real numbers.
    ``on_nodes``, ``on_cells``: where it has values that are read; ``skipped``:
    it has values at corners or Gauss points, too, which are not.
    """

    name: str
    components: int
    real: bool
    groups: dict[Key, str]
    times: dict[Key, float]
    on_nodes: bool
    on_cells: bool
    skipped: bool


@dataclass(frozen=True, eq=False)
class MedMesh:
    """The piece without fields, its geometric types with their cells, and the points that need values."""

    piece: Piece
    kinds: tuple[str, ...]
    blocks: tuple[cb.Block, ...]
    needed_nodes: Array


def whole(node: Any, name: str, path: object) -> int:
    """An attribute that holds one whole number."""
    value = hdf5_safe.attribute(node, name, path)
    if not isinstance(value, np.ndarray) or value.size != 1 or value.dtype.kind not in "iu":
        raise FormatError(f"the attribute '{name}' cannot be read", where=path, mend=DAMAGED)
    return int(value.reshape(-1)[0])


def fields_of(file: Any, mesh: str, path: Path) -> list[Field]:
    """The fields on the mesh, with their steps by (time step, iteration)."""
    if hdf5_safe.member(file, "CHA", path) is None:
        return []
    root = hdf5_safe.group(file, "CHA", path)
    out = []
    for name in hdf5_safe.names(root, path):
        group = hdf5_safe.group(root, name, path)
        owner = hdf5_safe.attribute(group, "MAI", path)
        if owner is not None and not (isinstance(owner, str) and owner == mesh):
            raise FormatError(f"the field '{name}' belongs to another mesh", where=path, mend=DAMAGED)
        groups: dict[Key, str] = {}
        times: dict[Key, float] = {}
        supports: set[str] = set()
        for step in hdf5_safe.names(group, path):
            node = hdf5_safe.group(group, step, path)
            key = (whole(node, "NDT", path), whole(node, "NOR", path))
            time = hdf5_safe.attribute(node, "PDT", path)
            single = isinstance(time, np.ndarray) and time.size == 1 and time.dtype.kind in "iuf"
            if key in groups or not single:
                raise FormatError(f"the steps of the field '{name}' are damaged", where=path, mend=DAMAGED)
            groups[key] = f"{name}/{step}"
            # -1, -1 stands for "no step": its time says nothing.
            times[key] = 0.0 if key == (-1, -1) else float(time.reshape(-1)[0])
            supports |= set(hdf5_safe.names(node, path))
        values = [one for one in supports if one == "NOE" or one.startswith(("MAI.", "NOE."))]
        if not values:
            raise FormatError(f"the field '{name}' has no values", where=path, mend=DAMAGED)
        on_cells = any(one.startswith("MAI.") for one in supports)
        gauss = on_cells and _has_gauss(root, groups, path)
        skipped = gauss or any(one.startswith("NOE.") for one in supports)
        components = whole(group, "NCO", path)
        # 6 stands for 64-bit reals, 7 for 32-bit ones; other types are whole numbers.
        kind = hdf5_safe.attribute(group, "TYP", path)
        real = isinstance(kind, np.ndarray) and kind.size == 1 and kind.reshape(-1)[0] in (6, 7)
        plain = on_cells and not gauss
        out.append(Field(name, components, real, groups, times, "NOE" in supports, plain, skipped))
    return out


def _has_gauss(root: Any, groups: dict[Key, str], path: Path) -> bool:
    """Whether a field at cells keeps more than one value per cell and component."""
    step = hdf5_safe.group(root, next(iter(groups.values())), path)
    for support in hdf5_safe.names(step, path):
        if support.startswith("MAI."):
            part = hdf5_safe.group(step, support, path)
            for profile in hdf5_safe.names(part, path):
                if whole(hdf5_safe.group(part, profile, path), "NGA", path) > 1:
                    return True
    return False


def at_points(file: Any, step: Any, one: Field, mesh: MedMesh, path: Path) -> Array:
    spot = f"{path}, field {one.name}"
    if hdf5_safe.member(step, "NOE", path) is None:
        raise FormatError("the field has no values at points in one step", where=spot, mend=DAMAGED)
    part = hdf5_safe.group(step, "NOE", path)
    values, known = _values(file, part, one, len(mesh.piece.points), spot)
    lost = int((mesh.needed_nodes & ~known).sum())
    if lost:
        raise FormatError(
            f"the field '{one.name}' misses {lost} of {int(mesh.needed_nodes.sum())} points",
            where=path,
            mend="Export it on the whole mesh.",
        )
    return values


def at_cells(file: Any, step: Any, one: Field, mesh: MedMesh, path: Path) -> Array:
    """Values over all cells; NaN on boundary cells that have none."""
    spot = f"{path}, field {one.name}"
    stray = {s[4:] for s in hdf5_safe.names(step, path) if s.startswith("MAI.")} - set(mesh.kinds)
    if stray:
        raise FormatError(f"values for cells '{min(stray)}', which the mesh lacks", where=spot, mend=DAMAGED)
    top = cb.top_dimension(mesh.blocks)
    parts = []
    for kind, block in zip(mesh.kinds, mesh.blocks):
        group = hdf5_safe.member(step, f"MAI.{kind}", path)
        shape = (len(block),) if one.components == 1 else (len(block), one.components)
        values, known = np.full(shape, np.nan), np.zeros(len(block), dtype=bool)
        if group is not None:
            values, known = _values(file, group, one, len(block), spot)
        lost = int((~known).sum())
        if lost and block.dimension == top:
            raise FormatError(
                f"the field '{one.name}' misses {lost} of {len(block)} cells of type {kind}",
                where=path,
                mend="Export it on the whole mesh.",
            )
        parts.append(values)
    return np.concatenate(parts)


def _values(file: Any, part: Any, one: Field, count: int, spot: str) -> tuple[Array, Array]:
    """Values for ``count`` points or cells of one type, and which of them are stored."""
    profiles = hdf5_safe.names(part, spot)
    if len(profiles) != 1:
        raise FormatError(f"the values have {len(profiles)} profiles", where=spot, mend=DAMAGED)
    group = hdf5_safe.group(part, profiles[0], spot)
    stored = whole(group, "NBR", spot)
    flat = hdf5_safe.read(hdf5_safe.dataset(group, "CO", spot), spot).reshape(-1)
    if one.real and flat.dtype.kind != "f":
        raise FormatError("the values are no real numbers", where=spot, mend=DAMAGED)
    known = np.ones(count, dtype=bool)
    rows = np.arange(count)
    if profiles[0] != _WHOLE:
        data = hdf5_safe.dataset(file, f"PROFILS/{profiles[0]}/PFL", spot)
        rows = hdf5_safe.read(data, spot).reshape(-1).astype(np.int64) - 1
        if len(np.unique(rows)) != len(rows) or (len(rows) and not 0 <= rows.min() <= rows.max() < count):
            raise FormatError(f"the profile '{profiles[0]}' is damaged", where=spot, mend=DAMAGED)
        known[:] = False
        known[rows] = True
    if one.components < 1 or len(flat) != len(rows) * one.components or stored not in (len(rows), count):
        raise FormatError(
            f"{len(flat)} values are no {len(rows)} with {one.components} components",
            where=spot,
            mend=DAMAGED,
        )
    table = flat.reshape(one.components, len(rows)).T
    if len(rows) < count:
        out = np.full((count, one.components), np.nan, dtype=np.result_type(table.dtype, np.float32))
        out[rows] = table
    else:
        out = np.empty((count, one.components), dtype=table.dtype)
        out[rows] = table
    return (out[:, 0].copy() if one.components == 1 else out), known
