"""A VTK data set in memory, such as a pyvista mesh, as a piece."""

from __future__ import annotations

from typing import Any

import numpy as np

from fvcheck.errors import FormatError
from fvcheck.formats.check import DAMAGED, check_piece
from fvcheck.formats.structured import block_cells
from fvcheck.formats.vtk_cells import Group, ghost_cells, lattice, poly_cells
from fvcheck.mesh.piece import Array, Faces, Piece


def piece_of(dataset: Any, name: str = "") -> Piece:
    """The cells and arrays of a ``vtkDataSet`` with explicit or structured cells, checked.

    Arrays are copied. Raises `FormatError` for other kinds of data sets, for one
    without points or cells, and for indices out of range.
    """
    from vtkmodules.util.numpy_support import vtk_to_numpy

    where = f"the {dataset.GetClassName()} given"
    faces = None
    if dataset.IsA("vtkUnstructuredGrid"):
        _demand_cells(dataset, where)
        offsets, nodes = _group(dataset.GetCells())
        types = np.array(vtk_to_numpy(dataset.GetCellTypes()))
        cells = types, offsets, nodes
        faces = _faces(dataset) if (types == 42).any() else None
    elif dataset.IsA("vtkPolyData"):
        _demand_cells(dataset, where)
        stored = {
            "verts": dataset.GetVerts(),
            "lines": dataset.GetLines(),
            "polys": dataset.GetPolys(),
            "strips": dataset.GetStrips(),
        }
        cells = poly_cells({key: _group(group) for key, group in stored.items() if group.GetNumberOfCells()})
    elif dataset.IsA("vtkStructuredGrid") or dataset.IsA("vtkRectilinearGrid") or dataset.IsA("vtkImageData"):
        _demand_cells(dataset, where)
        cells = block_cells(_dimensions(dataset))
    else:
        raise FormatError(f"{where} holds no cells that can be read", mend="Give an unstructured grid.")
    points = _points(dataset)
    check_piece(Piece(points, *cells, faces=faces), where)  # before ghost marks are looked up by node
    point_data = _arrays(dataset.GetPointData(), where)
    cell_data = _arrays(dataset.GetCellData(), where)
    ghost = ghost_cells(point_data, cell_data, cells)
    return check_piece(Piece(points, *cells, point_data, cell_data, name, ghost, faces), where)


def _demand_cells(dataset: Any, where: str) -> None:
    if dataset.GetNumberOfPoints() == 0 or dataset.GetNumberOfCells() == 0:
        raise FormatError(f"{where} holds no cells", mend="Give the mesh with its points and cells.")


def _dimensions(dataset: Any) -> tuple[int, ...]:
    extent = dataset.GetExtent()
    return tuple(high - low + 1 for low, high in zip(extent[::2], extent[1::2]))


def _points(dataset: Any) -> Array:
    from vtkmodules.util.numpy_support import vtk_to_numpy

    if dataset.IsA("vtkPointSet"):
        return np.array(vtk_to_numpy(dataset.GetPoints().GetData()))
    if dataset.IsA("vtkRectilinearGrid"):
        axes = dataset.GetXCoordinates(), dataset.GetYCoordinates(), dataset.GetZCoordinates()
        return lattice([vtk_to_numpy(axis) for axis in axes])
    first = dataset.GetExtent()[::2]
    counts = _dimensions(dataset)
    steps = [(low + np.arange(n)) * step for low, n, step in zip(first, counts, dataset.GetSpacing())]
    turn = dataset.GetDirectionMatrix()
    rows = [[turn.GetElement(row, column) for column in range(3)] for row in range(3)]
    return lattice(steps) @ np.array(rows).T + np.array(dataset.GetOrigin())


def _group(cells: Any) -> Group:
    from vtkmodules.util.numpy_support import vtk_to_numpy

    offsets = vtk_to_numpy(cells.GetOffsetsArray()).astype(np.int64)
    return offsets, vtk_to_numpy(cells.GetConnectivityArray()).astype(np.int64)


def _faces(grid: Any) -> Faces:
    face_offsets, face_nodes = _group(grid.GetPolyhedronFaces())
    cell_offsets, cell_faces = _group(grid.GetPolyhedronFaceLocations())
    return Faces(face_offsets, face_nodes, cell_offsets, cell_faces)


def _arrays(attributes: Any, where: str) -> dict[str, Array]:
    from vtkmodules.util.numpy_support import vtk_to_numpy

    found: dict[str, Array] = {}
    for place in range(attributes.GetNumberOfArrays()):
        array = attributes.GetArray(place)
        if array is None:  # strings and the like
            continue
        name = array.GetName() or f"unnamed {place}"
        if name in found:
            raise FormatError(f"there are two arrays '{name}'", where=where, mend=DAMAGED)
        found[name] = np.array(vtk_to_numpy(array))
    return found
