"""Reader of MED files (HDF5), by the published group layout of MED 3 and 4.

Own rather than meshio's, which reads no polygons, renames the steps of a field
into fields, loses the families of nodes, takes a field on a part of the mesh
for one on all of it, and leaves the process on some errors. All tables of a MED
file run component by component ("no interlace").

Families become the integer cell array ``med:family``, named by their group.
Values at corners or Gauss points of elements are passed over with a hint.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from functools import lru_cache
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats import cellblocks as cb
from fvcheck.formats import hdf5_safe, med_fields, med_groups
from fvcheck.formats.check import DAMAGED, check_piece
from fvcheck.formats.med_fields import MedMesh, whole
from fvcheck.formats.timeline import timeline
from fvcheck.hints import Hint
from fvcheck.mesh.piece import Array, Export, Piece

_FAMILY = "med:family"
# Geometric type -> (VTK type, nodes). The order of the nodes differs from VTK's at most by the
# handedness of solid cells.
_KINDS = {
    "PO1": (cb.VERTEX, 1),
    "SE2": (cb.LINE, 2),
    "SE3": (cb.LINE3, 3),
    "TR3": (cb.TRIANGLE, 3),
    "TR6": (cb.TRIANGLE6, 6),
    "TR7": (cb.TRIANGLE7, 7),
    "QU4": (cb.QUAD, 4),
    "QU8": (cb.QUAD8, 8),
    "QU9": (cb.QUAD9, 9),
    "TE4": (cb.TETRA, 4),
    "PY5": (cb.PYRAMID, 5),
    "PE6": (cb.WEDGE, 6),
    "P15": (cb.WEDGE15, 15),
    "HE8": (cb.HEXAHEDRON, 8),
    "H20": (cb.HEXAHEDRON20, 20),
}


def sniff(head: bytes, path: Path) -> bool:
    """Whether an HDF5 file has the groups of a MED file, or is a damaged one with its ending."""
    if not hdf5_safe.is_hdf5(head):
        return False
    try:
        with hdf5_safe.open_hdf5(path) as file:
            return any(
                hdf5_safe.member(file, name, path) is not None for name in ("ENS_MAA", "INFOS_GENERALES")
            )
    except FormatError:
        return path.suffix.lower() == ".med"


def open_export(path: Path) -> Export:
    """Open a MED file with one mesh; the mesh is read at the first ``load``, fields at each.

    Raises `FormatError` for what is no MED file, a damaged one, a structured
    or a moving mesh, or fields whose steps do not fit each other.
    """
    with hdf5_safe.open_hdf5(path) as file:
        mesh_name = _mesh_name(file, path)
        _mesh_group(file, mesh_name, path)
        fields = med_fields.fields_of(file, mesh_name, path)
    line = timeline({one.name: one.times for one in fields if one.on_nodes or one.on_cells}, path)
    skipped = tuple(
        Hint("array-not-read", f"'{one.name}' holds values at corners or Gauss points, which are not read")
        for one in fields
        if one.skipped
    )

    @lru_cache(maxsize=1)
    def mesh() -> MedMesh:
        with hdf5_safe.open_hdf5(path) as file:
            return _read_mesh(file, mesh_name, path)

    def load(step: int) -> Sequence[Piece]:
        base = mesh()
        point_data: dict[str, Array] = {}
        cell_data = dict(base.piece.cell_data)
        with hdf5_safe.open_hdf5(path) as file:
            for one in fields:
                if not (one.on_nodes or one.on_cells):
                    continue
                group = hdf5_safe.group(file, f"CHA/{one.groups[line.stored(one.groups, step)]}", path)
                if one.on_nodes:
                    point_data[one.name] = med_fields.at_points(file, group, one, base, path)
                if one.on_cells:
                    cell_data[one.name] = med_fields.at_cells(file, group, one, base, path)
        return [check_piece(replace(base.piece, point_data=point_data, cell_data=cell_data), path)]

    return Export(path, "MED", load, line.times, line.hints + skipped)


def _mesh_name(file: Any, path: Path) -> str:
    meshes = hdf5_safe.names(hdf5_safe.group(file, "ENS_MAA", path), path)
    if len(meshes) != 1:
        raise FormatError(
            f"there are {len(meshes)} meshes{': ' if meshes else ''}{', '.join(meshes[:5])}",
            where=path,
            mend="Export one mesh per file.",
        )
    return meshes[0]


def _mesh_group(file: Any, name: str, path: Path) -> Any:
    """The group that holds NOE and MAI: the mesh, or its only step."""
    mesh = hdf5_safe.group(file, f"ENS_MAA/{name}", path)
    if hdf5_safe.member(mesh, "NOE", path) is None:
        steps = hdf5_safe.names(mesh, path)
        if len(steps) != 1:
            raise FormatError(
                f"the mesh has {len(steps)} states", where=path, mend="Export a mesh that does not move."
            )
        mesh = hdf5_safe.group(mesh, steps[0], path)
    for part in ("NOE", "MAI"):
        if hdf5_safe.member(mesh, part, path) is None:
            raise FormatError(
                f"the mesh '{name}' has no {'points' if part == 'NOE' else 'cells'}",
                where=path,
                mend="Export an unstructured mesh.",
            )
    return mesh


def _read_mesh(file: Any, name: str, path: Path) -> MedMesh:
    mesh = _mesh_group(file, name, path)
    dims = whole(hdf5_safe.group(file, f"ENS_MAA/{name}", path), "ESP", path)
    nodes = hdf5_safe.group(mesh, "NOE", path)
    points = _points(hdf5_safe.dataset(nodes, "COO", path), dims, path)
    cells = hdf5_safe.group(mesh, "MAI", path)
    kinds = tuple(hdf5_safe.names(cells, path))
    blocks, families = [], []
    for kind in kinds:
        block, family = _block(hdf5_safe.group(cells, kind, path), kind, path)
        blocks.append(block)
        families.append(family)
    types, offsets, flat = cb.join(blocks)
    tags = np.concatenate(families) if families else np.empty(0, dtype=np.int64)
    of_cells, of_nodes = med_groups.families(file, name, path)
    stray = set(np.unique(tags).tolist()) - set(of_cells) - {0}
    if stray:
        raise FormatError(f"the cell family {min(stray)} is not defined", where=path, mend=DAMAGED)
    top = cb.top_dimension(blocks)
    edge = [family for block, family in zip(blocks, families) if block.dimension == top - 1]
    used = np.unique(np.concatenate(edge)) if edge else tags[:0]
    named = {tag: of_cells[tag] for tag in sorted(used.tolist(), key=abs) if tag}
    point_families = med_groups.family_of(nodes, len(points), path)
    patches = {
        label: cb.faces_of_vertices(np.flatnonzero(np.isin(point_families, list(numbers))))
        for label, numbers in of_nodes.items()
        if label not in named.values()
    }
    piece = Piece(
        points,
        types,
        offsets,
        flat,
        cell_data={_FAMILY: tags} if tags.any() else {},
        patches={label: patch for label, patch in patches.items() if len(patch.nodes)},
        tag_names={_FAMILY: named} if named else {},
    )
    return MedMesh(check_piece(piece, path), kinds, tuple(blocks), cb.in_top_cells(blocks, len(points)))


def _points(data: Any, dims: int, path: Path) -> Array:
    values = hdf5_safe.read(data, path).reshape(-1)
    count = whole(data, "NBR", path)
    if dims not in (2, 3) or len(values) != dims * count or values.dtype.kind != "f":
        raise FormatError(
            f"{len(values)} coordinates are no {count} points in {dims} dimensions", where=path, mend=DAMAGED
        )
    out = np.zeros((count, 3), dtype=values.dtype)
    out[:, :dims] = values.reshape(dims, count).T
    return out


def _block(group: Any, kind: str, path: Path) -> tuple[cb.Block, Array]:
    spot = f"{path}, cells {kind}"
    data = hdf5_safe.dataset(group, "NOD", spot)
    nodes = hdf5_safe.read(data, spot).reshape(-1)
    if nodes.dtype.kind not in "iu":
        raise FormatError("the node numbers are no whole numbers", where=spot, mend=DAMAGED)
    nodes = nodes.astype(np.int64) - 1
    if kind == "POG":
        ends = hdf5_safe.read(hdf5_safe.dataset(group, "INN", spot), spot).reshape(-1).astype(np.int64) - 1
        if not len(ends) or ends[0] != 0 or ends[-1] != len(nodes) or (np.diff(ends) < 0).any():
            raise FormatError("the index of the polygons is damaged", where=spot, mend=DAMAGED)
        block = cb.Block(cb.POLYGON, nodes, ends)
    elif kind in _KINDS:
        vtk, width = _KINDS[kind]
        count = whole(data, "NBR", spot)
        if count * width != len(nodes):
            raise FormatError(
                f"{len(nodes)} node numbers are no {count} cells of {width}", where=spot, mend=DAMAGED
            )
        block = cb.Block.of_table(vtk, np.ascontiguousarray(nodes.reshape(width, count).T))
    else:
        raise FormatError(
            f"cells of type '{kind}' cannot be read",
            where=path,
            mend="Export triangles, quadrilaterals or polygons.",
        )
    return block, med_groups.family_of(group, len(block), spot)
