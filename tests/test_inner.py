"""Whole cells of a large volume: one pass over them in place of fits of every degree."""

from __future__ import annotations

import numpy as np
import pytest
import trial_meshes as tm
from core_cases import UNIT, flow_on, mesh_of, meshes
from exact import taylor_green

import fvcheck
from fvcheck import Flow, Fluid, volume
from fvcheck.balancing import choose_laws
from fvcheck.kernels.inner import in_triangles, nodal_quadratics
from fvcheck.overlay.overlay import lay_over
from fvcheck.sampling.inner import inner_cells
from fvcheck.volume import SampledVolume

K, MU = 2 * np.pi, 0.01
BOX = (0.22, 0.17, 0.81, 0.74)
SURFACES = {
    "box": fvcheck.ControlSurface.box(*BOX, name="s"),
    "circle": fvcheck.ControlSurface.circle(0.5, 0.45, 0.3, name="s"),
    "domain": fvcheck.ControlSurface.domain(name="s"),
}


@pytest.fixture
def by_passes(monkeypatch):
    """Every volume, however small, goes by one pass."""
    monkeypatch.setattr(volume, "MANY_CELLS", 0)


def cells_of(size, seed=0):
    return tm.triangles(UNIT, size, seed)


def wave(cells, **more):
    x, y = cells.points.T
    data = {
        "U": np.column_stack([np.sin(K * x) * np.cos(K * y), -np.cos(K * x) * np.sin(K * y)]),
        "p": 0.25 * (np.cos(2 * K * x) + np.cos(2 * K * y)),
        **more,
    }
    fluid = Fluid(density=1.0, viscosity=MU)
    return Flow.from_arrays(cells.points, (cells.offsets, cells.nodes), point_data=data, fluid=fluid)


def dissipation(x0, y0, x1, y1):
    """∫ 4μk² cos² kx cos² ky over a box: τ:∇u of `wave`, by hand."""

    def half(a, b):
        return 0.5 * (b - a) + (np.sin(2 * K * b) - np.sin(2 * K * a)) / (4 * K)

    return 4 * MU * K**2 * half(x0, x1) * half(y0, y1)


def geometry_of(cells):
    mesh = mesh_of(cells)
    return mesh, inner_cells(mesh, np.arange(mesh.n_cells), np.empty(0, np.int64))


def quadratics(g, data):
    return nodal_quadratics(g.points, g.offsets, g.nodes, g.point_first, g.point_cells, data)


@pytest.mark.parametrize("kind", [*meshes(), "layer"])
def test_a_quadratic_comes_back_at_nodes_and_in_triangles(kind):
    cells = tm.boundary_layer((0, 0, 10, 0.048), 0.5, 2500) if kind == "layer" else meshes()[kind]
    _, g = geometry_of(cells)
    (x, y), span = g.points.T, np.ptp(g.points, axis=0)
    x, y = x / span[0], y / span[1]
    data = np.column_stack([1 + 2 * x - y + 3 * x * x - x * y + 0.5 * y * y, x + y])
    jets, _, _, weak = quadratics(g, data)
    assert weak.mean() < 0.7  # coarse meshes have most of their nodes on the boundary, but not all
    exact = np.zeros_like(jets)
    exact[:, 0] = np.column_stack([2 + 6 * x - y, np.ones_like(x)])
    exact[:, 1] = np.column_stack([-1 - x + y, np.ones_like(x)])
    exact[:, 2:, 0] = 6, -1, 1
    scale = np.array([span[0], span[1], span[0] ** 2, span[0] * span[1], span[1] ** 2])[:, None]
    # differences over a cell lose digits by the square of their number across the mesh, 10⁵ in the layer
    assert np.abs((jets * scale - exact)[~weak]).max() < (1e-3 if kind == "layer" else 1e-9)
    jets[:] = exact / scale
    for degree in (2, 3):
        places, values, gradients, _ = in_triangles(
            g.points, g.triangles, data, jets, degree, np.array([0, 2]), 4
        )
        px, py = places[0] / span[0], places[1] / span[1]
        assert values[0] == pytest.approx(1 + 2 * px - py + 3 * px**2 - px * py + 0.5 * py**2, abs=1e-12)
        assert gradients[0, 0] * span[0] == pytest.approx(2 + 6 * px - py, abs=1e-9)
        assert gradients[0, 1] * span[1] == pytest.approx(-1 - px + py, abs=1e-7)
        assert not values[[1, 3]].any() and not gradients[[1, 3]].any()
    places, values, gradients, twice = in_triangles(
        g.points, g.triangles, data[:, 1:], jets[:, :, 1:], 1, np.array([0]), 1
    )
    assert values[0] == pytest.approx(places[0] / span[0] + places[1] / span[1], abs=1e-12)
    assert gradients[0].T * span == pytest.approx(np.ones((len(places.T), 2)), abs=1e-9)
    assert 0.5 * twice.sum() == pytest.approx(float(cells.areas.sum()), rel=1e-12)


