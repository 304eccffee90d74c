"""Ledgers of closed-form flows: every part of every row, its sign, and how fast it converges.

Fields come from `scripts/exact` (books and papers are named there) and reach the tool as files
that VTK or meshio wrote.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import exact
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import FIELDS, UNIT, flow_on, meshes
from exact_data import flow_data, mesh_for
from write_case import write_case

import fvcheck
from fvcheck import ControlSurface, Flow, Fluid, Source

KINDS = tuple(meshes())


# --- exact sums --------------------------------------------------------------------------------


def over_box(function, box, order=60):
    """∫ over a box (x0, y0, x1, y1) by a product of Gauss rules."""
    t, w = np.polynomial.legendre.leggauss(order)
    x0, y0, x1, y1 = box
    x, y = np.meshgrid(x0 + (x1 - x0) * (0.5 + 0.5 * t), y0 + (y1 - y0) * (0.5 + 0.5 * t), indexing="ij")
    weights = np.outer(w, w) * 0.25 * (x1 - x0) * (y1 - y0)
    values = function(x, y)
    return np.sum(weights * values)


def dissipation(flow):
    def density(x, y):
        slope = np.stack([exact.gradient(flow.u, x, y), exact.gradient(flow.v, x, y)], axis=-2)
        return np.einsum("...ij,...ij->...", flow.stress(x, y), slope)

    return density


def kinetic_rate(flow):
    def density(x, y):
        return flow.density(x, y) * (
            flow.u(x, y) * flow.rate("u", x, y) + flow.v(x, y) * flow.rate("v", x, y)
        )

    return density


def energy_rate(flow):
    def density(x, y):
        speed2 = flow.u(x, y) ** 2 + flow.v(x, y) ** 2
        inner = flow.rate("p", x, y) / (flow.fluid["gamma"] - 1)
        return inner + kinetic_rate(flow)(x, y) + 0.5 * flow.rate("rho", x, y) * speed2

    return density


def exact_rows(flow, box, datum):
    """label -> part -> exact value, for a box inside the fluid; datum: row label -> level it counts from."""
    contour = exact.box_contour(*box, order=60)
    through = {name: value.sum(axis=0) for name, value in exact.fluxes(flow, contour).items()}
    rows = {"mass": {"convective": through["mass"], "source": 0.0}}
    rows["mass"]["storage"] = over_box(lambda x, y: flow.rate("rho", x, y), box)
    for c, name in enumerate("xy"):
        force = flow.body_force[c] if flow.body_force else exact.flow.constant(0.0)

        def momentum_rate(x, y, c=c):
            u = (flow.u, flow.v)[c](x, y)
            return flow.density(x, y) * flow.rate("uv"[c], x, y) + flow.rate("rho", x, y) * u

        rows[f"momentum-{name}"] = {
            "convective": through["momentum"][c],
            "pressure": -through["pressure"][c],
            "viscous": -through["viscous"][c],
            "source": over_box(force, box),
            "storage": over_box(momentum_rate, box),
        }
    if flow.compressible:
        points, ds = contour
        carried = np.sum(flow.velocity(*np.moveaxis(points, -1, 0)) * ds, axis=-1)
        rows["total-energy"] = {
            "convective": through["total_energy"],
            "pressure": np.sum(flow.p(points[..., 0], points[..., 1]) * carried),
            "source": 0.0,
            "storage": over_box(energy_rate(flow), box),
        }
        return rows
    level = datum["kinetic-energy"] * through["mass"] / flow.fluid["density"]
    power = exact.flow.constant(0.0)
    if flow.body_force:

        def power(x, y):
            return flow.body_force[0](x, y) * flow.u(x, y) + flow.body_force[1](x, y) * flow.v(x, y)

    rows["kinetic-energy"] = {
        "convective": through["kinetic_energy"],
        "pressure+viscous": -through["work"] - level,
        "source": over_box(power, box) - over_box(dissipation(flow), box),
        "storage": over_box(kinetic_rate(flow), box),
    }
    if "heat" in through:
        c = flow.fluid["specific_heat"]
        heat = over_box(flow.heat_source, box) if flow.heat_source else 0.0
        heat += over_box(dissipation(flow), box) if flow.viscous_heating else 0.0
        rows["heat"] = {
            "convective": through["heat"] - c * datum["heat"] * through["mass"],
            "conductive": through["conduction"],
            "source": heat,
            "storage": 0.0,
        }
    return rows


def found_part(row, part):
    if part in ("source", "storage"):
        return getattr(row, part)
    return sum(row.parts.get(name, 0.0) for name in part.split("+"))


# --- files -------------------------------------------------------------------------------------


def write_flow(path, flow, cells, where, **options):
    """The field, its rates and sources as arrays of a file."""
    data = {FIELDS[role]: values for role, values in flow_data(flow, cells, where).items()}
    x, y = (cells.points if where == "point" else cells.centroids).T

    def array(function):
        return tm.cell_averages(function, cells) if where == "average" else function(x, y)

    told = {}
    if flow.rates:
        data["dUdt"] = np.stack([array(lambda x, y, n=n: flow.rate(n, x, y)) for n in "uv"], axis=1)
        told["rate:velocity"] = "dUdt"
        if flow.compressible:
            for role, name in (("density", "rho"), ("pressure", "p")):
                data[f"d{name}dt"] = array(lambda x, y, n=name: flow.rate(n, x, y))
                told[f"rate:{role}"] = f"d{name}dt"
    if flow.heat_source:
        data["HeatSource"] = array(flow.heat_source)
    if flow.body_force:
        data["BodyForce"] = np.stack([array(f) for f in flow.body_force], axis=1)
    if where == "point":
        write_case(path, cells, point_data=data, **options)
    else:
        write_case(path, cells, cell_data=data, **options)
    return told


def open_case(path, flow, where, told):
    fluid = Fluid(**flow.fluid, viscous_heating=flow.viscous_heating)
    reading = "centroid" if where == "centroid" else "average"
    return fvcheck.open_flow(path, fluid=fluid, fields=told, cell_values=reading)


# flow, mesh kind, reading, file, options of the writer, coarse size
CASES = {
    "kovasznay-point": (exact.kovasznay(), "triangles", "point", "a.vtu", {}, 0.08),
    "kovasznay-cell": (
        exact.kovasznay(),
        "polygons",
        "average",
        "a.vtu",
        {"depth": 0.1, "polyhedra": True},
        0.08,
    ),
    "taylor-green-point": (exact.taylor_green(rho=1.3), "mixed", "point", "a.xdmf", {}, 0.45),
    "taylor-green-cell": (exact.taylor_green(rho=1.3), "quads", "average", "a.vtk", {"version": "4.2"}, 0.45),
    "poiseuille-point": (exact.poiseuille(), "triangles", "point", "a.msh", {}, 0.12),
    "poiseuille-cell": (exact.poiseuille(), "quadtree", "average", "a.vtp", {}, 0.2),
    "couette": (exact.couette(), "mixed", "average", "a.vtk", {"version": "5.1"}, 0.15),
    "lamb-oseen": (exact.lamb_oseen(), "triangles", "average", "a.xdmf", {"plane": "xz"}, 0.06),
    "source": (exact.source(), "triangles", "point", "a.vtu", {"compressed": True, "plane": "yz"}, 0.12),
    "rankine-half-body": (exact.rankine_half_body(), "mixed", "centroid", "a.vtu", {}, 0.12),
    "isentropic-vortex": (
        exact.isentropic_vortex(stream=(0.5, 0.3)),
        "mixed",
        "point",
        "a.vtu",
        {"depth": 1.0},
        0.4,
    ),
    "shear-layer": (exact.shear_layer(0.3), "polygons", "point", "a.vtk", {"version": "5.1"}, 0.1),
    "linear": (exact.linear(), "polygons", "average", "a.vtu", {}, 0.2),
}


def boxes(flow, count=5):
    """Boxes well inside the domain, clear of the hole."""
    rng = np.random.default_rng(4)
    low, high = np.array(flow.domain[:2]), np.array(flow.domain[2:])
    out = []
    while len(out) < count:
        a, b = np.sort(rng.uniform(0.1, 0.9, (2, 2)), axis=0)
        if np.all(b - a > 0.25):
            x0, y0, x1, y1 = *(low + a * (high - low)), *(low + b * (high - low))
            if flow.hole is not None:
                x, y, r = flow.hole
                gap = np.hypot(max(x0 - x, x - x1, 0), max(y0 - y, y - y1, 0))
                if gap < 1.5 * r:
                    continue
            out.append((x0, y0, x1, y1))
    return out


@pytest.mark.parametrize("name", CASES)
def test_every_part_of_every_row_converges_to_its_exact_value(tmp_path, name):
    flow, kind, where, file, options, size = CASES[name]
    errors, ratios, scale = [], [], {}
    for h in (size, 0.5 * size):
        path = tmp_path / f"{h}-{file}"
        told = write_flow(path, flow, mesh_for(flow, kind, h), where, **options)
        case = open_case(path, flow, where, told)
        wrong = {}
        for box in boxes(flow):
            ledger = fvcheck.balance(case, ControlSurface.box(*box))
            datum = {row.label: row.datum for row in ledger.rows}
            rows = exact_rows(flow, box, datum)
            assert {row.label for row in ledger.rows} == set(rows)
            for row in ledger.rows:
                assert row.boundary == 0.0
                scale[row.label] = max(scale.get(row.label, 0.0), row.scale)
                for part, value in rows[row.label].items():
                    wrong.setdefault((row.label, part), []).append(found_part(row, part) - value)
                # an exact solution: what is left is the error of sampling
                ratios.append(abs(row.imbalance) / (row.sampling_band + 1e-9 * row.scale))
                assert row.verdict != "open"
        errors.append({key: np.sqrt(np.mean(np.square(e))) / scale[key[0]] for key, e in wrong.items()})
    # coverage of the band over the rows of both meshes: 1.0 was measured on all flows but two, Kovasznay
    # by averages (0.88) and the half body by centroid values (0.80), whose coarse meshes resolve little
    assert np.mean(np.array(ratios) <= 1.0) >= 0.75
    assert max(ratios) <= 2.0
    coarse, fine = (np.sqrt(np.sum(np.square(list(e.values())))) for e in errors)
    # a tenth of a percent of the scale on some two thousand cells
    worst = max(errors[1].items(), key=lambda item: item[1])
    assert worst[1] < 2e-3, worst
    # second order at least, unless only the digits of the file are left
    assert fine < 1e-10 or np.log2(coarse / fine) > 1.9, (coarse, fine)


def test_the_numbers_of_the_kovasznay_box_are_met(tmp_path):
    # check values of Kovasznay's flow, Re 40, box [−½, 1] × [−½, ¾], recomputed to ten digits from
    # the closed form (Kovasznay 1948)
    flow = exact.kovasznay()
    path = tmp_path / "kovasznay.vtu"
    write_flow(path, flow, tm.triangles(flow.domain, 0.03), "point")
    case = fvcheck.open_flow(path, fluid=Fluid(**flow.fluid))
    corners = {"left": [(-0.5, 0.75), (-0.5, -0.5)], "right": [(1, -0.5), (1, 0.75)]}
    corners |= {"top": [(1, 0.75), (-0.5, 0.75)], "bottom": [(-0.5, -0.5), (1, -0.5)]}
    expected = {"left": -1.507687725, "right": 1.310711775, "top": 0.1969759501, "bottom": 0.0}
    for side, path in corners.items():
        ledger = fvcheck.balance(case, ControlSurface.line(path, name=side), ["mass"])
        # sampling of degree 3 at 21 cells a wave
        assert ledger["mass"].flux == pytest.approx(expected[side], abs=2e-5)
        assert ledger["mass"].imbalance is None
    ledger = fvcheck.balance(case, ControlSurface.box(-0.5, -0.5, 1, 0.75))
    kinetic = ledger["kinetic-energy"]
    assert kinetic.source == pytest.approx(-0.904673999, rel=2e-3)
    assert abs(ledger["mass"].imbalance) < 2e-5
    assert abs(ledger["momentum", "x"].imbalance) < 2e-4
    inner = fvcheck.balance(case, ControlSurface.box(-0.499, -0.499, 0.999, 0.75))
    # the box a thousandth inside has all its border drawn; shifting a side by 1e-3 moves the sums by 1e-2
    assert inner["momentum", "x"].parts["convective"] == pytest.approx(-1.744456987, abs=2e-2)
    assert inner["momentum", "y"].parts["convective"] == pytest.approx(-0.0302129732, abs=2e-2)
    assert inner["kinetic-energy"].parts["convective"] == pytest.approx(-2.758630979, abs=3e-2)


# --- linear fields -----------------------------------------------------------------------------


def linear_velocity(x, y):
    # no short decimals, which would be taken for a text file's rounding
    return np.sqrt(2) * np.stack([0.3 + 3 * x - y, -0.2 + x + 2 * y], axis=-1)


@cache
def linear_case(kind, where):
    cells = meshes()[kind]
    if where == "point":
        data = {"point_data": {"U": tm.point_values(linear_velocity, cells)}}
    else:
        data = {"cell_data": {"U": tm.cell_averages(linear_velocity, cells)}}
    return Flow.from_arrays(cells.points, (cells.offsets, cells.nodes), fluid=Fluid(density=1.3), **data)


SURFACES = [
    ControlSurface.box(0.2, 0.3, 0.7, 0.8),
    ControlSurface.box(-0.2, 0.0, 0.5, 0.5),
    ControlSurface.circle(0.6, 0.6, 0.23),
    ControlSurface.circle(0.37, 0.41, 1e-3),
    ControlSurface.polygon([(0.1, 0.1), (0.9, 0.2), (0.5, 0.45), (1.2, 1.1), (0.3, 0.9)]),
    ControlSurface.domain(),
]


@pytest.mark.parametrize("where", ["point", "cell"])
@pytest.mark.parametrize("kind", KINDS)
def test_the_mass_flux_of_a_linear_velocity_is_exact_through_any_surface(kind, where):
    case = linear_case(kind, where)
    for surface in SURFACES:
        ledger = fvcheck.balance(case, surface, ["mass"])
        row = ledger["mass"]
        # the divergence is 5 √2 everywhere
        made = 1.3 * 5 * np.sqrt(2) * ledger.area
        assert row.imbalance == pytest.approx(made, abs=1e-12)
        assert row.linear_imbalance == pytest.approx(made, abs=1e-12)
        assert row.sampling_band < 1e-11
    line = ControlSurface.line([(0.1, 0.15), (0.3, 0.9), (0.93, 0.4)])
    points = line.rings[0]
    middle, step = 0.5 * (points[1:] + points[:-1]), np.diff(points, axis=0)
    normal = np.stack([step[:, 1], -step[:, 0]], axis=1)
    expected = 1.3 * np.sum(linear_velocity(*middle.T) * normal)
    if kind not in ("annulus", "holed"):  # whose hole takes a part of the line
        assert fvcheck.balance(case, line, ["mass"])["mass"].flux == pytest.approx(expected, abs=1e-12)


# --- what must not matter ----------------------------------------------------------------------


def rows_of(case, surface, laws=None, **more):
    return {row.label: row for row in fvcheck.balance(case, surface, laws, **more).rows}


def assert_same_rows(one, other, size=None, rel=1e-9):
    assert one.keys() == other.keys()
    for label, row in one.items():
        scale = (size or {}).get(label, row.scale)
        for name in ("flux", "boundary", "source", "storage", "imbalance"):
            assert getattr(other[label], name) == pytest.approx(getattr(row, name), abs=rel * scale), (
                label,
                name,
            )
        assert other[label].verdict == row.verdict


def test_static_kinematic_and_reduced_pressure_give_one_ledger():
    flow = exact.taylor_green(rho=1.3)
    g, cells = (0.4, -9.81), tm.triangles((0.5, 0.5, 4.0, 3.5), 0.3)
    surface = ControlSurface.box(0.2, 0.9, 3.1, 2.7)

    def weight(x, y):
        return 1.3 * (g[0] * x + g[1] * y)

    heavy = replace(flow, p=lambda x, y: flow.p(x, y) + weight(x, y))
    found = {}
    for where in ("point", "average"):
        for kind in ("static", "kinematic", "reduced"):
            fluid = Fluid(**flow.fluid, gravity=g, pressure_kind=kind)
            source = flow if kind == "reduced" else heavy
            if kind == "kinematic":
                source = replace(heavy, p=lambda x, y: heavy.p(x, y) / 1.3)
            found[kind] = rows_of(flow_on(source, cells, where, fluid), surface)
        assert_same_rows(found["static"], found["kinematic"])
        assert_same_rows(found["static"], found["reduced"])
        area = found["static"]["momentum-x"].source / (1.3 * g[0])
        assert area == pytest.approx((3.1 - 0.5) * (2.7 - 0.9), rel=1e-12)
        assert found["static"]["momentum-y"].source == pytest.approx(1.3 * g[1] * area, rel=1e-12)


@pytest.mark.parametrize("where", ["point", "average"])
def test_buoyancy_balances_the_pressure_of_a_stratified_fluid(where):
    # at rest, T = T₀ + a y: dp/dy = ρ g (1 − β a y), so p = ρ g (y − β a y²/2)
    rho, g, beta, slope = 1.2, -9.81, 0.01, 30.0
    still = exact.uniform(u=0.7, v=0.0)  # a uniform wind along the layers changes nothing
    layered = replace(
        still,
        fluid={"density": rho, "viscosity": 0.1, "conductivity": 0.2, "specific_heat": 2.0},
        p=lambda x, y: rho * g * (y - 0.5 * beta * slope * y * y) + 0 * x,
        T=lambda x, y: 290.0 + slope * y + 0 * x,
    )
    fluid = Fluid(**layered.fluid, gravity=(0.0, g), expansion=beta, reference_temperature=290.0)
    for surface in (ControlSurface.box(0.2, 0.1, 0.8, 0.7), ControlSurface.domain()):
        rows = rows_of(flow_on(layered, tm.polygons(UNIT, 0.12), where, fluid), surface)
        box = (0.2, 0.1, 0.8, 0.7) if surface.kind == "box" else UNIT
        weight = over_box(lambda x, y: rho * g * (1 - beta * slope * y) + 0 * x, box)
        assert rows["momentum-y"].source == pytest.approx(weight, rel=1e-11)
        for row in rows.values():
            assert abs(row.imbalance) < 1e-10 * max(row.scale, 1.0)
            assert row.verdict == "closed"


@pytest.mark.parametrize("where", ["point", "average"])
def test_the_level_of_pressure_and_temperature_moves_neither_percent_nor_verdict(where):
    flow = exact.poiseuille()
    cells = tm.triangles(flow.domain, 0.25, seed=2)
    rng = np.random.default_rng(0)
    # a run that does not balance: smooth errors of a few percent
    bad = replace(
        flow,
        u=lambda x, y: flow.u(x, y) * (1 + 0.05 * x),
        T=lambda x, y: flow.T(x, y) + 3 * np.sin(x),
    )
    surfaces = [ControlSurface.box(*np.sort(rng.uniform(0.1, 0.9, (2, 2)), axis=0).ravel()) for _ in range(3)]
    surfaces.append(ControlSurface.box(0.5, -1, 2.5, 2))
    for dp, dt in ((1e5, 0.0), (0.0, -250.0), (-3.0, 40.0)):
        moved = replace(bad, p=lambda x, y, d=dp: bad.p(x, y) + d, T=lambda x, y, d=dt: bad.T(x, y) + d)
        for surface in surfaces:
            one, other = (rows_of(flow_on(f, cells, where), surface) for f in (bad, moved))
            for label, row in one.items():
                # digits lost to the level: 1e5 × 1e-16 over a pressure of 1
                assert other[label].imbalance_percent == pytest.approx(row.imbalance_percent, abs=1e-6)
                assert other[label].scale == pytest.approx(row.scale, rel=1e-8)
                assert other[label].verdict == row.verdict


# --- units, depth, scale, sources --------------------------------------------------------------


def test_depth_multiplies_every_number_and_takes_the_metre_off_the_unit():
    flow = exact.poiseuille()
    cells = tm.mixed(flow.domain, 0.3)
    surface = ControlSurface.box(0.5, -1, 2.2, 0.8)
    one = fvcheck.balance(flow_on(flow, cells), surface)
    deep = fvcheck.balance(flow_on(flow, cells, depth=0.25), surface)
    for a, b in zip(one.rows, deep.rows):
        for name in (
            "inflow",
            "outflow",
            "flux",
            "boundary",
            "source",
            "imbalance",
            "scale",
            "linear_imbalance",
        ):
            assert getattr(b, name) == pytest.approx(0.25 * getattr(a, name), rel=1e-12, abs=1e-13), name
        for name in ("sampling_band", "resolution_band"):
            assert getattr(b, name) == pytest.approx(0.25 * getattr(a, name), rel=1e-9, abs=1e-11)
        assert b.imbalance_percent == pytest.approx(a.imbalance_percent, abs=1e-9)
        assert a.unit == b.unit + "/m"
    assert [row.unit for row in deep.rows] == ["kg/s", "N", "N", "W", "W"]
    assert deep.ports[0].mass_flow == pytest.approx(0.25 * one.ports[0].mass_flow) if one.ports else True


def test_inflow_and_outflow_are_magnitudes_and_their_difference_is_the_flux():
    flow = exact.kovasznay()
    ledger = fvcheck.balance(
        flow_on(flow, tm.triangles(flow.domain, 0.1)), ControlSurface.box(-0.3, -0.3, 0.8, 1.2)
    )
    for row in ledger.rows:
        assert row.inflow >= 0 and row.outflow >= 0
        assert row.outflow - row.inflow == pytest.approx(row.flux, abs=1e-12)
        assert sum(row.parts.values()) == pytest.approx(row.flux, abs=1e-12)
        left_over = row.storage + row.flux + row.boundary - row.source
        assert row.imbalance == pytest.approx(left_over, abs=1e-14)


def test_patches_split_the_boundary_and_a_wall_passes_nothing():
    flow = exact.poiseuille()
    case = flow_on(flow, tm.quads(flow.domain, 0.1), "average", walls=["bottom", "top"])
    ledger = fvcheck.balance(case, ControlSurface.domain())
    mass = ledger["mass"]
    assert mass.patches["bottom"] == mass.patches["top"] == 0.0
    assert mass.patches["left"] == pytest.approx(-1.0, abs=1e-9)
    assert sum(mass.patches.values()) == pytest.approx(mass.boundary, abs=1e-13)
    # heat 1 per length enters through each wall of length 3 (outward positive); its slope at the wall
    # is taken from ten cell averages of a quartic
    assert ledger["heat"].patches["top"] == pytest.approx(-3.0, rel=2e-2)
    # wall shear 6 μ U/H = 0.6 drags the fluid back along both walls: outward flux of momentum
    assert ledger["momentum", "x"].patches["bottom"] == pytest.approx(0.6 * 3, rel=1e-6)


def test_a_given_scale_replaces_the_own_one():
    flow = exact.kovasznay()
    case, box = flow_on(flow, tm.triangles(flow.domain, 0.1)), ControlSurface.box(-0.3, -0.3, 0.8, 1.2)
    row = fvcheck.balance(case, box, ["mass"], scale={"mass": 50.0}, tolerance={"mass": 2.0})["mass"]
    assert row.scale == 50.0
    assert row.imbalance_percent == pytest.approx(2 * row.imbalance)
    assert row.tolerance_percent == 2.0


@pytest.mark.parametrize("surface", [ControlSurface.box(0.1, 0.2, 0.8, 0.9), ControlSurface.domain()])
def test_a_told_source_closes_a_ledger_by_the_share_that_lies_inside(surface):
    # u = (x, y)/2 spreads from everywhere: the mass source is 1.3 per area, all over the domain
    cells = tm.triangles(UNIT, 0.15)
    case = Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        point_data={"U": 0.5 * cells.points},
        fluid=Fluid(density=1.3),
    )
    told = Source(law="mass", shape=ControlSurface.box(0, 0, 1, 1), rate=1.3)
    row = fvcheck.balance(case, surface, ["mass"], sources=[told])["mass"]
    area = 0.49 if surface.kind == "box" else 1.0
    assert row.source == pytest.approx(1.3 * area, rel=1e-12)
    assert row.imbalance == pytest.approx(0.0, abs=1e-12)
    assert row.linear_imbalance == pytest.approx(0.0, abs=1e-12)
    assert row.verdict == "closed"


def test_a_source_in_a_hole_leaves_through_every_surface_around_it():
    flow = exact.source(strength=2.0)
    case = flow_on(flow, mesh_for(flow, "triangles", 0.08))
    (body,) = case.mesh.bodies
    ledger = fvcheck.balance(case, ControlSurface.box(-1, -1, 1, 1), ["mass"])
    sides = fvcheck.balance(case, ControlSurface.line([(1, -1), (1, 1)]), ["mass"])
    # share of the right side for a source at (.3, −.2): .3015489935, by the angle it subtends
    assert sides["mass"].flux == pytest.approx(2 * 0.3015489935, rel=1e-4)
    assert ledger["mass"].patches[body] == pytest.approx(-2.0, rel=4e-3)
    around = fvcheck.balance(case, ControlSurface.around(body, 0.2), ["mass"])["mass"]
    assert around.flux == pytest.approx(2.0, rel=1e-3)
    assert abs(ledger["mass"].imbalance) < 8e-3  # the hole is a polygon


def test_the_drag_of_a_source_in_a_stream_is_met():
    # force on the source −ρUm: momentum leaves with the stream (Milne-Thomson; Batchelor)
    flow = exact.rankine_half_body(strength=1.0, speed=1.0)
    case = flow_on(flow, mesh_for(flow, "triangles", 0.07))
    (body,) = case.mesh.bodies
    row = fvcheck.balance(case, ControlSurface.around(body, 0.4), ["momentum"])["momentum", "x"]
    assert row.flux == pytest.approx(1.0, rel=1e-3)
    assert row.boundary == pytest.approx(-1.0, rel=3e-2)


# --- ports -------------------------------------------------------------------------------------


@pytest.mark.parametrize("where", ["point", "average"])
def test_ports_of_a_channel_have_the_factors_of_the_parabola(where):
    flow = exact.poiseuille()
    case = flow_on(flow, tm.quads(flow.domain, 0.07), where, walls=["bottom", "top"])
    domain = {port.patch: port for port in fvcheck.balance(case, ControlSurface.domain()).ports}
    assert set(domain) == {"left", "right"}
    (line,) = fvcheck.balance(case, ControlSurface.line([(1.5, 0), (1.5, 1)], name="cut")).ports
    assert (line.piece, line.patch) == ("cut", None)
    ports = ((0.0, -1, domain["left"]), (3.0, 1, domain["right"]), (1.5, 1, line))
    t, w = np.polynomial.legendre.leggauss(20)
    for x, sense, port in ports:
        y = 0.5 + 0.5 * t
        mean_temperature = np.sum(0.5 * w * flow.u(x, y) * flow.T(x, y))
        assert port.area == pytest.approx(1.0, abs=1e-12)
        assert port.mass_flow == pytest.approx(sense * 1.0, rel=1e-5)
        assert port.mean_velocity == pytest.approx(sense * 1.0, rel=1e-5)
        # β = 6/5, α = 54/35 (Schlichting & Gersten)
        assert port.momentum_factor == pytest.approx(6 / 5, rel=1e-4)
        assert port.kinetic_energy_factor == pytest.approx(54 / 35, rel=1e-4)
        pressure = float(flow.p(np.array(x), np.array(0.0)))
        assert port.total_pressure == pytest.approx(pressure + 0.5 * 54 / 35, abs=1e-4)
        assert port.temperature == pytest.approx(mean_temperature, abs=5e-3)


# --- gas ---------------------------------------------------------------------------------------


@pytest.mark.parametrize("where", ["point", "average"])
def test_boxes_across_a_shock_balance_to_a_percent(where):
    flow = exact.oblique_shock()
    case = flow_on(flow, tm.triangles(flow.domain, 0.04), where)
    for box in ((-0.2, 0.1, 0.7, 0.8), (-0.1, 0.05, 0.9, 0.6), (0.1, 0.2, 0.8, 0.9)):
        rows = rows_of(case, ControlSurface.box(*box))
        assert set(rows) == {"mass", "momentum-x", "momentum-y", "total-energy"}
        for row in rows.values():
            # the jump is spread over a cell or two of the 20 along a side
            assert abs(row.imbalance) < 0.02 * rows["mass"].scale * {"total-energy": 5}.get(row.law, 2)
            assert np.isfinite([row.sampling_band, row.resolution_band]).all()
            assert row.verdict != "open"
        # the stagnation enthalpy is the same on both sides, 1/(γ−1) + M²/2 = 4.5
        energy, mass = rows["total-energy"], rows["mass"]
        assert energy.inflow / mass.inflow == pytest.approx(4.5, rel=1e-2)
