"""fvcheck report: the page, its figures and files hold what the result holds, whatever names a file has."""

import json
import re
import xml.etree.ElementTree as ElementTree
from dataclasses import replace
from datetime import UTC, datetime
from pathlib import Path

import numpy as np
import pytest
import trial_meshes as tm
from forked import fvcheck as command
from pages import Page
from write_case import write_case

import fvcheck
from fvcheck.checkfile import load
from fvcheck.laws import law_names
from fvcheck.reporting.painting import _inside

ROOT = Path(__file__).parent.parent
DEMO = ROOT / "meshes" / "demo-coarse.vtu"
CHECK = ROOT / "meshes" / "demo.toml"
DATE = datetime(2024, 2, 29, 12, 30, tzinfo=UTC)


def settings():
    """The demo's, as the check file has them."""
    check = load(CHECK, laws=law_names())
    return {
        "surfaces": check.control_surfaces(),
        "tolerance": dict(check.tolerance),
        "fluid": fvcheck.Fluid(**check.fluid.model_dump(exclude_unset=True)),
        "fields": dict(check.fields),
        "walls": list(check.patches.wall),
    }


@pytest.fixture(scope="module")
def made():
    bodies = {"patch-4": {"velocity": 0.12, "length": 0.004, "density": 1.2}}
    return fvcheck.report(DEMO, bodies=bodies, beside=[CHECK], date=DATE, **settings())


@pytest.fixture(scope="module")
def unfinished():
    return fvcheck.report(ROOT / "meshes" / "demo-coarse-0020.vtu", laws=["mass", "momentum"], **settings())


def check_page(text: str) -> Page:
    """What must hold for every page."""
    page = Page(text)
    assert page.faults == []
    assert len(set(page.ids)) == len(page.ids)
    outside = [a for a in page.addresses if not a.startswith(("#", "data:"))]
    assert outside == []
    assert "http" not in re.sub(r"data:[^\"]*", "", text).replace("http-equiv", "")
    assert page.of("script") == [] and not any(n.startswith("on") for _, a in page.tags for n in a)
    # Whatever is pointed to within the page is there.
    assert {a[1:] for a in page.addresses if a.startswith("#")} <= set(page.ids)
    figures = [a for a in page.of("svg") if a.get("role") == "img"]
    assert len(figures) == len(page.of("figure")) > 0
    for figure in figures:
        title, words = figure["aria-labelledby"].split()
        assert title in page.ids and words in page.ids
    for svg in page.of("svg"):
        assert svg.get("role") == "img" or svg.get("aria-hidden") == "true"
    assert all(len(text.strip()) > 5 for text in page.said("desc"))
    return page


def test_moments_are_about_the_point_that_is_told_for_a_body():
    flow = fvcheck.open_flow(
        DEMO, **{k: v for k, v in settings().items() if k in ("fluid", "fields", "walls")}
    )
    box = settings()["surfaces"][0]
    points = {"patch-4": (0.016, 0.0075)}
    report = fvcheck.report(flow, box, ["mass"], bodies=["patch-4"], moment_about=points)
    assert report.found.forces == fvcheck.forces(flow, "patch-4", about=points)
    assert all(e.moment_about == points["patch-4"] for e in report.found.forces.estimates)


def test_the_page_is_valid_and_needs_nothing_from_elsewhere(made):
    page = check_page(made.html)
    assert made.html.startswith("<!DOCTYPE html>")
    assert page.of("html")[0]["lang"] == "en"
    assert len(page.of("main")) == len(page.of("h1")) == 1
    assert len(made.html) < 4e6


def test_the_numbers_are_those_of_balance_all(made):
    told = settings()
    surfaces, tolerance = told.pop("surfaces"), told.pop("tolerance")
    flow = fvcheck.open_flow(DEMO, **told)
    result = fvcheck.balance_all(flow, surfaces, tolerance=tolerance).to_dict()
    found = made.to_dict()
    assert found["surfaces"] == result["surfaces"]
    assert found["verdict"] == result["verdict"] == "closed"
    assert found["forces"] == fvcheck.forces(flow, "patch-4", reference=(
        {"patch-4": {"velocity": 0.12, "length": 0.004, "density": 1.2}}
    )).to_dict()["forces"]  # fmt: skip


