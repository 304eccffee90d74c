"""Where an imbalance sits and which set-up error would close the ledger.

Sources: closed-form flows (scripts/exact), natural convection by an independent solver
of high order (tests/data/cavity.json), the bundled finite-volume run and its iterations.
The whole study, of which these are the short version: scripts/diagnose_study.py.
"""

from __future__ import annotations

import json
from dataclasses import replace
from itertools import pairwise

import diagnose_trials as trials
import exact
import numpy as np
import pytest
from forked import fvcheck as command

import fvcheck
from fvcheck import ControlSurface
from fvcheck.cli.app import run
from fvcheck.diagnosis import try_cause
from fvcheck.diagnosis.cells import cell_ledgers
from fvcheck.diagnosis.mapping import maps_of
from fvcheck.diagnosis.regions import cell_values
from fvcheck.diagnosis.result import NONE_EXPLAINS
from fvcheck.diagnosis.tree import bisect
from fvcheck.diagnosis.volumes import blocks_by_label, measure
from fvcheck.laws import find_law

CAVITY = trials.cavity("1e4")
JEFFERY = trials.exact_flow(exact.jeffery_hamel(), 1000, "average", 2.5)


def momentum(flow, **more):
    """What the momentum ledgers of a flow say."""
    found = fvcheck.diagnose(flow, ["momentum"], **more)
    return found, found.why[0]


def only(why):
    """The one cause that is named."""
    assert len(why.named) == 1, [c.cause.name for c in why.named]
    return why.named[0].cause.name, why.named[0].told


# ---- why


def test_buoyancy_left_out_of_the_cavity_is_named_with_its_coefficient():
    wrong = trials.told(CAVITY, expansion=None, reference_temperature=None)
    _, why = momentum(wrong)
    name, told = only(why)
    assert name == "buoyancy-y"
    # Ra Pr = 7,100 in the solver's own units; the interval is three parts in ten thousand wide.
    low, high = told.interval
    assert low <= 7100.0 <= high and high - low < 20.0
    assert told.setting == "--expansion 7100.1 --reference-temperature 0.5"
    assert why.named[0].fit.left < 1e-4 and why.next_left > 1e-2  # the figures that issue 7 asks for


@pytest.mark.parametrize(
    ("wrong", "name", "value"),
    [
        (trials.scaled(CAVITY, "pressure", 0.2), "pressure-factor", 5.0),
        (trials.told(CAVITY, viscosity=7.1), "viscosity-factor", 0.1),
        (trials.scaled(JEFFERY, "pressure", 1 / 2.5), "pressure-factor", 2.5),
        (trials.told(JEFFERY, viscosity=JEFFERY.fluid.viscosity / 1.1), "viscosity-factor", 1.1),
        (trials.told(JEFFERY, density=2.5e3), "density-factor", 1e-3),
        (trials.scaled(JEFFERY, "velocity", 1e3), "velocity-factor", 1e-3),
    ],
    ids=["pressure/5", "viscosity*10", "kinematic", "viscosity/1.1", "density*1000", "mm/s"],
)
def test_a_wrong_factor_is_named_with_its_size(wrong, name, value):
    _, why = momentum(wrong)
    found, told = only(why)
    assert found == name
    assert told.interval[0] <= value <= told.interval[1]
    # An interval wider than a tenth of the change would say little.
    assert told.interval[1] - told.interval[0] < 0.1 * abs(1.0 - value)


def test_a_kinematic_pressure_comes_with_its_option():
    _, told = only(momentum(trials.scaled(JEFFERY, "pressure", 1 / 2.5))[1])
    assert told.setting == "--pressure-kind kinematic"


def test_a_force_left_out_is_named_and_closes_the_ledger_when_tried():
    x, _ = trials.places(JEFFERY).T
    wrong = trials.added(JEFFERY, "pressure", 4.0 * x)
    _, why = momentum(wrong)
    name, told = only(why)
    assert name == "uniform-force-x"
    assert told.interval[0] <= 4.0 <= told.interval[1]
    before, after = try_cause(wrong, told, laws=["momentum"])
    assert before.verdict == "open" and after.verdict == "closed"
    assert "body_force" not in wrong.fields and wrong.fluid.gravity == (0.0, 0.0)  # nothing is changed


