"""A slice of an axisymmetric run, one cell thick between planes that meet in the axis, is reduced."""

from __future__ import annotations

import exact
import meshio
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import flow_on

import fvcheck
from fvcheck import ControlSurface, Fluid

VORTEX = exact.burgers_vortex()
CELLS = tm.mixed((0.0, 0.0, 1.2, 1.2), 0.1, seed=2)
BOX = ControlSurface.box(0.1, 0.0, 1.0, 1.0, name="can")

# Where (axial, radial, azimuthal) point for each axis; the mid plane is a coordinate plane.
FRAMES = {
    "x": np.array([[1.0, 0, 0], [0, 1, 0], [0, 0, 1]]),
    "y": np.array([[0.0, 1, 0], [1, 0, 0], [0, 0, -1]]),
    "z": np.array([[0.0, 0, 1], [1, 0, 0], [0, 1, 0]]),
}


def turned(frame, angle):
    """Rows axial, radial, azimuthal at an angle about the axis."""
    c, s = np.cos(angle), np.sin(angle)
    return np.array([[1, 0, 0], [0, c, s], [0, -s, c]]) @ frame


def wedge(frame, half, middle=0.0, where="point", duplicate=False):
    """A meshio mesh of the slice, with the vortex on it."""
    axial, radial = CELLS.points.T
    on_axis = radial == 0.0
    ends = [turned(frame, middle + side * half) for side in (1.0, -1.0)]
    points = np.concatenate([axial[:, None] * e[0] + radial[:, None] * e[1] for e in ends])
    n = len(axial)
    far = np.arange(n) + n
    if not duplicate:
        far[on_axis] = np.flatnonzero(on_axis)
    parts = {"tetra": [], "pyramid": [], "wedge": [], "hexahedron": []}
    source = {kind: [] for kind in parts}
    for i in range(len(CELLS.sizes)):
        a = CELLS.nodes[CELLS.offsets[i] : CELLS.offsets[i + 1]]
        shared = int(on_axis[a].sum()) if not duplicate else 0
        if shared and len(a) > shared:
            while not on_axis[a[0]] or (shared == 2 and not on_axis[a[1]]):
                a = np.roll(a, -1)
        b = far[a]
        kind, nodes = {
            (3, 0): ("wedge", [*a, *b]),
            (4, 0): ("hexahedron", [*a, *b]),
            (3, 1): ("pyramid", [a[1], a[2], b[2], b[1], a[0]]),
            (3, 2): ("tetra", [a[0], a[1], a[2], b[2]]),
            (4, 1): ("hexahedron", [*a, *b]),  # a collapsed one: one corner stands twice
            (4, 2): ("wedge", [a[0], a[-1], b[-1], a[1], a[2], b[2]]),
        }[len(a), shared]
        parts[kind].append(nodes)
        source[kind].append(i)
    used = {kind: np.array(nodes) for kind, nodes in parts.items() if nodes}
    if where == "point":
        u = np.column_stack([f(axial, radial) for f in (VORTEX.u, VORTEX.v, VORTEX.w)])
        data = {"U": np.concatenate([u @ e for e in ends]), "p": np.tile(VORTEX.p(axial, radial), 2)}
        return meshio.Mesh(points, used, point_data=data)
    x, y = CELLS.centroids.T
    u = np.column_stack([f(x, y) for f in (VORTEX.u, VORTEX.v, VORTEX.w)]) @ turned(frame, middle)
    return meshio.Mesh(
        points,
        used,
        cell_data={
            "U": [u[source[kind]] for kind in used],
            "p": [VORTEX.p(x, y)[source[kind]] for kind in used],
        },
    )


def numbers(ledger):
    return {row.label: (row.flux, row.boundary, row.source, row.scale) for row in ledger.rows}


def plane_ledger(where):
    flow = flow_on(VORTEX, CELLS, where=where, symmetry="axisymmetric", axis="x")
    return fvcheck.balance(flow, BOX)