def test_every_number_of_every_row_stands_in_the_page(made):
    page = Page(made.html)
    names = (
        *("inflow", "outflow", "flux", "boundary", "storage", "source", "imbalance", "scale"),
        *("imbalance_percent", "tolerance_percent", "linear_imbalance"),
        *("sampling_band", "resolution_band", "rounding_band"),
    )
    rows = [row for surface in made.to_dict()["surfaces"] for row in surface["laws"]]
    assert len(rows) == 10
    for row in rows:
        for name in names:
            assert row[name] in page.numbers, (row["law"], name)
        assert set(row["parts"].values()) | set(row["patches"].values()) <= page.numbers
    for estimate in made.to_dict()["forces"]:
        assert {estimate["drag"], estimate["lift"], estimate["moment"]} <= page.numbers
    verdicts = [text.strip() for text in page.said("td") if text.strip() in ("closed", "open", "undecided")]
    # Once at a glance, once with the bands.
    assert verdicts == 2 * ["closed"] * len(rows)


def test_the_verdict_stands_first_as_a_word_and_a_sign(made, unfinished):
    for report, sign in ((made, "✓"), (unfinished, "✗")):
        start = report.html[report.html.index("<main>") :]
        banner = start[: start.index("</section>")]
        assert sign in banner and report.verdict in banner and "What to do" in banner


def test_set_up_hints_cautions_and_record_are_told(made):
    text = made.html
    for word in ("1.8e−05 Pa s", "patch-4", "at rest", "box(0.0115, 0.003, 0.0215, 0.012)", "its average"):
        assert word in text
    page = fvcheck.hints.PAGES["patch-values"]
    assert page.seen in text and page.do in text
    assert "necessary, not sufficient" in text and "licensed practice" in text
    import hashlib

    import numpy

    for file in (DEMO, CHECK):
        assert hashlib.sha256(file.read_bytes()).hexdigest() in text
        assert f">{file.stat().st_size}<" in text
    assert f"numpy {numpy.__version__}" in text and f"fvcheck {fvcheck.__version__}" in text
    assert "2024-02-29 12:30:00+00:00" in text


def test_files_that_a_series_names_are_in_the_record():
    from fvcheck.reporting.record import record_of

    samples = ROOT / "tests" / "samples"
    names = [Path(f.name).name for f in record_of([samples / "mixed_cell_series.pvd"]).files]
    inside = sorted(path.name for path in (samples / "mixed_cell_series").iterdir())
    assert names[0] == "mixed_cell_series.pvd" and sorted(names[1:]) == inside
    names = [Path(f.name).name for f in record_of([samples / "mixed_point.xdmf"]).files]
    assert names == ["mixed_point.xdmf", "mixed_point.h5"]


def test_a_file_outside_the_folder_of_the_list_that_names_it_is_left_alone(tmp_path):
    from fvcheck.reporting.record import record_of

    (tmp_path / "run").mkdir()
    (tmp_path / "secret.vtu").write_text("x")
    (tmp_path / "run" / "a.pvd").write_text('<DataSet file="../secret.vtu"/><DataSet file="a.pvd"/>')
    names = [Path(f.name).name for f in record_of([tmp_path / "run" / "a.pvd"]).files]
    assert names == ["a.pvd"]


def test_the_same_question_gives_the_same_page(made):
    again = fvcheck.report(DEMO, laws=["mass"], date=DATE, **settings())
    assert again.html == fvcheck.report(DEMO, laws=["mass"], date=DATE, **settings()).html


def test_a_border_is_walked_without_gaps_and_once(made):
    for name, rows in made.along.items():
        border = rows[0].border
        start, end = border.overlay.start[border.order], border.overlay.end[border.order]
        assert sorted(border.order) == list(range(len(start)))
        same = border.chain[1:] == border.chain[:-1]
        # Pieces meet to the rounding of their cuts; the domain is 0.056 m long.
        assert np.abs(start[1:] - end[:-1])[same].max() < 1e-12
        assert border.length == pytest.approx(made.found.result[name].length, rel=1e-12)
        # The border of the volume: outer one and bar; or walls and stations in one, and the bar.
        assert border.chain[-1] == 1