def test_a_turning_frame_is_named_with_rate_and_centre():
    lam = 20 - np.sqrt(400 + 4 * np.pi**2)

    def stream(x, y):
        return y - np.exp(lam * x) * np.sin(2 * np.pi * y) / (2 * np.pi)

    trial = next(trials.frame_trials(exact.kovasznay(), stream, 1000, "point"))
    name, told = only(momentum(trial.flow)[1])
    assert name == "rotating-frame"
    assert told.interval[0] <= 0.5 <= told.interval[1]
    words = told.setting.split()
    # The centre is told to 4 digits and known about as well.
    assert [float(v) for v in words[3].split(",")] == pytest.approx([0.3, -0.2], abs=0.01)


def test_storage_is_named_where_the_state_before_is_known():
    now = trials.exact_flow(exact.taylor_green(), 1500, "point")
    then = trials.exact_flow(exact.taylor_green(time=-0.01), 1500, "point")
    now = replace(now, case=replace(now.case, time=0.01))
    then = replace(then, case=replace(then.case, time=0.0))
    _, why = momentum(now, previous=then)
    assert why.named[0].cause.name == "storage"


def test_conductivity_and_specific_heat_are_named_both_as_only_their_ratio_shows():
    (why,) = fvcheck.diagnose(trials.told(CAVITY, conductivity=0.25), ["heat"]).why
    told = {c.cause.name: c.told for c in why.named}
    assert set(told) == {"conductivity-factor", "specific-heat-factor"}
    for name, value in (("conductivity-factor", 4.0), ("specific-heat-factor", 0.25)):
        assert told[name].interval[0] <= value <= told[name].interval[1]


def test_a_plane_run_read_as_axisymmetric_is_named():
    flow = trials.exact_flow(exact.hiemenz(), 1500, "point", symmetry="axisymmetric", axis="x")
    (why,) = fvcheck.diagnose(flow, ["mass"]).why
    _, told = only(why)
    assert told.coefficient == pytest.approx(1.0, abs=1e-5) and "planar" in told.setting
    before, after = try_cause(flow, told, laws=["mass"])
    assert before.verdict == "open" and after.verdict == "closed"


@pytest.mark.parametrize(
    ("name", "back"), [("celsius", lambda t: t - 273.15), ("fahrenheit", lambda t: 1.8 * t - 459.67)]
)
@pytest.mark.parametrize("where", ["point", "average"])
def test_a_gas_whose_temperature_is_not_in_kelvin_is_named(name, back, where):
    # the isentropic vortex at 300 K; its density follows from pressure and temperature
    vortex = replace(exact.isentropic_vortex(), domain=(-3.5, -3.5, 3.5, 3.5))
    flow = trials.exact_flow(vortex, 3000, where)
    pressure, density = flow.fields["pressure"], flow.fields["density"]
    ratio = pressure.values / density.values
    kelvin = 300.0 * ratio / ratio.mean()
    fluid = replace(flow.fluid, gas_constant=float(ratio.mean() / 300.0))
    fields = {role: field for role, field in flow.fields.items() if role != "density"}

    def read(temperature):
        field = replace(pressure, name="T", values=temperature)
        return replace(flow, fluid=fluid, fields={**fields, "temperature": field})

    (why,) = fvcheck.diagnose(read(back(kelvin)), ["mass"]).why
    assert name in {c.cause.name for c in why.named}
    told = next(c.told for c in why.named if c.cause.name == name)
    assert abs(told.coefficient - 1.0) < 0.02
    # with the change it is the right flow
    np.testing.assert_allclose(
        told.change(read(back(kelvin))).fields["temperature"].values, kelvin, rtol=1e-12
    )
    assert not fvcheck.diagnose(read(kelvin), ["mass"]).open


def test_an_axisymmetric_run_read_as_plane_is_named():
    flow = trials.exact_flow(exact.landau_jet(), 1500, "point")
    (why,) = fvcheck.diagnose(flow, ["mass"]).why
    _, told = only(why)
    assert told.setting.startswith("--axisymmetric")
    before, after = try_cause(flow, told, laws=["mass"])
    assert before.verdict == "open" and after.verdict != "open"
    worst = [max(abs(row.imbalance) for one in r.ledgers for row in one.rows) for r in (before, after)]
    assert worst[1] / (2 * np.pi) < 0.01 * worst[0]  # the second is for the whole turn


@pytest.mark.parametrize(
    "flow", [CAVITY, JEFFERY, trials.cylinder(), trials.demo()], ids=["cavity", "jeffery", "cylinder", "demo"]
)
def test_a_right_set_up_is_blamed_on_nothing_and_shows_no_region(flow):
    found = fvcheck.diagnose(flow)
    assert found.proposals == () and not found.open
    assert [place.kind for place in found.where if place.regions] == []
    assert all(place.tested > 700 for place in found.where)