@pytest.mark.parametrize("where", ["point", "centroid"])
@pytest.mark.parametrize("degrees", [0.5, 2.5, 10.0])
@pytest.mark.parametrize("axis", list(FRAMES))
def test_a_wedge_gives_the_ledger_of_the_half_plane(axis, degrees, where):
    mesh = wedge(FRAMES[axis], np.radians(degrees), where=where)
    cell_values = "average" if where == "point" else "centroid"
    flow = fvcheck.Flow.from_meshio(mesh, fluid=Fluid(**VORTEX.fluid), cell_values=cell_values)
    assert flow.case.symmetry == "axisymmetric"
    assert "wedge" in [hint.code for hint in flow.hints]
    box = BOX
    if flow.case.axis == 1:  # coordinates keep the order of the plane: r first
        box = ControlSurface.box(0.0, 0.1, 1.0, 1.0, name="can")
    found, expected = numbers(fvcheck.balance(flow, box)), numbers(plane_ledger(where))
    other = {"momentum-x": "momentum-y", "momentum-y": "momentum-x"} if flow.case.axis == 1 else {}
    for label, values in expected.items():
        # The same field on the same cells: rounding of the turn only.
        size = max(abs(v) for v in values)
        assert np.allclose(found[other.get(label, label)], values, rtol=0, atol=1e-9 * size), label


@pytest.mark.parametrize("duplicate", [False, True])
def test_a_wedge_between_no_coordinate_planes_is_recognised(duplicate):
    # From 0 to 5 degrees, as some write it; axis points written once or twice.
    mesh = wedge(FRAMES["x"], np.radians(2.5), middle=np.radians(2.5), duplicate=duplicate)
    flow = fvcheck.Flow.from_meshio(mesh, fluid=Fluid(**VORTEX.fluid))
    assert flow.case.axis == 0
    found, expected = numbers(fvcheck.balance(flow, BOX)), numbers(plane_ledger("point"))
    for label, values in expected.items():
        size = max(abs(v) for v in values)
        assert np.allclose(found[label], values, rtol=0, atol=1e-9 * size), label


def test_patches_of_a_wedge_are_those_of_the_half_plane():
    mesh = wedge(FRAMES["x"], np.radians(2.5))
    n = len(CELLS.points)
    far = np.where(CELLS.points[:, 1] == 0.0, np.arange(n), np.arange(n) + n)
    tags = {"inlet": (0, 0.0), "outlet": (0, 1.2), "shell": (1, 1.2)}
    faces, marks = {"triangle": [], "quad": []}, {"triangle": [], "quad": []}

    def add(corners, tag):
        corners = list(dict.fromkeys(corners))
        kind = {3: "triangle", 4: "quad"}[len(corners)]
        faces[kind].append(corners)
        marks[kind].append(tag)

    for i in range(len(CELLS.sizes)):
        a = CELLS.nodes[CELLS.offsets[i] : CELLS.offsets[i + 1]]
        add(a.tolist(), 4)  # the two sides of the slice are marked as well
        add(far[a].tolist(), 5)
        for p, q in zip(a, np.roll(a, -1)):
            for tag, (axis, level) in enumerate(tags.values(), start=1):
                if (CELLS.points[[p, q], axis] == level).all():
                    add([p, q, far[q], far[p]], tag)
    cells = {kind: block.data for kind, block in zip([b.type for b in mesh.cells], mesh.cells)}
    cells |= {kind: np.array(listed) for kind, listed in faces.items()}
    data = [np.array(marks.get(kind, [0] * len(listed))) for kind, listed in cells.items()]
    marked = meshio.Mesh(mesh.points, cells, point_data=mesh.point_data, cell_data={"patch": data})
    flow = fvcheck.Flow.from_meshio(marked, fluid=Fluid(**VORTEX.fluid))
    level = {
        name: flow.mesh.points[flow.mesh.patch_edges(name)].mean(axis=(0, 1))
        for name in flow.mesh.boundary.names
    }
    assert {"patch-1", "patch-2", "patch-3"} <= set(level)
    assert not {"patch-4", "patch-5"} & set(level)
    assert np.allclose(level["patch-1"], [0.0, 0.6]) and np.allclose(level["patch-3"], [0.6, 1.2])
    shell = fvcheck.balance(flow, ControlSurface.patch("patch-3"), laws=["mass"])["mass"]
    assert shell.flux == pytest.approx(-np.pi * 1.2**3, rel=1e-9)  # 2πr · u_r = −πr² over the length 1.2