def test_a_ring_begins_at_its_lower_left(made):
    border = made.along["around the bar"][0].border
    assert border.overlay.start[border.order[0]] == pytest.approx((0.0115, 0.003), abs=1e-9)


def test_fluxes_and_bands_along_a_border_add_up_to_those_of_the_ledger(made, unfinished):
    for report in (made, unfinished):
        for name, rows in report.along.items():
            for along in rows:
                row = report.found.result[name][along.label]
                # A level (the mean pressure) that is left out has no net flux, to rounding.
                assert along.flux.sum() == pytest.approx(row.flux + row.boundary, abs=1e-9 * row.scale)
                sampling = along.sampling.sum() + along.inside[0]
                assert sampling + row.rounding_band == pytest.approx(row.sampling_band, rel=1e-9)
                assert along.resolution.sum() + along.inside[1] == pytest.approx(
                    row.resolution_band, rel=1e-9
                )
                assert np.all(along.sampling >= 0) and np.all(along.resolution >= 0)


def test_fluxes_along_a_side_are_those_of_a_closed_form():
    """Uniform stream through a box: ρu through the sides across it, nothing through the others."""
    n = 8
    x, y = np.meshgrid(np.linspace(0, 1, n + 1), np.linspace(0, 1, n + 1))
    points = np.column_stack([x.ravel(), y.ravel()])
    a = np.add.outer(np.arange(n) * (n + 1), np.arange(n)).ravel()
    nodes = np.column_stack([a, a + 1, a + n + 2, a + n + 1])
    flow = fvcheck.Flow.from_arrays(
        points,
        (4 * np.arange(n * n + 1), nodes.ravel()),
        point_data={"U": np.tile([2.0, 0.0], (len(points), 1))},
        fluid=fvcheck.Fluid(density=3.0),
    )
    box = fvcheck.ControlSurface.box(0.2, 0.2, 0.7, 0.9, name="box")
    (mass,) = fvcheck.report(flow, box, ["mass"]).along["box"]
    # Exact fits of a constant; tolerance of rounding.
    assert mass.density == pytest.approx(6.0 * mass.border.normal[:, 0], abs=1e-12)


def test_the_parts_beside_a_border_add_up_to_the_ledger(made, unfinished):
    for report in (made, unfinished):
        for name, rows in report.beside.items():
            assert rows
            for label, parts in rows.items():
                row = report.found.result[name][label]
                assert [part.number for part in parts] == list(range(8))
                # What crosses from part to part cancels to rounding. Integrals over cells that the parts
                # cut have an error of their own, far below the bands.
                apart = 1e-3 * row.sampling_band if label == "kinetic-energy" else 1e-10 * row.scale
                assert sum(part.imbalance for part in parts) == pytest.approx(row.imbalance, abs=apart)


def test_the_parts_beside_the_stretches_of_a_square_have_the_imbalance_of_their_area():
    """u = (x, 0) makes mass everywhere alike, ρ times the area: an eighth of it beside each half side."""
    points = np.stack(np.meshgrid(*2 * [np.linspace(0, 1, 12)], indexing="ij"), axis=-1).reshape(-1, 2)
    a = np.add.outer(12 * np.arange(11), np.arange(11)).ravel()
    nodes = np.column_stack([a, a + 12, a + 13, a + 1])
    velocity = np.column_stack([points[:, 0], np.zeros(len(points))])
    fluid = fvcheck.Fluid(density=3.0)
    mesh = (4 * np.arange(len(nodes) + 1), nodes.ravel())
    flow = fvcheck.Flow.from_arrays(points, mesh, point_data={"U": velocity}, fluid=fluid)
    box = fvcheck.ControlSurface.box(0.2, 0.2, 0.8, 0.8, name="box")
    parts = fvcheck.report(flow, box, ["mass"]).beside["box"]["mass"]
    # A linear field is sampled without error; the points that divide the square are moved by 1e-7 of it.
    assert [part.imbalance for part in parts] == pytest.approx(8 * [3.0 * 0.36 / 8], rel=1e-4)
    assert [part.begin for part in parts] == pytest.approx(0.3 * np.arange(8))


