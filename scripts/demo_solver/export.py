"""VTU files of the demo: one per state, boundary edges included.

Cells come first, then one line cell per boundary face, with the fluid on the left
of its direction. The integer cell array ``patch`` holds 0 on cells and the number of
the patch on lines; the field array ``patch_names`` says what the numbers mean.
"""

from __future__ import annotations

from pathlib import Path

import numpy as np

from .mesh import Mesh
from .solver import Solver, State

Array = np.ndarray
VTK_LINE, VTK_TRIANGLE, VTK_QUAD = 3, 5, 9


def write_vtu(path: Path, solver: Solver, state: State, iteration: int) -> None:
    """Write U [m/s], p [Pa] and T [K] of cells and boundary faces, float64, compressed by zlib.

    Raises OSError if the file cannot be written, RuntimeError if it does not read back the same.
    """
    import pyvista
    from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

    connectivity, types = _cells(solver.mesh)
    points = np.column_stack([solver.mesh.points, np.zeros(len(solver.mesh.points))])
    grid = pyvista.UnstructuredGrid(connectivity, types, points)
    for name, values in _data(solver, state).items():
        grid.cell_data[name] = values
    grid.field_data["patch_names"] = ["fluid", *solver.mesh.names]
    # Viewers play a series of files by this array; for a steady run it counts iterations.
    grid.field_data["TimeValue"] = np.array([float(iteration)])

    path.unlink(missing_ok=True)
    writer = vtkXMLUnstructuredGridWriter()
    writer.SetInputData(grid)
    writer.SetFileName(str(path))
    writer.SetDataModeToAppended()
    writer.EncodeAppendedDataOff()
    writer.SetCompressorTypeToZLib()
    writer.SetCompressionLevel(9)
    if not writer.Write():
        raise OSError(f"{path} could not be written")

    stored = pyvista.read(path)
    pairs = [(stored.points, points), (stored.cells, connectivity)]
    pairs += [(stored.cell_data[name], grid.cell_data[name]) for name in grid.cell_data]
    if not all(np.array_equal(a, b) for a, b in pairs):
        raise RuntimeError(f"{path} does not read back as it was written")


def _cells(mesh: Mesh) -> tuple[Array, Array]:
    """Connectivity in VTK's form, counts before nodes, and the type of each cell."""
    corners = np.diff(mesh.offsets)
    lines = mesh.face_nodes[mesh.n_inner :]
    cells = np.insert(mesh.nodes, mesh.offsets[:-1], corners)
    types = np.where(corners == 3, VTK_TRIANGLE, VTK_QUAD)
    connectivity = np.concatenate([cells, np.insert(lines, 0, 2, axis=1).ravel()])
    return connectivity, np.concatenate([types, np.full(len(lines), VTK_LINE)]).astype(np.uint8)


def _data(solver: Solver, state: State) -> dict[str, Array]:
    mesh = solver.mesh

    def with_boundary(unknown: str) -> Array:
        values, scheme = getattr(state, unknown), getattr(solver, unknown)
        return np.concatenate([values, scheme.at_boundary(values, scheme.gradient(values))])

    velocity = with_boundary("velocity")
    return {
        "U": np.column_stack([velocity, np.zeros(len(velocity))]),
        "p": with_boundary("pressure"),
        "T": with_boundary("temperature"),
        "patch": np.concatenate([np.zeros(mesh.n_cells, np.int32), mesh.patch.astype(np.int32) + 1]),
    }
