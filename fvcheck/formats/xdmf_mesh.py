"""Topology and geometry of an XDMF grid, brought to VTK cell types.

Topology codes and node orders: "XDMF Model and Format", https://www.xdmf.org;
the node orders of its cells are those of VTK.
"""

from __future__ import annotations

from math import prod

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.structured import block_cells
from fvcheck.formats.xdmf_items import Items, dimensions
from fvcheck.formats.xdmf_tree import Element
from fvcheck.mesh.piece import Array, Faces, Piece

# code -> (VTK type, nodes per cell; 0: the cell states its own)
_CODES: dict[int, tuple[int, int]] = {
    1: (2, 0), 2: (4, 0), 3: (7, 0), 4: (5, 3), 5: (9, 4), 6: (10, 4), 7: (14, 5), 8: (13, 6), 9: (12, 8),
    16: (42, 0), 34: (21, 3), 35: (28, 9), 36: (22, 6), 37: (23, 8), 38: (24, 10), 39: (27, 13), 40: (26, 15),
    41: (32, 18), 48: (25, 20), 49: (33, 24), 50: (29, 27),
}  # fmt: skip
_NAMES: dict[str, int] = {
    "polyvertex": 1, "polyline": 2, "polygon": 3, "triangle": 4, "quadrilateral": 5, "tetrahedron": 6,
    "pyramid": 7, "wedge": 8, "hexahedron": 9, "polyhedron": 16, "edge_3": 34, "quadrilateral_9": 35,
    "quad_9": 35, "triangle_6": 36, "tri_6": 36, "quadrilateral_8": 37, "quad_8": 37, "tetrahedron_10": 38,
    "tet_10": 38, "pyramid_13": 39, "wedge_15": 40, "wedge_18": 41, "hexahedron_20": 48, "hex_20": 48,
    "hexahedron_24": 49, "hex_24": 49, "hexahedron_27": 50, "hex_27": 50, "mixed": 112,
}  # fmt: skip
_STRUCTURED = {"smesh": "points", "rectmesh": "axes", "corectmesh": "steps"}
_DAMAGED = "The file is damaged or incomplete; export it again."


def shape_of(topology: Element, items: Items) -> tuple[int, ...] | None:
    """Points per axis of a structured grid, the first axis slowest as in the file; None if unstructured."""
    name = _name(topology)
    if name[:2] not in ("2d", "3d") or name[2:] not in _STRUCTURED:
        return None
    where = items.where(topology)
    shape = dimensions(topology, "Dimensions", where) or dimensions(topology, "NumberOfElements", where)
    if len(shape) != int(name[0]) or min(shape, default=0) < 1:
        raise FormatError(f"the dimensions {shape} do not fit '{name}'", where=where, mend=_DAMAGED)
    return shape


def _name(topology: Element) -> str:
    return topology.get("TopologyType", "Type").lower()


def read_mesh(topology: Element, geometry: Element, items: Items) -> Piece:
    """Points and cells of a uniform grid. Raises `FormatError`."""
    shape = shape_of(topology, items)
    points = _points(geometry, shape, items)
    if shape is not None:
        if prod(shape) != len(points):
            raise FormatError(
                f"the grid has {prod(shape)} points, the geometry {len(points)}",
                where=items.where(topology),
                mend=_DAMAGED,
            )
        types, offsets, nodes = block_cells(shape[::-1])
        return Piece(points, types, offsets, nodes)
    where = items.where(topology)
    if topology.get("Order"):
        raise FormatError("a topology with its own node order cannot be read", where=where)
    code = _NAMES.get(_name(topology))
    if code is None:
        raise FormatError(
            f"the topology type '{topology.get('TopologyType', 'Type')}' cannot be read",
            where=where,
            mend="Export linear or quadratic cells.",
        )
    values = items.read(items.only(topology)[0])
    if values.dtype.kind not in "iu":
        raise FormatError("the topology holds no integers", where=where, mend=_DAMAGED)
    stated = dimensions(topology, "NumberOfElements", where) or dimensions(topology, "Dimensions", where)
    count = prod(stated) if stated else None
    faces = None
    if code == 112:
        types, offsets, nodes, faces = _mixed(values.reshape(-1).astype(np.int64), count, where)
    elif code == 16:
        raise FormatError(
            "a topology of polyhedra only cannot be read", where=where, mend="Write it as Mixed."
        )
    else:
        types, offsets, nodes = _uniform(topology, code, values, count, where)
    base = dimensions(topology, "BaseOffset", where)
    if base and base[0]:
        nodes = nodes - base[0]
        if faces is not None:
            faces = Faces(
                faces.face_offsets, faces.face_nodes - base[0], faces.cell_offsets, faces.cell_faces
            )
    return Piece(points, types, offsets, nodes, faces=faces)


