"""Cases written by general libraries hold what was given, as those libraries read it back."""

from __future__ import annotations

import numpy as np
import pytest
import trial_meshes as tm
from write_case import write_case

BOX = (0.0, 0.0, 1.0, 0.5)


def data(cells):
    x, y = cells.points.T
    points = {"U": np.stack([1 + x * y, x - y], axis=1), "p": np.sin(3 * x)}
    return points, {"T": 300 + cells.centroids @ [1.0, 2.0]}


@pytest.mark.parametrize("plane", ["xy", "xz", "yz"])
@pytest.mark.parametrize(
    ("suffix", "options"),
    [
        (".vtu", {}),
        (".vtu", {"ascii": True}),
        (".vtu", {"compressed": True, "float32": True}),
        (".vtk", {"version": "4.2"}),
        (".vtk", {"version": "5.1", "ascii": True}),
        (".vtp", {}),
        (".xdmf", {}),
        (".msh", {"version": "2.2"}),
        (".msh", {"version": "2.2", "ascii": True}),
        (".msh", {"version": "4.1", "ascii": True}),
    ],
)
def test_a_flat_case_comes_back_whole(tmp_path, suffix, options, plane):
    import pyvista

    # meshio loses count of cell data when it reads two kinds of cell from MSH
    cells = tm.triangles(BOX, 0.15) if suffix == ".msh" else tm.mixed(BOX, 0.15)
    points, at_cells = data(cells)
    path = write_case(tmp_path / f"case{suffix}", cells, points, at_cells, plane=plane, **options)
    if suffix in (".xdmf", ".msh"):
        import meshio

        back = pyvista.from_meshio(meshio.read(path))
    else:
        back = pyvista.read(path)
    tolerance = 1e-6 if options.get("float32") else 1e-10  # stored digits; ascii of VTK keeps 11 or more
    columns = {"xy": [0, 1], "xz": [0, 2], "yz": [1, 2]}[plane]
    assert np.allclose(back.points[:, columns], cells.points, atol=tolerance)
    assert np.allclose(back.point_data["U"][:, columns], points["U"], atol=tolerance)
    assert np.allclose(back.point_data["p"], points["p"], atol=tolerance)
    areas = back.compute_cell_sizes(length=False, volume=False).cell_data["Area"]
    order = np.argsort(cells.sizes, kind="stable") if suffix == ".xdmf" else slice(None)
    assert np.allclose(areas, cells.areas[order], atol=tolerance)
    assert np.allclose(back.cell_data["T"], at_cells["T"][order], atol=300 * tolerance)


@pytest.mark.parametrize("plane", ["xy", "xz", "yz"])
@pytest.mark.parametrize("polyhedra", [False, True])
def test_a_case_one_cell_thick_has_positive_volumes(tmp_path, plane, polyhedra):
    import pyvista

    cells = tm.polygons(BOX, 0.12)
    points, at_cells = data(cells)
    path = write_case(
        tmp_path / "thick.vtu", cells, points, at_cells, plane=plane, depth=0.1, polyhedra=polyhedra
    )
    back = pyvista.read(path)
    volumes = back.compute_cell_sizes(length=False, area=False).cell_data["Volume"]
    assert np.allclose(volumes, 0.1 * cells.areas, rtol=1e-9)  # VTK splits polyhedra into tetrahedra
    assert set(back.celltypes) <= ({42} if polyhedra else {12, 13, 15, 16, 42})
    assert back.n_points == 2 * len(cells.points)


@pytest.mark.parametrize("plane", ["xy", "xz", "yz"])
def test_wedges_and_hexahedra_are_stored_with_positive_volumes(tmp_path, plane):
    import pyvista

    cells = tm.mixed(BOX, 0.15)
    path = write_case(tmp_path / "thick.vtk", cells, plane=plane, depth=0.1)
    back = pyvista.read(path)
    assert set(back.celltypes) == {12, 13}
    volumes = back.compute_cell_sizes(length=False, area=False).cell_data["Volume"]
    assert np.allclose(np.abs(volumes), 0.1 * cells.areas, rtol=1e-9)
    assert np.all(volumes[back.celltypes == 12] > 0)


def test_patches_become_named_lines(tmp_path):
    import meshio

    cells = tm.triangles(BOX, 0.15)
    rim = cells.boundary_edges()
    on_wall = np.all(cells.points[rim][:, :, 1] == 0, axis=1)
    patches = {"wall": rim[on_wall], "rest": rim[~on_wall]}
    path = write_case(tmp_path / "case.msh", cells, {"p": cells.points[:, 0]}, patches=patches, version="2.2")
    back = meshio.read(path)
    number = back.field_data["wall"][0]
    lines = np.concatenate(
        [b.data[t == number] for b, t in zip(back.cells, back.cell_data["gmsh:physical"]) if b.type == "line"]
    )
    assert {tuple(e) for e in lines} == {tuple(e) for e in patches["wall"]}


@pytest.mark.parametrize(
    ("name", "options"),
    [
        ("a.stl", {}),
        ("a.vtu", {"plane": "zx"}),
        ("a.msh", {"kind": "polygons"}),
        ("a.vtp", {"depth": 1.0}),
        ("a.vtu", {"patches": {"wall": np.zeros((0, 2), int)}}),
    ],
)
def test_what_cannot_be_written_is_refused(tmp_path, name, options):
    cells = tm.polygons(BOX, 0.2) if options.pop("kind", "") else tm.quads(BOX, 0.2)
    with pytest.raises(ValueError):
        write_case(tmp_path / name, cells, **options)