@pytest.mark.parametrize("iteration", ["0005", "0020", "0050", "0100", "0200"])
def test_an_iteration_that_is_not_done_is_blamed_on_no_setting(iteration):
    found, why = momentum(trials.demo(f"coarse-{iteration}"))
    assert found.proposals == () and found.open
    assert found.sentence(why) == NONE_EXPLAINS


@pytest.mark.parametrize("seed", [56, 66, 156])
def test_a_smooth_error_that_looks_like_a_factor_by_chance_is_blamed_on_no_setting(seed):
    # In the study, these errors left under 0.5 % beside a factor on the pressure, yet 30 bands and more.
    size = {56: 0.022014791573152826, 66: 0.059751895499051716, 156: 0.009993199151612312}[seed]
    flow = trials.exact_flow(exact.jeffery_hamel(), 1000, "point" if seed == 56 else "average", 2.5)
    assert momentum(trials.unfinished(flow, seed, size))[0].proposals == ()


# ---- where


def test_children_add_up_to_their_parent_and_the_root_is_the_ledger_of_the_domain():
    laws = [find_law(name) for name in ("mass", "momentum", "heat")]
    cells = cell_ledgers(CAVITY, laws, {})
    labels = bisect(cells.centres)
    ledger = fvcheck.balance(CAVITY, fvcheck.ControlSurface.domain(name="d"), ["mass", "momentum", "heat"])
    for law in laws:
        column = cells.columns[law.name]
        values = [
            measure(blocks_by_label(cells.edges, label, 2**k), column, cells.outside, None).value
            for k, label in enumerate(labels)
        ]
        size = np.abs(column.edge[-1]).sum()  # sums in another order: rounding of all that is summed
        for parent, child in pairwise(values):
            assert np.abs(child[::2] + child[1::2] - parent).max() < 1e-13 * size
        root = [row.imbalance for row in ledger.rows if row.law == law.name]
        assert values[0][0] == pytest.approx(root, abs=1e-13 * size)
    assert np.bincount(labels[-1]).min() >= 6


@pytest.mark.parametrize("where", ["point", "average"])
def test_a_planted_source_of_half_a_percent_is_found_within_two_cells(where):
    flow = trials.exact_flow(exact.kovasznay(), 2000, where)
    rate = 0.005 * 4.47 / 2  # of |u·n| through the border; the ledger's scale says 4.47 / 2
    h = np.sqrt(1.5 * 2.0 / flow.mesh.n_cells)
    centre = np.array([0.31, 0.87])
    (place,) = fvcheck.diagnose(trials.with_source(flow, centre, 2.5 * h, rate), ["mass"]).where
    (region,) = place.regions
    assert place.kind == "concentrated"
    assert np.hypot(*(np.asarray(region.centre) - centre)) < 2 * h
    assert abs(region.amount - rate) < max(region.band, 0.01 * rate)
    assert 4 * h < region.size < 7 * h  # 5 cells across, seen through fits of a few cells
    assert region.share == pytest.approx(1.0)


def test_two_sources_are_told_apart():
    flow = trials.exact_flow(exact.hiemenz(), 2000, "average")
    x0, y0, x1, y1 = flow.mesh.bounds
    h = np.sqrt((x1 - x0) * (y1 - y0) / flow.mesh.n_cells)
    rate = 0.005 * trials_throughflow(flow)
    centres = [np.array([x0 + 0.3 * (x1 - x0), 0.5 * (y0 + y1)]), np.array([x0 + 0.7 * (x1 - x0), 0.6 * y1])]
    for number, centre in enumerate(centres):
        flow = trials.with_source(flow, centre, 2.5 * h, rate * (1 + number))
    (place,) = fvcheck.diagnose(flow, ["mass"]).where
    # The stronger one comes first.
    assert len(place.regions) == 2
    for region, centre in zip(place.regions, centres[::-1]):
        assert np.hypot(*(np.asarray(region.centre) - centre)) < 2 * h


def trials_throughflow(flow):
    row = fvcheck.balance(flow, fvcheck.ControlSurface.domain(name="d"), ["mass"])["mass"]
    return row.scale