def test_a_run_that_is_done_has_no_part_beyond_its_resolution_band(made, unfinished):
    parts = [p for rows in made.beside.values() for found in rows.values() for p in found]
    assert parts and not any(p.stands_out for p in parts)
    # At iteration 20 momentum is not settled beside the bar, whose wall is the end of the walk.
    bar = unfinished.beside["around the bar"]["momentum-x"]
    assert max(bar, key=lambda p: abs(p.imbalance)).number == 7 and bar[7].stands_out
    assert "beside H–A" in unfinished.html
    assert "no part of the volume has an imbalance beyond" in made.html


def test_an_open_row_brings_its_diagnosis_in_words_and_as_a_map(made, unfinished):
    assert unfinished.verdict == "open" and "diagnosis" in unfinished.to_dict()
    page = check_page(unfinished.html)
    start = unfinished.html.index('id="why"')
    assert start < unfinished.html.index('id="field"')
    assert "No single set-up error explains this" in unfinished.html[start:]
    assert "figure-map-1" in page.ids
    region = unfinished.to_dict()["diagnosis"]["where"][0]
    assert {*region["centre"], region["size"], region["amount"], region["band"]} <= page.numbers
    assert "diagnosis" not in made.to_dict() and "figure-map-1" not in Page(made.html).ids


def test_a_series_gives_a_history_with_the_numbers_of_fvcheck_history():
    told = settings() | {"laws": ["mass"], "steady": True}
    files = [ROOT / "meshes" / f"demo-coarse-0{n}.vtu" for n in ("020", "100", "400")]
    report = fvcheck.report(files, **told)
    page = check_page(report.html)
    history = fvcheck.history(files, **told)
    assert report.to_dict()["trends"] == history.to_dict()["trends"]
    assert {"history", "figure-history-1", "figure-history-2"} <= set(page.ids)
    for entry in history.entries:
        assert {
            row.imbalance_percent for ledger in entry.result.ledgers for row in ledger.rows
        } <= page.numbers
    assert {trend.level for trend in history.trends} <= page.numbers


def test_forces_of_an_unsteady_series_hold_what_is_stored_and_are_drawn_over_time(tmp_path):
    """A fluid pushed as a whole: the force on any part of it is ρ u̇ times its area (Archimedes)."""
    cells = tm.with_hole((-1.0, -1.0, 1.0, 1.0), (0.0, 0.0, 0.2), 0.15, 0.06, seed=1)
    files = []
    for k, time in enumerate((0.0, 0.1, 0.2)):
        files.append(tmp_path / f"run_{k}.vtu")
        velocity = np.tile([1.0 + 2.0 * time, 0.0], (len(cells.points), 1))
        fields = {"U": velocity, "p": -1.5 * 2.0 * cells.points[:, 0]}
        write_case(files[-1], cells, point_data=fields)
    listed = "".join(f'<DataSet timestep="{0.1 * k}" file="run_{k}.vtu"/>' for k in range(3))
    run = tmp_path / "run.pvd"
    run.write_text(f'<VTKFile type="Collection"><Collection>{listed}</Collection></VTKFile>')
    box = fvcheck.ControlSurface.box(-0.6, -0.5, 0.7, 0.6, name="box")
    fluid = fvcheck.Fluid(density=1.5, viscosity=0.0)
    found = fvcheck.report(run, box, ["mass"], bodies=["body-1"], fluid=fluid)
    drag = [e.drag for e in found.found.forces.estimates]
    # all is linear in space and time; the hole is a polygon in the circle of radius 0.2
    assert len(drag) >= 3 and drag == pytest.approx(len(drag) * [drag[0]], abs=1e-9)
    assert drag[0] == pytest.approx(1.5 * 2.0 * np.pi * 0.04, rel=0.05)
    assert found.found.forces == found.found.history.forces[-1]
    page = check_page(found.html)
    assert "figure-force-history-1" in page.ids