def _uniform(
    topology: Element, code: int, values: Array, count: int | None, where: str
) -> tuple[Array, Array, Array]:
    kind, size = _CODES[code]
    stated = dimensions(topology, "NodesPerElement", where)
    if size == 0:
        size = stated[0] if stated else values.shape[1] if values.ndim == 2 else 1 if code == 1 else 0
    if size < 1 or (stated and stated != (size,)):
        raise FormatError(f"NodesPerElement does not fit '{_name(topology)}'", where=where, mend=_DAMAGED)
    if values.size % size or (values.ndim == 2 and values.shape[1] != size):
        raise FormatError(f"the topology has the shape {values.shape} for {size} nodes a cell", where=where)
    cells = values.size // size
    if count is not None and count != cells:
        raise FormatError(f"{count} cells are declared, {cells} are there", where=where, mend=_DAMAGED)
    if code == 2 and size == 2:
        kind = 3
    return (
        np.full(cells, kind, dtype=np.uint8),
        np.arange(cells + 1, dtype=np.int64) * size,
        values.reshape(-1).astype(np.int64),
    )


def _mixed(values: Array, count: int | None, where: str) -> tuple[Array, Array, Array, Faces | None]:
    """Cells of a Mixed topology: each starts with its code; poly cells state their node count."""
    total = len(values)
    kinds, sizes, keep = [], [], []
    solids: dict[int, tuple[list[list[int]], list[int]]] = {}
    place = cells = 0
    while place < total:
        code = int(values[place])
        if code not in _CODES:
            raise FormatError(
                f"cell {cells} has the unknown topology code {code}", where=where, mend=_DAMAGED
            )
        kind, size = _CODES[code]
        run = 1
        if code == 16:
            loops, place = _polyhedron(values, place + 1, cells, where)
            own = sorted({node for loop in loops for node in loop})
            solids[cells] = (loops, own)
            kinds.append(np.array([kind], dtype=np.uint8))
            sizes.append(np.array([len(own)], dtype=np.int64))
            keep.append(np.array(own, dtype=np.int64))
            cells += 1
            continue
        if size == 0:
            size = int(values[place + 1]) if place + 1 < total else 0
            first, stride = place + 2, size + 2
            if size < 1 or size > total - first:
                raise FormatError(f"cell {cells} has {size} nodes", where=where, mend=_DAMAGED)
            if code == 2 and size == 2:
                kind = 3
        else:
            first, stride = place + 1, size + 1
            if size > total - first:
                raise FormatError(f"the topology ends within cell {cells}", where=where, mend=_DAMAGED)
            # Cells of one kind in a row are taken together; the look-ahead grows with its success.
            ahead = 16
            while run < (total - place) // stride:
                last = min((total - place) // stride, run + ahead)
                same = values[place + run * stride : place + last * stride : stride] == code
                stop = len(same) if same.all() else int(np.argmin(same))
                run, ahead = run + stop, ahead * 4
                if stop < len(same):
                    break
        block = values[place : place + run * stride].reshape(run, stride)[:, first - place :]
        kinds.append(np.full(run, kind, dtype=np.uint8))
        sizes.append(np.full(run, size, dtype=np.int64))
        keep.append(block.reshape(-1))
        cells, place = cells + run, place + run * stride
    if count is not None and count != cells:
        raise FormatError(f"{count} cells are declared, {cells} are there", where=where, mend=_DAMAGED)
    if not cells:
        raise FormatError("there are no cells", where=where, mend="Export the mesh with its cells.")
    offsets = np.concatenate([[0], np.cumsum(np.concatenate(sizes))])
    return np.concatenate(kinds), offsets, np.concatenate(keep), _faces(solids, cells)


def _polyhedron(values: Array, place: int, cell: int, where: str) -> tuple[list[list[int]], int]:
    """Faces of a polyhedron from ``place`` (count; per face a count and its nodes), and where it ends."""
    total = len(values)
    count = int(values[place]) if place < total else 0
    place += 1
    loops = []
    for _ in range(min(max(count, 0), total)):
        size = int(values[place]) if place < total else 0
        if size < 3 or size > total - place - 1:
            break
        loops.append([int(node) for node in values[place + 1 : place + 1 + size]])
        place += size + 1
    if count < 4 or len(loops) != count:
        raise FormatError(f"the faces of cell {cell} do not fit", where=where, mend=_DAMAGED)
    return loops, place


def _faces(solids: dict[int, tuple[list[list[int]], list[int]]], cells: int) -> Faces | None:
    if not solids:
        return None
    loops = [loop for faces, _ in solids.values() for loop in faces]
    held = np.zeros(cells, dtype=np.int64)
    held[list(solids)] = [len(faces) for faces, _ in solids.values()]
    return Faces(
        face_offsets=np.concatenate([[0], np.cumsum([len(loop) for loop in loops])]),
        face_nodes=np.concatenate([np.array(loop, dtype=np.int64) for loop in loops]),
        cell_offsets=np.concatenate([[0], np.cumsum(held)]),
        cell_faces=np.arange(len(loops), dtype=np.int64),
    )


def _points(geometry: Element, shape: tuple[int, ...] | None, items: Items) -> Array:
    kind = geometry.get("GeometryType", "Type", default="XYZ").upper()
    where = items.where(geometry)
    if kind in ("XYZ", "XY"):
        size = len(kind)
        values = _floats(items.read(items.only(geometry)[0]), where)
        if values.size % size or (values.ndim > 1 and values.shape[-1] != size):
            raise FormatError(f"the geometry has the shape {values.shape} for '{kind}'", where=where)
        return _three(list(values.reshape(-1, size).T))
    if kind in ("X_Y_Z", "X_Y"):
        axes = [
            _floats(items.read(item), where).reshape(-1)
            for item in items.only(geometry, (len(kind) + 1) // 2)
        ]
        if len({len(axis) for axis in axes}) != 1:
            raise FormatError("the coordinates have different lengths", where=where, mend=_DAMAGED)
        return _three(axes)
    if shape is not None and kind in ("VXVYVZ", "VXVY"):
        axes = [_floats(items.read(item), where).reshape(-1) for item in items.only(geometry, len(kind) // 2)]
        if tuple(len(axis) for axis in axes) != shape[::-1]:
            raise FormatError("the axes do not fit the dimensions of the grid", where=where, mend=_DAMAGED)
        return _block(axes)
    if shape is not None and kind in ("ORIGIN_DXDYDZ", "ORIGIN_DXDY"):
        origin, step = (_floats(items.read(item), where).reshape(-1) for item in items.only(geometry, 2))
        if len(origin) != len(shape) or len(step) != len(shape) or prod(shape) > 10**9:
            raise FormatError("origin and spacing do not fit the dimensions of the grid", where=where)
        # Both run like the dimensions, the slowest axis first.
        return _block([o + s * np.arange(n) for o, s, n in zip(origin[::-1], step[::-1], shape[::-1])])
    raise FormatError(
        f"the geometry type '{kind[:40]}' cannot be read here", where=where, mend="Write it as XYZ."
    )


def _floats(values: Array, where: str) -> Array:
    if values.dtype.kind not in "iuf":
        raise FormatError("the geometry holds no numbers", where=where)
    return values if values.dtype.kind == "f" else values.astype(np.float64)


def _three(axes: list[Array]) -> Array:
    points = np.zeros((len(axes[0]), 3), dtype=np.result_type(*axes))
    for column, axis in enumerate(axes):
        points[:, column] = axis
    return points


def _block(axes: list[Array]) -> Array:
    grids = np.meshgrid(*axes[::-1], indexing="ij")
    return _three([grid.reshape(-1) for grid in grids[::-1]])