def polyhedra(half):
    """The slice with every cell a polyhedron, as VTK holds it: faces of two corners dropped."""
    import pyvista

    mesh = wedge(FRAMES["x"], half)
    n = len(CELLS.points)
    far = np.where(CELLS.points[:, 1] == 0.0, np.arange(n), np.arange(n) + n)
    stream = []
    for i in range(len(CELLS.sizes)):
        a = CELLS.nodes[CELLS.offsets[i] : CELLS.offsets[i + 1]].tolist()
        b = far[a].tolist()
        faces = [a[::-1], b]
        for (p, q), (r, s) in zip(zip(a, a[1:] + a[:1]), zip(b, b[1:] + b[:1])):
            faces.append(list(dict.fromkeys([p, q, s, r])))
        faces = [face for face in faces if len(face) > 2]
        flat = [len(faces), *(number for face in faces for number in (len(face), *face))]
        stream += [len(flat), *flat]
    kinds = np.full(len(CELLS.sizes), 42, np.uint8)
    grid = pyvista.UnstructuredGrid(np.array(stream), kinds, mesh.points)
    for name, values in mesh.point_data.items():
        grid.point_data[name] = values
    return grid


def test_a_wedge_of_polyhedra_is_recognised():
    flow = fvcheck.Flow.from_pyvista(polyhedra(np.radians(2.0)), fluid=Fluid(**VORTEX.fluid))
    found, expected = numbers(fvcheck.balance(flow, BOX)), numbers(plane_ledger("point"))
    for label, values in expected.items():
        size = max(abs(v) for v in values)
        assert np.allclose(found[label], values, rtol=0, atol=1e-9 * size), label


def test_a_wedge_from_a_file_in_single_precision_is_recognised(tmp_path):
    mesh = wedge(FRAMES["z"], np.radians(2.5))
    mesh.points = mesh.points.astype(np.float32)
    meshio.write(tmp_path / "wedge.vtu", mesh)
    flow = fvcheck.open_flow(tmp_path / "wedge.vtu", fluid=Fluid(**VORTEX.fluid))
    assert (flow.case.plane, flow.case.axis) == ("xz", 1)
    ledger = fvcheck.balance(flow, ControlSurface.box(0.0, 0.1, 1.0, 1.0))
    for row in ledger.rows:
        assert row.verdict == "closed", row.label


@pytest.mark.parametrize("how", ["beside", "aslant"])
def test_a_wedge_about_another_axis_is_refused_with_what_to_do(how):
    mesh = wedge(FRAMES["x"], np.radians(2.0))
    c, s = np.cos(0.3), np.sin(0.3)
    turn = np.array([[c, -s, 0.0], [s, c, 0.0], [0.0, 0.0, 1.0]])
    mesh.points = mesh.points + np.array([0.0, 0.5, 0.0]) if how == "beside" else mesh.points @ turn.T
    with pytest.raises(fvcheck.MeshError, match="coordinate axis"):
        fvcheck.Flow.from_meshio(mesh, fluid=Fluid(**VORTEX.fluid))


def test_a_wedge_as_wide_as_a_quarter_is_refused():
    mesh = wedge(FRAMES["x"], np.radians(45.0))
    with pytest.raises(fvcheck.MeshError):
        fvcheck.Flow.from_meshio(mesh, fluid=Fluid(**VORTEX.fluid))