def test_files_on_other_meshes_give_a_study():
    told = settings() | {"laws": ["mass"]}
    files = [DEMO, ROOT / "meshes" / "demo-fine.vtu"]
    report = fvcheck.report(files, **told)
    page = check_page(report.html)
    study = fvcheck.study(files, **told)
    assert report.found.flow.mesh.n_cells == 11688  # of meshes/demo-fine.vtu, by demo-solver.json
    assert report.to_dict()["study"] == study.to_dict()["study"]
    assert {"study", "figure-study"} <= set(page.ids)
    assert {q.convergence.values[0] for q in study.quantities} <= page.numbers


HOSTILE = [
    "<script>alert(1)</script>",
    "a$b_{$",
    "\"quoted' & <b>",
    "\x1b[31m\x00red",
    "$\\frac{1}{0}$",
    "日本 \u202ex",
]


def test_names_from_a_stranger_are_shown_as_text(tmp_path):
    flow = fvcheck.open_flow(DEMO, fluid=fvcheck.Fluid(density=1.2, viscosity=1.8e-5))
    names = (*HOSTILE[:4],)
    mesh = replace(flow.mesh, boundary=replace(flow.mesh.boundary, names=names), bodies=(names[3],))
    fields = {role: replace(f, name=HOSTILE[k % 6]) for k, (role, f) in enumerate(flow.fields.items())}
    flow = replace(
        flow, mesh=mesh, fields=fields, case=replace(flow.case, file="<img src=x onerror=alert(1)>.vtu")
    )
    surface = fvcheck.ControlSurface.box(0.0095, 0.0, 0.032, 0.016, name="<i onclick=x>$x$</i>")
    report = fvcheck.report(flow, surface, ["mass", "momentum"], bodies=[names[3]], title="<h1>x")
    page = check_page(report.html)
    assert page.of("i") == [] and page.of("img") == [] and page.of("b") != []
    assert "\x1b" not in report.html and "\x00" not in report.html
    assert "&lt;script&gt;alert(1)&lt;/script&gt;" in report.html
    paths = report.write_vtk(tmp_path / "vtk")
    assert all(re.fullmatch(r"[A-Za-z0-9.-]+", path.name) for path in paths)


def test_figures_are_written_as_pictures_that_can_be_opened(tmp_path):
    from PIL import Image

    report = fvcheck.report(DEMO, laws=["mass"], bodies=["patch-4"], **settings())
    paths = report.write_figures(tmp_path / "figures")
    # Three fields, one of each law and surface, the body.
    assert len(paths) == 2 * (3 + 2 + 1)
    for path in paths:
        if path.suffix == ".png":
            with Image.open(path) as image:
                assert min(image.size) > 150
                # More than one colour: something is drawn.
                assert len(image.convert("RGB").resize((64, 64)).getcolors(4096)) > 5
        else:
            root = ElementTree.fromstring(path.read_bytes())
            assert root.tag == "{http://www.w3.org/2000/svg}svg"
            assert root.find("{http://www.w3.org/2000/svg}title").text
            assert "var(--" not in path.read_text(encoding="utf-8")


def read_vtk(path: Path):
    """By VTK's own reader."""
    from vtkmodules.util.numpy_support import vtk_to_numpy
    from vtkmodules.vtkCommonCore import vtkFileOutputWindow, vtkOutputWindow
    from vtkmodules.vtkIOXML import vtkXMLPolyDataReader, vtkXMLUnstructuredGridReader

    log = path.with_suffix(".log")
    window = vtkFileOutputWindow()
    window.SetFileName(str(log))
    vtkOutputWindow.SetInstance(window)
    reader = vtkXMLPolyDataReader() if path.suffix == ".vtp" else vtkXMLUnstructuredGridReader()
    reader.SetFileName(str(path))
    reader.Update()
    assert not log.exists() or log.read_text() == ""
    data = reader.GetOutput()
    arrays = data.GetCellData()
    return data, {
        arrays.GetArrayName(k): vtk_to_numpy(arrays.GetArray(k)) for k in range(arrays.GetNumberOfArrays())
    }


