"""Writes a case with general libraries (VTK, meshio), so that readers meet files they did not write."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

import numpy as np
from trial_meshes import Cells

Array = np.ndarray
Data = Mapping[str, Array]

IN_PLANE = {"xy": (0, 1), "xz": (0, 2), "yz": (1, 2)}
FLAT = {3: 5, 4: 9}  # VTK types: triangle, quadrilateral; polygon (7) otherwise
PRISM = {3: 13, 4: 12, 5: 15, 6: 16}  # wedge, hexahedron, prisms on 5 and 6 corners; polyhedron otherwise


def write_case(
    path: str | Path,
    cells: Cells,
    point_data: Data | None = None,
    cell_data: Data | None = None,
    *,
    plane: str = "xy",
    depth: float | None = None,
    polyhedra: bool = False,
    ascii: bool = False,
    compressed: bool = False,
    float32: bool = False,
    version: str = "",
    patches: Mapping[str, Array] | None = None,
) -> Path:
    """Write cells and data in the format that the suffix names; returns the path.

    Suffixes: ``.vtu``, ``.vtp``, ``.vtk`` (by VTK), ``.xdmf``, ``.msh`` (by meshio:
    triangles and quadrilaterals only, triangles first).

    point_data, cell_data : name -> (n,), or (n, 2) for a vector in the plane, which is
        stored with three components
    plane : ``xy``, ``xz`` or ``yz``
    depth : makes the case one cell thick, wedges and hexahedra along the third axis
        (``.vtu``, ``.vtk``, ``.xdmf``); ``polyhedra`` stores all cells as polyhedra (``.vtu``)
    float32 : points and data in single precision
    version : ``.vtk``: ``4.2`` or ``5.1``; ``.msh``: ``2.2`` (the default) or ``4.1``
        (one kind of cell, no patches)
    patches : name -> (e, 2) edges, stored as lines of a named physical group (``.msh``)

    Raises ValueError for what the format or its writer cannot hold.
    """
    path = Path(path)
    real = np.float32 if float32 else np.float64
    if plane not in IN_PLANE:
        raise ValueError(f"plane {plane!r}: expected one of {', '.join(IN_PLANE)}")
    if patches and path.suffix != ".msh":
        raise ValueError(f"patches can be written to .msh only, not to {path.suffix}")
    points = in_space(cells.points, plane)
    at_points = {name: in_space(values, plane) for name, values in (point_data or {}).items()}
    at_cells = {name: in_space(values, plane) for name, values in (cell_data or {}).items()}
    if depth is not None:
        third = 3 - sum(IN_PLANE[plane])
        shift = np.zeros(3)
        shift[third] = depth
        points = np.concatenate([points, points + shift])
        at_points = {name: np.concatenate([values, values]) for name, values in at_points.items()}
    points = points.astype(real)
    at_points = {name: _as(values, real) for name, values in at_points.items()}
    at_cells = {name: _as(values, real) for name, values in at_cells.items()}
    prisms = None if depth is None else "poly" if polyhedra else ("back" if plane == "xz" else "front")
    if path.suffix in (".vtu", ".vtk", ".vtp"):
        _write_vtk(path, points, cells, at_points, at_cells, prisms, ascii, compressed, version)
    elif path.suffix in (".xdmf", ".msh"):
        _write_meshio(path, points, cells, at_points, at_cells, prisms, ascii, version, patches or {})
    else:
        raise ValueError(f"{path.name}: unknown suffix {path.suffix!r}")
    return path


def in_space(values: Array, plane: str) -> Array:
    """(n, 2) put into three components; anything else unchanged."""
    values = np.asarray(values)
    if values.ndim != 2 or values.shape[1] != 2:
        return values
    out = np.zeros((len(values), 3))
    out[:, IN_PLANE[plane]] = values
    return out


def _as(values: Array, real: type) -> Array:
    return np.ascontiguousarray(values, real) if values.dtype.kind == "f" else values


def _prism(nodes: Array, n: int, prisms: str) -> Array:
    """Both ends of a prism; the far one first where that makes its volume positive."""
    return np.concatenate([nodes + n, nodes] if prisms == "back" else [nodes, nodes + n])


def _write_vtk(path, points, cells, at_points, at_cells, prisms, ascii, compressed, version):
    import vtkmodules.vtkCommonDataModel as dm
    import vtkmodules.vtkIOLegacy as legacy
    import vtkmodules.vtkIOXML as xml
    from vtkmodules.util.numpy_support import numpy_to_vtk
    from vtkmodules.vtkCommonCore import vtkIdList, vtkPoints

    if path.suffix == ".vtp" and prisms:
        raise ValueError(".vtp holds surfaces only; leave out depth")
    flat = path.suffix == ".vtp"
    data = dm.vtkPolyData() if flat else dm.vtkUnstructuredGrid()
    stored = vtkPoints()
    stored.SetData(numpy_to_vtk(points, deep=1))
    data.SetPoints(stored)
    if flat:
        polys = dm.vtkCellArray()
    else:
        data.Allocate(len(cells.sizes))
    n = len(cells.points)
    for i, size in enumerate(cells.sizes.tolist()):
        nodes = cells.nodes[cells.offsets[i] : cells.offsets[i + 1]]
        ids = vtkIdList()
        if flat:
            polys.InsertNextCell(size, nodes.tolist())
            continue
        if prisms is None:
            kind, listed = FLAT.get(size, 7), nodes.tolist()
        elif prisms != "poly" and size in PRISM:
            kind, listed = PRISM[size], _prism(nodes, n, prisms).tolist()
        else:
            kind, listed = 42, _faces(nodes.tolist(), n)
        for number in listed:
            ids.InsertNextId(number)
        data.InsertNextCell(kind, ids)
    if flat:
        data.SetPolys(polys)
    for arrays, target in ((at_points, data.GetPointData()), (at_cells, data.GetCellData())):
        for name, values in arrays.items():
            array = numpy_to_vtk(np.ascontiguousarray(values), deep=1)
            array.SetName(name)
            target.AddArray(array)
    if path.suffix == ".vtk":
        writer = legacy.vtkUnstructuredGridWriter()
        writer.SetFileVersion(42 if version == "4.2" else 51)
        writer.SetFileTypeToASCII() if ascii else writer.SetFileTypeToBinary()
    else:
        writer = xml.vtkXMLPolyDataWriter() if flat else xml.vtkXMLUnstructuredGridWriter()
        writer.SetDataModeToAscii() if ascii else writer.SetDataModeToBinary()
        writer.SetCompressorTypeToZLib() if compressed else writer.SetCompressorTypeToNone()
    writer.SetFileName(str(path))
    writer.SetInputData(data)
    if writer.Write() != 1:
        raise OSError(f"VTK could not write {path}")


def _faces(nodes: list[int], n: int) -> list[int]:
    """VTK's face stream of a prism: number of faces, then each face's size and corners, outward."""
    size = len(nodes)
    far = [k + n for k in nodes]
    stream = [size + 2, size, *nodes[::-1], size, *far]
    for i in range(size):
        j = (i + 1) % size
        stream += [4, nodes[i], nodes[j], far[j], far[i]]
    return stream


def _write_meshio(path, points, cells, at_points, at_cells, prisms, ascii, version, patches):
    import meshio

    names = {3: "triangle", 4: "quad"} if prisms is None else {3: "wedge", 4: "hexahedron"}
    if prisms == "poly" or not set(cells.sizes.tolist()) <= set(names):
        raise ValueError(f"{path.suffix} is written for triangles and quadrilaterals only")
    n = len(cells.points)
    blocks, split = [], {name: [] for name in at_cells}
    for size, kind in names.items():
        chosen = np.flatnonzero(cells.sizes == size)
        if len(chosen) == 0:
            continue
        table = cells.nodes[cells.offsets[chosen][:, None] + np.arange(size)]
        if prisms is not None:
            ends = [table + n, table] if prisms == "back" else [table, table + n]
            table = np.concatenate(ends, axis=1)
        blocks.append((kind, table))
        for name, values in at_cells.items():
            split[name].append(values[chosen])
    tags = {}
    if path.suffix == ".msh" and version == "4.1":
        if patches or len(blocks) > 1:
            raise ValueError("meshio's writer of MSH 4.1 holds one kind of cell and no patches; use 2.2")
    elif path.suffix == ".msh":
        split["gmsh:physical"] = [np.full(len(table), 1) for _, table in blocks]
        tags["fluid"] = np.array([1, 2 if prisms is None else 3])
        for number, (patch, edges) in enumerate(patches.items(), start=2):
            tags[patch] = np.array([number, 1])
            blocks.append(("line", np.asarray(edges)))
            for name, parts in split.items():
                value = number if name == "gmsh:physical" else 0
                parts.append(np.full((len(edges), *parts[0].shape[1:]), value, parts[0].dtype))
        split["gmsh:geometrical"] = [a.copy() for a in split["gmsh:physical"]]
    mesh = meshio.Mesh(points, blocks, point_data=dict(at_points), cell_data=split, field_data=tags)
    if path.suffix == ".xdmf":
        meshio.write(path, mesh, file_format="xdmf", data_format="XML" if ascii else "HDF")
    else:
        # meshio 5.3.5 writes repr() of numpy numbers, which numpy 2 spells np.float64(1.0)
        with np.printoptions(legacy="1.25"):
            kind = "gmsh" if version == "4.1" else "gmsh22"
            meshio.write(path, mesh, file_format=kind, binary=not ascii)