def test_a_quadratic_is_that_of_numpys_least_squares():
    _, g = geometry_of(meshes()["triangles"])
    data = np.random.default_rng(1).normal(size=(len(g.points), 1))
    jets, low, high, weak = quadratics(g, data)
    checked = 0
    for p in np.flatnonzero(~weak):
        cells = g.point_cells[g.point_first[p] : g.point_first[p + 1]]
        rings = [g.nodes[g.offsets[c] : g.offsets[c + 1]] for c in cells]
        around = sorted({int(q) for ring in rings for q in ring} - {int(p)})
        if len(around) != len(cells):
            continue  # on the boundary one neighbour is left out
        d = g.points[around] - g.points[p]
        a = np.linalg.inv(np.linalg.cholesky(d.T @ d / len(d)))
        r2 = np.sum((d @ a.T) ** 2, axis=1)
        x, y = d.T
        matrix = np.column_stack([x, y, 0.5 * x * x, x * y, 0.5 * y * y]) / (r2 + 0.1)[:, None]
        expected = np.linalg.lstsq(matrix, (data[around, 0] - data[p, 0]) / (r2 + 0.1), rcond=None)[0]
        # normal equations lose twice the digits of the condition, which is below a hundred
        assert jets[p, :, 0] == pytest.approx(expected, rel=1e-8, abs=1e-8 * np.abs(expected).max())
        assert low[p, 0] == min(data[around].min(), data[p, 0])
        assert high[p, 0] == max(data[around].max(), data[p, 0])
        checked += 1
    assert checked > 10


def test_the_integral_of_squared_gradients_converges_by_the_fourth_power_and_linearly_sampled_by_the_second(
    by_passes,
):
    """Against the closed form; the cut cells have fits of degree 3, of sixth order here."""
    errors, linear = [], []
    for size in (0.06, 0.03, 0.015):
        flow = wave(cells_of(size))
        law = choose_laws(flow, ["kinetic-energy"])
        sampled = SampledVolume(flow, SURFACES["box"], lay_over(flow.mesh, SURFACES["box"]), law)
        assert sampled.inner is not None
        source = [sampled.contributions(law[0], degree).source.sum() for degree in (1, 3)]
        linear.append(abs(source[0] + dissipation(*BOX)))
        errors.append(abs(source[1] + dissipation(*BOX)))
    order = np.log2(np.array(errors[:-1]) / errors[1:])
    # irregular meshes: orders scatter by half from one refinement to the next
    assert order.mean() > 3.3
    assert 1.5 < np.log2(linear[0] / linear[2]) / 2 < 2.6
    assert errors[-1] < 1e-5 * dissipation(*BOX)


@pytest.mark.parametrize("surface", SURFACES)
@pytest.mark.parametrize("kind", ["triangles", "mixed", "polygons", "quadtree"])
def test_a_pass_gives_the_ledger_of_the_fits_within_its_band(monkeypatch, kind, surface):
    makers = {
        "triangles": lambda: tm.triangles(UNIT, 0.04, 1),
        "mixed": lambda: tm.mixed(UNIT, 0.04, 1),
        "polygons": lambda: tm.polygons(UNIT, 0.045, 1),
        "quadtree": lambda: tm.quadtree(UNIT, 0.06, levels=1),
    }
    exact = taylor_green()
    flow = flow_on(exact, makers[kind]())
    rows = []
    for many in (10**9, 0):
        monkeypatch.setattr(volume, "MANY_CELLS", many)
        rows.append(fvcheck.balance(flow, SURFACES[surface], ["mass", "momentum", "kinetic-energy"]))
    fits, passes = (ledger["kinetic-energy"] for ledger in rows)
    assert rows[0]["momentum-x"] == rows[1]["momentum-x"]  # no volume term: nothing may change
    assert abs(passes.imbalance - fits.imbalance) <= passes.sampling_band + fits.sampling_band
    # nothing is lost: a pass is no vaguer than the fits by more than half
    assert passes.sampling_band < 1.5 * fits.sampling_band
    assert passes.resolution_band < 1.5 * fits.resolution_band