def test_the_point_force_that_drives_a_jet_is_located_with_its_size():
    flow = trials.exact_flow(exact.landau_jet(), 1000, "point", symmetry="axisymmetric", axis="x")
    along, _ = fvcheck.diagnose(flow, ["momentum"]).where
    region = along.regions[0]
    h = np.sqrt(4.1 * 2.0 / flow.mesh.n_cells)
    # Landau 1944: a force at the origin; off the axis the centre lies by what the half plane shows of it.
    assert np.hypot(*region.centre) < 2 * h
    assert region.amount == pytest.approx(exact.landau_force(1.5), abs=region.band)


def test_a_missing_force_is_spread_over_the_domain():
    x, _ = trials.places(JEFFERY).T
    found, _ = momentum(trials.added(JEFFERY, "pressure", 400.0 * x))
    assert [place.kind for place in found.where] == ["spread", "nowhere"]


def test_a_chosen_region_is_diagnosed_by_itself():
    flow = trials.exact_flow(exact.kovasznay(), 3000, "point")
    x0, y0, x1, y1 = flow.mesh.bounds
    h, rate = np.sqrt((x1 - x0) * (y1 - y0) / flow.mesh.n_cells), 0.02
    centre = np.array([x0 + 0.75 * (x1 - x0), 0.5 * (y0 + y1)])
    wrong = trials.with_source(flow, centre, 2.5 * h, rate)
    middle = 0.5 * (x0 + x1)
    left = ControlSurface.box(x0, y0, middle, y1)
    right = ControlSurface.box(middle, y0, x1, y1)
    assert not fvcheck.diagnose(wrong, ["mass"], region=left).open
    found = fvcheck.diagnose(wrong, ["mass"], region=right)
    (place,) = found.where
    assert [np.hypot(*(np.array(r.centre) - centre)) < 2 * h for r in place.regions] == [True]
    assert abs(place.regions[0].amount - rate) < max(place.regions[0].band, 0.01 * rate)
    # cells keep the ledgers that they have in the whole; what was not looked at is told as unknown
    whole = fvcheck.diagnose(wrong, ["mass"]).cells
    one = cell_values(found.cells, found.cells.columns["mass"], 0)
    all_of_them = cell_values(whole, whole.columns["mass"], 0)[found.cells.cells]
    np.testing.assert_allclose(one, all_of_them, atol=1e-12 * rate)
    outside = np.isnan(maps_of(found)["imbalance_per_area_mass"])
    assert outside.sum() == flow.mesh.n_cells - len(found.cells.cells) > 0


def test_a_cause_is_named_in_a_region_too():
    wrong = trials.told(CAVITY, expansion=None, reference_temperature=None)
    (why,) = fvcheck.diagnose(wrong, ["momentum"], region=ControlSurface.box(0.1, 0.1, 0.9, 0.7)).why
    name, told = only(why)
    assert name == "buoyancy-y" and told.interval[0] <= 7100.0 <= told.interval[1]


@pytest.mark.parametrize("shape", ["line(0.1 0.1, 0.9 0.9)", "box(0.1, 0.1, 0.15, 0.15)", "box(7, 7, 8, 8)"])
def test_a_region_that_cannot_be_divided_is_refused(shape):
    with pytest.raises(fvcheck.SurfaceError):
        fvcheck.diagnose(CAVITY, ["mass"], region=ControlSurface.parse(shape))


def test_a_source_that_is_told_leaves_no_region():
    flow = trials.exact_flow(exact.kovasznay(), 2000, "point")
    centre, radius, rate = np.array([0.31, 0.87]), 0.15, 0.02
    wrong = trials.with_source(flow, centre, radius, rate)
    told = fvcheck.Source("mass", fvcheck.ControlSurface.circle(*centre, radius), rate)
    assert fvcheck.diagnose(wrong, ["mass"]).open
    assert not fvcheck.diagnose(wrong, ["mass"], sources=[told]).open


# ---- the command


