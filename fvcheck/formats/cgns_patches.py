"""Boundary conditions of a CGNS zone as named faces."""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import hdf5_safe as safe
from fvcheck.formats.cgns_elements import Section
from fvcheck.formats.cgns_tree import Node
from fvcheck.formats.structured import block_nodes
from fvcheck.mesh.piece import Array, NamedFaces

_AXES = {"IFaceCenter": 0, "JFaceCenter": 1, "KFaceCenter": 2}
# VTK types of faces whose mid-nodes are left out, and their corners.
_CORNERS = {22: 3, 23: 4, 28: 4}


@dataclass(frozen=True, eq=False)
class Condition:
    """A boundary condition: its name, its family ('' if none), its BCType, and where it holds."""

    node: Node
    family: str
    kind: str

    @property
    def name(self) -> str:
        """Name of the condition."""
        return self.node.name


def families(base: Node) -> dict[str, str]:
    """Families of a base and the BCType each states ('' if none)."""
    found = {}
    for family in base.children("Family_t"):
        kind = family.first("FamilyBC_t")
        found[family.name] = "" if kind is None else kind.text()
    return found


def conditions(zone: Node, known: dict[str, str]) -> list[Condition]:
    """The boundary conditions of a zone; a type given by the family is filled in."""
    found = []
    for group in zone.children("ZoneBC_t"):
        for node in group.children("BC_t"):
            name = node.first("FamilyName_t")
            family = "" if name is None else name.text().rsplit("/", 1)[-1]
            kind = node.text()
            if kind in ("FamilySpecified", "Null", "UserDefined", ""):
                kind = known.get(family) or ("" if kind == "FamilySpecified" else kind)
            found.append(Condition(node, family, kind))
    return found


def patch_names(found: list[Condition]) -> dict[tuple[str, str], str]:
    """Name of the patch of each (condition, family).

    A family that gathers differently named conditions names their patch;
    otherwise the condition does, as the more particular name.
    """
    members: dict[str, set[str]] = {}
    for condition in found:
        members.setdefault(condition.family, set()).add(condition.name)
    return {
        (c.name, c.family): c.family if c.family and len(members[c.family]) > 1 else c.name for c in found
    }


def joined(patches: list[tuple[str, NamedFaces]]) -> dict[str, NamedFaces]:
    """Patches by name; those of one name and sort put together."""
    result: dict[str, NamedFaces] = {}
    for name, patch in patches:
        other = result.get(name)
        if other is None:
            result[name] = patch
        elif other.by_vertex == patch.by_vertex:
            result[name] = NamedFaces(
                np.concatenate([other.offsets, patch.offsets[1:] + other.offsets[-1]]),
                np.concatenate([other.nodes, patch.nodes]),
                patch.by_vertex,
                other.kind or patch.kind,
            )
        else:
            result[f"{name} (vertices)" if patch.by_vertex else f"{name} (faces)"] = patch
    return result


def _where_it_holds(condition: Condition) -> tuple[str, Array, bool, str]:
    """(location, index rows, whether they are the ends of a range, name of the index node)."""
    location = condition.node.first("GridLocation_t")
    for name in ("PointList", "PointRange", "ElementList", "ElementRange"):
        node = condition.node.child(name)
        if node is None:
            continue
        shape, values = node.shape(), node.integers()
        rows = values.reshape(-1, shape[-1]) if len(shape) > 1 else values.reshape(-1, 1)
        if "Range" in name and len(rows) != 2:
            raise FormatError("a range has two ends", where=node.where, mend=safe.DAMAGED)
        return "Vertex" if location is None else location.text(), rows, "Range" in name, name
    return "", np.empty((0, 1), dtype=np.int64), False, ""