@pytest.mark.parametrize("seed", range(12))
def test_the_true_dissipation_lies_in_the_band(by_passes, seed):
    flow = wave(cells_of(0.05, seed))
    rng = np.random.default_rng(seed)
    x0, y0 = rng.uniform(0.05, 0.3, 2)
    x1, y1 = rng.uniform(0.6, 0.95, 2)
    surface = fvcheck.ControlSurface.box(x0, y0, x1, y1)
    law = choose_laws(flow, ["kinetic-energy"])
    sampled = SampledVolume(flow, surface, lay_over(flow.mesh, surface), law)
    parts = [sampled.contributions(law[0], degree).source[:, 0] for degree in (1, 2, 3)]
    from fvcheck.bands import bands

    band = bands(*parts)
    error = abs(parts[2].sum() + dissipation(x0, y0, x1, y1))
    assert error <= band.sampling


def test_numbering_the_cells_backwards_changes_nothing_but_rounding(by_passes):
    cells = cells_of(0.05)
    parts = [cells.nodes[a:b] for a, b in zip(cells.offsets[:-1], cells.offsets[1:])][::-1]
    turned = tm.from_lists(cells.points, [list(part) for part in parts])
    rows = [fvcheck.balance(wave(c), SURFACES["circle"])["kinetic-energy"] for c in (cells, turned)]
    assert rows[0].imbalance == pytest.approx(rows[1].imbalance, rel=1e-12)


def test_contents_go_by_a_pass_too(monkeypatch):
    flow = wave(cells_of(0.04))
    held = []
    for many in (10**9, 0):
        monkeypatch.setattr(volume, "MANY_CELLS", many)
        surface, laws = SURFACES["box"], choose_laws(flow, ["momentum", "kinetic-energy"])
        sampled = SampledVolume(flow, surface, lay_over(flow.mesh, surface), laws, unsteady=True)
        held.append([sampled.content(law, 3, sampled.datum) for law in laws])
    for (cells, first), (again, second) in zip(*held):
        assert sorted(cells) == sorted(again)
        size = np.abs(first).sum()
        # third order cell by cell, at 25 cells a wave
        assert np.abs(first[np.argsort(cells)] - second[np.argsort(again)]).sum() < 5e-4 * size


def test_rates_of_change_go_by_a_pass_too(monkeypatch):
    cells = cells_of(0.05)
    rate = np.column_stack([cells.points[:, 0] ** 2, cells.points[:, 1]])
    flow = wave(cells, dUdt=rate)
    rows = []
    for many in (10**9, 0):
        monkeypatch.setattr(volume, "MANY_CELLS", many)
        fields = {"velocity": "U", "pressure": "p", "rate:velocity": "dUdt"}
        told = Flow.from_arrays(
            cells.points,
            (cells.offsets, cells.nodes),
            point_data={"U": flow.fields["velocity"].values[:, :2], "p": flow.fields["pressure"].values}
            | {"dUdt": rate},
            fluid=flow.fluid,
            fields=fields,
        )
        rows.append(fvcheck.balance(told, SURFACES["box"], ["momentum"]))
    x0, y0, x1, y1 = BOX
    exact = (x1**3 - x0**3) / 3 * (y1 - y0), (y1**2 - y0**2) / 2 * (x1 - x0)
    for ledger in rows:
        # quadratics and below are exact
        assert ledger["momentum-x"].storage == pytest.approx(exact[0], rel=1e-10)
        assert ledger["momentum-y"].storage == pytest.approx(exact[1], rel=1e-10)


def test_at_a_jump_a_pass_falls_to_linear_sampling(by_passes):
    cells = cells_of(0.03)
    flow = wave(cells)
    step = np.where(cells.points[:, 0] > 0.513, 1.0, 0.0)
    jumping = Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        point_data={"U": flow.fields["velocity"].values, "p": step},
        fluid=flow.fluid,
    )
    law = choose_laws(jumping, ["kinetic-energy"])
    sampled = SampledVolume(jumping, SURFACES["box"], lay_over(jumping.mesh, SURFACES["box"]), law)
    assert sampled.inner is not None and sampled.falls
    x = np.array(
        [jumping.mesh.points[jumping.mesh.nodes[a:b], 0].mean() for a, b in
         zip(jumping.mesh.offsets[:-1], jumping.mesh.offsets[1:])]
    )[sampled.inner.geometry.cells]  # fmt: skip
    assert sampled.inner.fell.any()
    assert np.abs(x[sampled.inner.fell] - 0.513).max() < 0.12
    smooth = SampledVolume(flow, SURFACES["box"], lay_over(flow.mesh, SURFACES["box"]), law)
    assert smooth.inner is not None and not smooth.inner.fell.any()