def test_the_command_says_it_in_words_and_keeps_numbers_in_the_json(tmp_path, capsys):
    out, vtu = tmp_path / "out.json", tmp_path / "map.vtu"
    told = ["--density", "1", "--viscosity", "0.71", "--specific-heat", "1", "--conductivity", "1"]
    out_options = ["--json", str(out), "--vtu", str(vtu)]
    file = str(trials.ROOT / "tests/data/cavity_1e4.vtu")
    status = run(["diagnose", file, *told, "--try", "--law", "momentum", *out_options])
    text = capsys.readouterr().out
    assert status == 1
    assert text.index("buoyancy in y, coefficient 7100") < text.index("why")
    assert "✗ open" in text and "✓ closed" in text  # before, after
    data = json.loads(out.read_text())
    (why,) = data["diagnosis"]["why"]
    assert set(why) >= {"law", "cause", "coefficient", "interval", "left", "setting"}
    assert all(
        set(r) >= {"law", "centre", "size", "amount", "band", "share"} for r in data["diagnosis"]["where"]
    )
    assert "--expansion 7100" in why["setting"]
    import pyvista

    grid = pyvista.read(vtu)
    assert grid.n_cells == 1600
    # A force left out acts everywhere: per area it adds up to what the whole domain lacks.
    areas = grid.compute_cell_sizes(length=False, volume=False).cell_data["Area"]
    total = np.sum(grid.cell_data["imbalance_per_area_momentum-y"] * areas)
    assert abs(total) < 0.01 * 7100


def test_the_command_ends_with_zero_where_nothing_is_beyond_the_mesh():
    done = command("diagnose", "meshes/demo-coarse.vtu", "-c", "meshes/demo.toml", cwd=trials.ROOT)
    assert done.status == 0, done.err
    assert "momentum: nothing to explain" in done.out


def test_laws_of_a_check_file_that_are_not_diagnosed_are_left_out(tmp_path, capsys):
    text = (trials.ROOT / "meshes/demo.toml").read_text(encoding="utf-8")
    export = str(trials.ROOT / "meshes/demo-coarse.vtu")
    check = tmp_path / "check.toml"
    for laws, status in (('"mass", "kinetic-energy"', 0), ('"kinetic-energy"', 2)):
        head = f"[case]\nlaws = [{laws}]\n"
        check.write_text(text.replace("[case]\n", head, 1), encoding="utf-8")
        assert run(["diagnose", export, "-c", str(check)]) == status
        told = capsys.readouterr()
        assert "kinetic-energy is not diagnosed" in " ".join((told.out + told.err).split())


def test_the_command_takes_a_region(capsys):
    file = str(trials.ROOT / "tests/data/cavity_1e4.vtu")
    told = ["--density", "1", "--viscosity", "0.71", "--law", "momentum", "--region", "box(0.1,0.1,0.9,0.9)"]
    assert run(["diagnose", file, *told]) == 1
    assert "buoyancy in y, coefficient 7100" in capsys.readouterr().out


def test_a_law_that_is_not_diagnosed_is_an_error(capsys):
    status = run(["diagnose", str(trials.ROOT / "meshes/demo-coarse.vtu"), "--law", "entropy"])
    assert status == 2 and "entropy is not diagnosed" in capsys.readouterr().err


def test_one_cell_is_too_few_and_no_fault():
    square = np.array([[0, 0], [1, 0], [1, 1], [0, 1.0]])
    data = {"U": np.zeros((4, 2)), "p": np.zeros(4)}
    fluid = fvcheck.Fluid(density=1.0, viscosity=1.0)
    flow = fvcheck.Flow.from_arrays(square, [[0, 1, 2, 3]], point_data=data, fluid=fluid)
    found = fvcheck.diagnose(flow)
    assert [hint.code for hint in found.hints] == ["too-few-cells"] and not found.open


@pytest.mark.filterwarnings("error")
def test_a_fluid_at_rest_under_any_pressure_is_diagnosed():
    # Sampling bands are nothing where nothing moves; weights by them must not overflow.
    n = 12
    x, y = np.meshgrid(np.linspace(0, 1, n), np.linspace(0, 1, n))
    points = np.column_stack([x.ravel(), y.ravel()])
    cells = [[k, k + 1, k + n + 1, k + n] for k in range(n * n - n) if k % n < n - 1]
    for pressure in (9.81 * points[:, 1], np.sin(7 * points[:, 0]), np.zeros(n * n)):
        flow = fvcheck.Flow.from_arrays(
            points,
            cells,
            point_data={"U": np.zeros((n * n, 3)), "p": pressure},
            fluid=fvcheck.Fluid(density=1.0, viscosity=1e-3),
        )
        why = {one.law: one for one in fvcheck.diagnose(flow).why}["momentum"]
        assert np.isfinite(why.before)
        # Hydrostatic pressure is what gravity would balance (or none, were its factor nothing);
        # without any there is nothing to explain.
        if pressure[-1] == 9.81:
            assert "uniform-force-y" in {one.cause.name for one in why.named}
        if not pressure.any():
            assert not why.named