class Elements:
    """Faces of an unstructured zone by element number.

    ``dimension``: of the cells; their faces have one less.
    """

    def __init__(self, sections: list[Section], dimension: int, points: int) -> None:
        self._sections = sections
        self._firsts = np.array([section.first for section in sections], dtype=np.int64)
        self._dimension = dimension
        self._points = points
        self.used: set[int] = set()
        """Places of the sections that a boundary condition refers to."""

    def patch(self, condition: Condition) -> NamedFaces | None:
        """The faces of a condition; None if it holds at cells, or nowhere."""
        location, rows, is_range, name = _where_it_holds(condition)
        ids = rows.reshape(-1)
        if not name or len(ids) == 0:
            return None
        where = condition.node.where
        by_vertex = location == "Vertex" and not name.startswith("Element")
        limit = self._points if by_vertex or not self._sections else self._sections[-1].last
        low, high = int(ids.min()), int(ids.max())
        if low < 1 or high > limit:
            raise FormatError(
                f"a boundary condition refers to {low} … {high}, the zone ends at {limit}",
                where=where,
                mend=safe.DAMAGED,
            )
        if is_range:
            ids = np.arange(low, high + 1)
        if by_vertex:
            return NamedFaces(np.arange(len(ids) + 1), ids - 1, True, condition.kind)
        return self._faces(ids, condition.kind, where)

    def _faces(self, ids: Array, kind: str, where: str) -> NamedFaces | None:
        place = np.searchsorted(self._firsts, ids, side="right") - 1
        sizes, nodes = [], []
        for number in np.unique(place):
            section = self._sections[number] if number >= 0 else None
            local = ids[place == number] - (section.first if section else 0)
            if section is None or (local > section.last - section.first).any():
                raise FormatError(
                    "a boundary condition refers to elements that do not exist",
                    where=where,
                    mend=safe.DAMAGED,
                )
            if (section.dimension[local] != self._dimension - 1).any():
                return None
            self.used.add(int(number))
            for one in _runs(section.types[local]):
                part = local[one]
                width = _CORNERS.get(int(section.types[part[0]]))
                count = np.diff(section.offsets)[part]
                count = count if width is None else np.full(len(part), width)
                ends = np.cumsum(count)
                sizes.append(count)
                nodes.append(
                    section.nodes[
                        np.arange(ends[-1]) + np.repeat(section.offsets[part] - ends + count, count)
                    ]
                )
        return NamedFaces(
            np.concatenate([[0], np.cumsum(np.concatenate(sizes))]), np.concatenate(nodes), kind=kind
        )


def _runs(types: Array) -> list[Array]:
    return [np.flatnonzero(types == kind) for kind in np.unique(types)]


def structured_patch(condition: Condition, points: tuple[int, ...]) -> NamedFaces | None:
    """The faces of a condition of a structured zone with ``points`` per axis; None if it has none."""
    location, rows, is_range, name = _where_it_holds(condition)
    if not name or len(rows) == 0:
        return None
    where = condition.node.where
    if rows.shape[1] != len(points):
        raise FormatError(f"indices of {len(points)} axes are expected", where=where, mend=safe.DAMAGED)
    low, high = rows.min(axis=0), rows.max(axis=0)
    if (low < 1).any() or (high > points).any():
        raise FormatError(
            f"a boundary condition refers to {low.tolist()} … {high.tolist()}, the zone has {points} points",
            where=where,
            mend=safe.DAMAGED,
        )
    flat = [axis for axis in range(len(points)) if points[axis] == 1]
    if location == "Vertex":
        if not is_range:
            strides = np.concatenate([[1], np.cumprod(points[:-1])]).astype(np.int64)
            ids = (rows - 1) @ strides
            return NamedFaces(np.arange(len(ids) + 1), ids, True, condition.kind)
        constant = [axis for axis in range(len(points)) if low[axis] == high[axis] and axis not in flat]
        if len(constant) != 1:
            return None
        return _listed(block_nodes(points, [(int(a) - 1, int(b)) for a, b in zip(low, high)]), condition.kind)
    axis = _normal_axis(location, low, high, points, flat)
    if axis is None:
        return None
    across = [other for other in range(len(points)) if other != axis and other not in flat]
    if any(high[other] >= points[other] for other in across):
        raise FormatError(
            "a boundary condition refers to faces beyond the zone", where=where, mend=safe.DAMAGED
        )
    if is_range:
        window = [(int(a) - 1, int(b) + (other in across)) for other, (a, b) in enumerate(zip(low, high))]
        return _listed(block_nodes(points, window), condition.kind)
    faces = [
        block_nodes(points, [(int(i) - 1, int(i) + (other in across)) for other, i in enumerate(row)])
        for row in rows
    ]
    return _listed(np.concatenate(faces), condition.kind)


def _normal_axis(
    location: str, low: Array, high: Array, points: tuple[int, ...], flat: list[int]
) -> int | None:
    """Axis across the faces: as the location says, else that of the constant index, at an end if in doubt."""
    if location in _AXES:
        axis = _AXES[location]
        return axis if axis < len(points) else None
    if location not in ("FaceCenter", "EdgeCenter"):
        return None
    constant = [axis for axis in range(len(points)) if low[axis] == high[axis] and axis not in flat]
    if len(constant) > 1:
        # A single face at a corner: at the far end of an axis the index exceeds the number of cells.
        far = [axis for axis in constant if low[axis] == points[axis]]
        near = [axis for axis in constant if low[axis] == 1]
        constant = far or near
    return constant[0] if len(constant) == 1 else None


def _listed(faces: Array, kind: str) -> NamedFaces:
    return NamedFaces(np.arange(len(faces) + 1) * faces.shape[1], faces.reshape(-1), kind=kind)


def all_conditions(bases: list[tuple[Node, list[Node]]]) -> list[Condition]:
    """The conditions of all zones of all bases."""
    return [
        c
        for base, zones in bases
        for zone, known in product(zones, [families(base)])
        for c in conditions(zone, known)
    ]