def test_vtk_reads_the_surfaces_with_densities_that_integrate_to_the_ledger(made, tmp_path):
    paths = made.write_vtk(tmp_path / "vtk")
    assert [path.name for path in paths] == [
        "surface-around-the-bar.vtp", "surface-channel-section.vtp", "cells.vtu"
    ]  # fmt: skip
    for path, ledger in zip(paths, made.found.result.ledgers):
        data, arrays = read_vtk(path)
        assert data.GetNumberOfLines() == len(arrays["length"])
        x0, x1 = data.GetBounds()[:2]
        assert (x0, x1) == pytest.approx(
            (0.0115, 0.0215) if "bar" in path.name else (0.0095, 0.032), abs=1e-12
        )
        for row in ledger.rows:
            density = arrays[f"flux_density_{row.label}"]
            drawn = arrays["drawn"].astype(bool)
            if row.law != "momentum":
                net = (density * arrays["length"])[drawn].sum()
                assert net == pytest.approx(row.flux, abs=1e-9 * row.scale)
            whole = (arrays[f"resolution_band_density_{row.label}"] * arrays["length"]).sum()
            assert 0 < whole <= row.resolution_band * (1 + 1e-9)


def test_vtk_reads_the_cells_with_imbalances_that_add_up_to_the_domain(made, tmp_path):
    *_, path = made.write_vtk(tmp_path / "vtk")
    data, arrays = read_vtk(path)
    flow = made.found.flow
    assert data.GetNumberOfCells() == flow.mesh.n_cells
    domain = fvcheck.balance(flow, fvcheck.ControlSurface.domain(name="domain"), ["mass", "momentum", "heat"])
    for row in domain.rows:
        # Inner edges cancel; left is the ledger of the whole domain, to rounding.
        assert arrays[f"imbalance_{row.label}"].sum() == pytest.approx(row.imbalance, abs=1e-9 * row.scale)
    for ledger in made.found.result.ledgers:
        name = ledger.name.replace(" ", "-")
        area = (arrays[f"share_inside_{name}"] * arrays["area"]).sum()
        assert area == pytest.approx(ledger.area, rel=1e-9)
        assert set(np.unique(arrays[f"degree_{name}"])) <= {0, 1, 2, 3}
    assert arrays["field_velocity"].shape == (flow.mesh.n_cells, 3)


def test_an_image_of_a_large_mesh_covers_the_domain_and_nothing_else():
    """Dots in the demo's domain, against matplotlib's own test of points in polygons."""
    from matplotlib.path import Path as Outline

    from fvcheck.mesh.boundary import chains

    mesh = fvcheck.open_flow(DEMO).mesh
    x, y = np.linspace(-0.005, 0.06, 83), np.linspace(-0.003, 0.019, 41)
    places = np.stack(np.meshgrid(x, y), axis=-1).reshape(-1, 2)
    inside = [
        Outline(mesh.points[c]).contains_points(places) for c in chains(mesh.boundary.edges, mesh.points)
    ]
    expected = np.logical_xor.reduce(inside).reshape(41, 83)
    assert np.array_equal(_inside(mesh, x, y), expected)


def test_a_mesh_of_many_cells_does_not_make_a_heavy_page():
    n = 330
    x, y = np.meshgrid(np.linspace(0, 1, n + 1), np.linspace(0, 1, n + 1))
    points = np.column_stack([x.ravel(), y.ravel()])
    a = np.add.outer(np.arange(n) * (n + 1), np.arange(n)).ravel()
    nodes = np.column_stack([a, a + 1, a + n + 2, a + n + 1])
    velocity = np.column_stack([np.sin(6 * points[:, 0]) * np.cos(6 * points[:, 1]),
                                -np.cos(6 * points[:, 0]) * np.sin(6 * points[:, 1])])  # fmt: skip
    flow = fvcheck.Flow.from_arrays(
        points,
        (4 * np.arange(n * n + 1), nodes.ravel()),
        point_data={"U": velocity},
        fluid=fvcheck.Fluid(density=1.0),
    )
    report = fvcheck.report(flow, fvcheck.ControlSurface.circle(0.5, 0.5, 0.3, name="ring"), ["mass"])
    check_page(report.html)
    assert len(report.html) < 2e6


