"""Families of a MED file: the numbers that cells and points carry, and the groups they belong to."""

from __future__ import annotations

from collections import Counter
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe
from fvcheck.mesh.piece import Array

_MOST_NAMES = 1 << 20


def family_of(group: Any, count: int, where: object) -> Array:
    """(count,) family numbers of the cells of one type, or of the points; 0 where none are stored."""
    if hdf5_safe.member(group, "FAM", where) is None:
        return np.zeros(count, dtype=np.int64)
    tags = hdf5_safe.read(hdf5_safe.dataset(group, "FAM", where), where).reshape(-1)
    if len(tags) != count or tags.dtype.kind not in "iu":
        raise FormatError(f"{len(tags)} family numbers for {count}", where=where, mend=hdf5_safe.DAMAGED)
    return tags.astype(np.int64)


def families(file: Any, mesh: str, path: Path) -> tuple[dict[int, str], dict[str, set[int]]]:
    """Cell families by their group, and the numbers of the point families of each group.

    A boundary edge belongs to one patch: of several groups of a family, the one
    that the fewest families share says most about it.
    """
    root = hdf5_safe.member(file, f"FAS/{mesh}", path)
    if root is None:
        return {}, {}
    cells = _groups(root, "ELEME", path)
    shared = Counter(name for groups in cells.values() for name in groups)
    named = {
        number: min(groups, key=lambda name: shared[name]) if groups else f"family {number}"
        for number, groups in cells.items()
    }
    points: dict[str, set[int]] = {}
    for number, groups in _groups(root, "NOEUD", path).items():
        for name in groups:
            points.setdefault(name, set()).add(number)
    return named, points


def _groups(root: Any, kind: str, path: Path) -> dict[int, list[str]]:
    """Family number -> names of its groups."""
    found = hdf5_safe.member(root, kind, path)
    if found is None:
        return {}
    out = {}
    for name in hdf5_safe.names(found, path):
        family = hdf5_safe.group(found, name, path)
        number = hdf5_safe.attribute(family, "NUM", path)
        if not isinstance(number, np.ndarray) or number.size != 1 or number.dtype.kind not in "iu":
            raise FormatError(f"the family '{name}' has no number", where=path, mend=hdf5_safe.DAMAGED)
        out[int(number.reshape(-1)[0])] = _names(family, name, path)
    return out


def _names(family: Any, name: str, path: Path) -> list[str]:
    data = hdf5_safe.member(family, "GRO/NOM", path)
    if data is None and hdf5_safe.member(family, "GRO", path) is None:
        return []
    damaged = FormatError(
        f"the groups of the family '{name}' are damaged", where=path, mend=hdf5_safe.DAMAGED
    )
    try:
        if data.size * data.dtype.itemsize > _MOST_NAMES:
            raise damaged
        table = np.ascontiguousarray(data[()])
    except (OSError, RuntimeError, LookupError, ValueError, TypeError, AttributeError):
        raise damaged from None
    count = hdf5_safe.attribute(family["GRO"], "NBR", path)
    if table.dtype.kind not in "iuS" or not table.size or (count is not None and np.any(count != len(table))):
        raise damaged
    rows = table.reshape(len(table), -1)
    words = [row.tobytes().split(b"\0")[0].decode("utf-8", "replace").strip() for row in rows]
    return [word for word in words if word]