def test_a_wedge_and_an_open_line_can_be_shown():
    from exact.revolved import hagen_poiseuille
    from exact_data import flow_data, mesh_for

    pipe = hagen_poiseuille()
    cells = mesh_for(pipe, "triangles", 0.2)
    flow = fvcheck.Flow.from_arrays(
        cells.points, (cells.offsets, cells.nodes), cell_data=flow_data(pipe, cells, "average"),
        fluid=fvcheck.Fluid(**pipe.fluid), symmetry="axisymmetric",
    )  # fmt: skip
    line = fvcheck.ControlSurface.line([(1.5, 0.0), (1.5, 1.0)], name="station")
    report = fvcheck.report(flow, line, ["mass"])
    page = check_page(report.html)
    assert report.verdict is None and "no verdict" in report.html
    # Q = πR⁴G/8μ with ρ = 1.3 (Hagen-Poiseuille); 2 % for cells of a fifth of the radius.
    assert report.along["station"][0].flux.sum() == pytest.approx(1.3 * np.pi / 0.8, rel=0.02)
    assert "verdict" in page.ids


def test_the_command_writes_page_figures_files_and_json(tmp_path):
    run = command(
        "report", str(CHECK), "-o", str(tmp_path / "x.html"), "--figures", str(tmp_path / "f"),
        "--vtk", str(tmp_path / "v"), "--json", str(tmp_path / "x.json"), "--law", "mass",
        "-s", "bar=box(0.0115, 0.003, 0.0215, 0.012)",
    )  # fmt: skip
    assert run.status == 0 and run.err == ""
    assert "written" in run.out
    page = check_page((tmp_path / "x.html").read_text(encoding="utf-8"))
    data = json.loads((tmp_path / "x.json").read_text(encoding="utf-8"))
    for surface in data["surfaces"]:
        for row in surface["laws"]:
            assert {row["imbalance"], row["sampling_band"], row["flux"]} <= page.numbers
    assert {"field-speed.png", "field-speed.svg", "flux-1-1.png", "forces-1.svg"} <= {
        p.name for p in (tmp_path / "f").iterdir()
    }
    assert "cells.vtu" in {p.name for p in (tmp_path / "v").iterdir()}


def test_the_command_ends_with_the_status_of_the_verdict_and_tells_nothing_in_a_pipe(tmp_path):
    run = command(
        "report", str(ROOT / "meshes" / "demo-coarse-0020.vtu"), "-c", str(CHECK), "--law", "momentum",
        "-s", "bar=box(0.0115, 0.003, 0.0215, 0.012)", "-o", str(tmp_path / "x.html"), "--json", "-",
    )  # fmt: skip
    assert run.status == 1 and run.err == ""
    assert json.loads(run.out)["verdict"] == "open"


@pytest.mark.parametrize(
    ("arguments", "said"),
    [
        (["report", str(CHECK), "-o", "/nowhere/x.html"], "no directory for the page"),
        (["report", "-o", "x.html"], "no export is given"),
        (["report", str(CHECK), "-c", str(CHECK)], "one check file"),
        (["report", str(DEMO), "--kind", "film", "-o", "x.html"], "no kind 'film'"),
        (["report", str(DEMO), str(CHECK), "--figures", "/nowhere/a/b", "-o", "x.html"], "cannot be made"),
        (
            ["report", str(DEMO), "--body", "pier", "-c", str(CHECK), "-o", "x.html"],
            "there is no body 'pier'",
        ),
    ],
)
def test_what_cannot_be_done_is_an_error_in_one_line_and_leaves_no_page(arguments, said, tmp_path):
    run = command(*arguments, cwd=tmp_path)
    assert run.status == 2 and said in run.err and run.err.count("\n") == 1
    assert list(tmp_path.iterdir()) == []


def test_a_page_that_fails_leaves_the_old_one(made, tmp_path, monkeypatch):
    import os

    path = tmp_path / "x.html"
    path.write_text("old")

    def fail(*_):
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "replace", fail)
    with pytest.raises(fvcheck.SetupError, match="No space left"):
        made.write(path)
    assert path.read_text() == "old" and list(tmp_path.iterdir()) == [path]
