"""Series from files, whatever the format; trends; watching a run; the command."""

from __future__ import annotations

import csv
import io
import json
import signal
import threading
import time
from pathlib import Path

import numpy as np
import pytest
import trial_meshes as tm
from exact import taylor_green
from exact_data import flow_data
from forked import fvcheck as command
from series_cases import export_of, series_of
from test_formats_fem_cases import med_file
from write_case import write_case

import fvcheck
from fvcheck import ControlSurface, Fluid, SetupError
from fvcheck.following import files_of
from fvcheck.series import file_list, numbers_in
from fvcheck.timeweights import integral_weights, rate_weights
from fvcheck.trends import dominant_period, mean_half_width, trend_of

SAMPLES = Path(__file__).parent / "samples"
FLUID = Fluid(viscosity=0.05, specific_heat=2.0, conductivity=0.1)
BOX = ControlSurface.box(0.71, 0.43, 1.83, 1.39, name="box")
LAWS = ["mass", "momentum", "kinetic-energy", "heat"]


def numbers(history):
    names = ("storage", "flux", "imbalance", "sampling_band", "time_band")
    return {
        (row.label, name): history.values("box", row.label, name)
        for row in history.entries[0].result["box"].rows
        for name in names
    }


@pytest.fixture(scope="module")
def from_pvd():
    return fvcheck.history(SAMPLES / "mixed_cell_series.pvd", [BOX], LAWS, fluid=FLUID)


@pytest.mark.parametrize("suffix", ["vtkhdf", "cgns", "exo"])
def test_every_format_of_the_series_gives_the_same_history(from_pvd, suffix):
    # samples.json: the same five snapshots written by other programs' libraries
    other = fvcheck.history(SAMPLES / f"mixed_cell_series.{suffix}", [BOX], LAWS, fluid=FLUID)
    assert other.steps.tolist() == from_pvd.steps.tolist() == [0.0, 1.0, 2.0, 3.0, 4.0]
    for key, values in numbers(from_pvd).items():
        # cells in another order add up in another order
        np.testing.assert_allclose(
            numbers(other)[key], values, rtol=1e-6, atol=1e-9 * (1 + np.abs(values).max()), err_msg=str(key)
        )


def test_the_files_of_a_series_given_one_by_one_or_by_a_pattern_give_the_same(from_pvd):
    files = sorted((SAMPLES / "mixed_cell_series").glob("*.vtu"), reverse=True)
    assert len(files) == 5
    for given in (files, str(SAMPLES / "mixed_cell_series" / "step_?.vtu")):
        found = fvcheck.history(given, [BOX], LAWS, fluid=FLUID)
        bare = fvcheck.history(SAMPLES / "mixed_cell_series.pvd", [BOX], LAWS, fluid=FLUID, steady=True)
        same = from_pvd if found.unsteady else bare
        np.testing.assert_allclose(found.values("box", "mass"), same.values("box", "mass"), rtol=1e-12)
        np.testing.assert_allclose(
            found.values("box", "momentum-x"), same.values("box", "momentum-x"), rtol=1e-9, atol=1e-15
        )


def test_the_sample_series_decays_as_its_note_says(from_pvd):
    # samples.json: velocity times exp(-2 nu t), so the content of momentum times exp(-0.1 t)
    flux = from_pvd.values("box", "momentum-x", "flux")
    assert np.all(
        np.abs(from_pvd.values("box", "momentum-x")) <= from_pvd.values("box", "momentum-x", "sampling_band")
    )
    storage = from_pvd.values("box", "momentum-x", "storage")
    np.testing.assert_allclose(storage[1:-1] / storage[1], np.exp(-0.1 * np.arange(3)), rtol=1e-5)
    assert flux[0] > 0


def test_the_xdmf_series_of_points_closes_too():
    found = fvcheck.history(SAMPLES / "tri_point_series.xdmf", [BOX], ["mass", "momentum"], fluid=FLUID)
    assert len(found.entries) == 5 and found.unsteady
    for label in ("mass", "momentum-x", "momentum-y"):
        assert np.all(np.abs(found.values("box", label)) <= found.values("box", label, "sampling_band"))


def test_one_assembly_and_one_compilation_serve_all_snapshots(monkeypatch):
    from fvcheck import evolution, series

    counts = {"mesh": 0, "volume": 0}

    def counted(name, function):
        def inner(*args, **kwargs):
            counts[name] += 1
            return function(*args, **kwargs)

        return inner

    monkeypatch.setattr(series, "assemble", counted("mesh", series.assemble))
    monkeypatch.setattr(evolution, "SampledVolume", counted("volume", evolution.SampledVolume))
    fvcheck.history(SAMPLES / "mixed_cell_series.pvd", [BOX], LAWS, fluid=FLUID)
    assert counts == {"mesh": 1, "volume": 1}


def test_another_mesh_in_between_is_noticed_and_the_balance_still_closes():
    nu, times = 0.5, [0.0, 0.1, 0.2, 0.3, 0.4]
    square = (0.0, 0.0, np.pi, np.pi)
    meshes = [tm.triangles(square, 0.2, 1), tm.quads(square, 0.2, 1)]

    def load(t):
        cells = meshes[int(t > 0.15)]
        data = flow_data(taylor_green(nu, t), cells)
        return cells, {"U": data["velocity"], "p": data["pressure"]}

    box = ControlSurface.box(0.5, 0.7, 2.1, 2.6, name="box")
    found = fvcheck.history(
        export_of(load, times), [box], ["momentum"], fluid=Fluid(density=1.0, viscosity=nu)
    )
    assert "mesh-changes" in {hint.code for hint in found.hints}
    for label in ("momentum-x", "momentum-y"):
        assert np.all(np.abs(found.values("box", label)) <= found.values("box", label, "sampling_band"))


def test_without_times_or_when_told_there_is_no_storage():
    found = fvcheck.history(SAMPLES / "mixed_cell_series.pvd", [BOX], LAWS, fluid=FLUID, steady=True)
    assert not found.unsteady and not found.totals
    assert np.all(found.values("box", "momentum-x", "storage") == 0.0)
    single = fvcheck.balance(
        fvcheck.open_flow(SAMPLES / "mixed_cell_series.pvd", fluid=FLUID, step=2), BOX, LAWS
    )
    assert found.entries[2].result["box"]["heat"].imbalance == pytest.approx(
        single["heat"].imbalance, rel=1e-12
    )


def test_two_snapshots_have_a_band_as_wide_as_the_fluxes_change():
    nu = 0.5
    cells = tm.quads((0, 0, np.pi, np.pi), 0.15, 0)
    run = series_of(lambda t: taylor_green(nu, t), cells, [0.0, 0.4])
    box = ControlSurface.box(0.4, 0.5, 2.6, 2.9, name="box")
    found = fvcheck.history(run, [box], ["kinetic-energy"], fluid=Fluid(density=1.0, viscosity=nu))
    assert "few-snapshots" in {hint.code for hint in found.hints}
    assert np.all(
        np.abs(found.values("box", "kinetic-energy"))
        <= found.values("box", "kinetic-energy", "sampling_band")
    )


# weights


def test_rates_through_n_times_are_exact_to_degree_n_minus_1():
    times = np.array([0.0, 0.1, 0.35, 0.4])
    for n in (2, 3, 4):
        for at in range(n):
            weights = rate_weights(times[:n], at)
            for degree in range(n):
                slope = degree * times[at] ** max(degree - 1, 0) if degree else 0.0
                assert weights @ times[:n] ** degree == pytest.approx(slope, abs=1e-12)


def test_integrals_by_cubics_are_exact_for_cubics_at_uneven_times():
    times = np.array([0.0, 0.1, 0.35, 0.4, 0.7, 1.0])
    for degree in range(4):
        assert integral_weights(times) @ times**degree == pytest.approx(1 / (degree + 1), rel=1e-12)
    assert integral_weights(times, 2) @ times == pytest.approx(0.5, rel=1e-12)


# order of files


def test_files_come_in_natural_order_and_their_numbers_are_found(tmp_path):
    for number in (10, 2, 1):
        (tmp_path / f"run2_{number}.vtu").touch()
    files = file_list(str(tmp_path / "*.vtu"))
    assert [path.name for path in files] == ["run2_1.vtu", "run2_2.vtu", "run2_10.vtu"]
    assert numbers_in(files) == [1, 2, 10]
    with pytest.raises(SetupError, match="meets no file"):
        file_list(str(tmp_path / "*.vtk"))


# trends


def test_a_period_is_found_at_uneven_times_and_its_mean_is_over_whole_periods():
    rng = np.random.default_rng(3)
    times = np.sort(np.concatenate([[0.0, 4.0], rng.uniform(0, 4, 120)]))
    values = (
        3 + np.exp(-3 * times) + 0.5 * np.sin(2 * np.pi * times / 0.7) + 0.1 * np.cos(4 * np.pi * times / 0.7)
    )
    trend = trend_of("s", "lift", "N", times, values, 0.1, reference=(0.1, 1.0))
    assert trend.period == pytest.approx(0.7, rel=2e-3)
    assert abs(trend.period - 0.7) <= 2 * trend.period_band + 1e-6
    assert trend.mean == pytest.approx(3.0, abs=0.01)
    assert trend.strouhal == pytest.approx(0.1 / 0.7, rel=2e-3)
    assert trend.periods >= 2


def test_noise_and_a_decay_have_no_period():
    rng = np.random.default_rng(1)
    steps = np.arange(200.0)
    assert dominant_period(steps, rng.normal(size=200)) is None
    assert dominant_period(steps, np.exp(-steps / 20)) is None
    assert dominant_period(steps, np.full(200, 2.0)) is None
    assert dominant_period(steps[:5], np.sin(steps[:5])) is None


def test_a_decaying_residual_has_settled_with_its_level_and_reduction():
    steps = np.arange(200.0)
    trend = trend_of("s", "mass imbalance", "%", steps, 40 * np.exp(-steps / 20) + 0.1, 0.5)
    assert trend.settled and trend.level == pytest.approx(0.1, abs=0.02) and trend.reduction > 300
    assert not trend_of("s", "m", "%", steps, 40 - 0.1 * steps, 0.5).settled


def test_the_band_of_a_mean_of_correlated_values_holds_nineteen_times_in_twenty():
    # A first-order autoregression has the variance of its mean in closed form: s² (1+a)/(1-a)/n.
    rng, a, n, held = np.random.default_rng(7), 0.8, 400, 0
    for _ in range(200):
        noise = rng.normal(size=n + 100)
        x = np.zeros(n + 100)
        for i in range(1, n + 100):
            x[i] = a * x[i - 1] + noise[i]
        held += abs(x[100:].mean()) <= mean_half_width(x[100:])
    # 95 % of 200 is 190 ± 3; autocorrelations estimated from 400 values are a little low
    assert 176 <= held <= 199


# watching


def write_step(folder, number, time_=None):
    nu = 0.05
    cells = tm.quads((0, 0, 3, 2), 0.25, 0)
    flow = taylor_green(nu, 0.0)
    data = flow_data(flow, cells)
    draft = folder / f".draft_{number}.vtu"
    scale = 1 + 0.3 * np.exp(-number)
    write_case(draft, cells, {"U": data["velocity"] * scale, "p": data["pressure"]})
    draft.rename(folder / f"run_{number}.vtu")


def test_a_run_that_still_writes_is_followed_past_half_written_files_until_it_settles(tmp_path):
    def solver():
        for number in range(14):
            if number == 3:  # half a file first, the whole one later
                write_step(tmp_path, 99)
                whole = (tmp_path / "run_99.vtu").read_bytes()
                (tmp_path / "run_99.vtu").unlink()
                (tmp_path / "run_3.vtu").write_bytes(whole[: len(whole) // 2])
                time.sleep(0.2)
            write_step(tmp_path, number)
            time.sleep(0.03)

    box = ControlSurface.box(0.71, 0.43, 1.83, 1.39, name="box")
    seen = []
    thread = threading.Thread(target=solver)
    thread.start()
    found = fvcheck.follow(
        tmp_path,
        [box],
        ["mass"],
        every=0.05,
        patience=10.0,
        on_step=seen.append,
        reading={"fluid": Fluid(density=1.0, viscosity=0.05)},
    )
    thread.join()
    assert found.ended == "settled"
    order = [entry.number for entry in found.entries]
    assert order == list(range(len(order))) and len(order) >= 8
    assert len(seen) == len(order)


def test_following_ends_on_the_limit_and_when_nothing_comes(tmp_path):
    for number in range(3):
        write_step(tmp_path, number)
    box = ControlSurface.box(0.71, 0.43, 1.83, 1.39, name="box")
    reading = {"fluid": Fluid(density=1.0)}
    found = fvcheck.follow(tmp_path, [box], ["mass"], every=0.02, limit=2, reading=reading)
    assert found.ended == "the limit of 2 snapshots is reached" and len(found.entries) == 2
    found = fvcheck.follow(tmp_path, [box], ["mass"], every=0.02, patience=0.2, reading=reading)
    assert found.ended.startswith("nothing new") and len(found.entries) == 3
    (tmp_path / "empty").mkdir()
    with pytest.raises(SetupError, match="no snapshot"):
        fvcheck.follow(tmp_path / "empty", [box], every=0.02, patience=0.1)


def test_ctrl_c_while_following_keeps_what_was_found(tmp_path):
    for number in range(3):
        write_step(tmp_path, number)

    def stop(entry):
        if entry.number == 1:
            signal.raise_signal(signal.SIGINT)

    box = ControlSurface.box(0.71, 0.43, 1.83, 1.39, name="box")
    before = signal.getsignal(signal.SIGINT)
    found = fvcheck.follow(
        tmp_path, [box], ["mass"], every=0.02, on_step=stop, reading={"fluid": Fluid(density=1.0)}
    )
    assert [entry.number for entry in found.entries] == [0, 1]
    assert "keyboard" in found.ended and found.to_dict()["history"]
    assert signal.getsignal(signal.SIGINT) is before


def test_steps_of_a_med_file_are_a_history(tmp_path):
    # the square and the polygon hold u = t (1, 10): what leaves the square is told by arithmetic
    path = med_file(tmp_path / "run.med", steps=((1, 1.0), (2, 1.5), (3, 2.5)))
    line = ControlSurface.line([(0.5, 0.2), (0.5, 0.8)], name="line")
    found = fvcheck.history(path, [line], ["mass"], fluid=Fluid(density=2.0))
    assert found.steps.tolist() == [1.0, 1.5, 2.5] and found.unsteady
    # normal to the right of upwards: x; a constant is sampled without error
    np.testing.assert_allclose(found.values("line", "mass", "flux"), 2.0 * 0.6 * found.steps, rtol=1e-9)


def test_a_damaged_last_file_is_left_out_with_a_hint(tmp_path):
    for number in range(2):
        write_step(tmp_path, number)
    whole = (tmp_path / "run_1.vtu").read_bytes()
    (tmp_path / "run_2.vtu").write_bytes(whole[: len(whole) // 2])
    box = ControlSurface.box(0.71, 0.43, 1.83, 1.39, name="box")
    found = fvcheck.follow(
        tmp_path, [box], ["mass"], every=0.02, patience=0.5, reading={"fluid": Fluid(density=1.0)}
    )
    assert len(found.entries) == 2
    assert "snapshot-left-out" in {hint.code for hint in found.hints}


def test_a_folder_with_a_list_of_files_is_that_list(tmp_path):
    for name in ("a_1.vtu", "a_2.vtu", "a.pvd", "notes.txt"):
        (tmp_path / name).touch()
    assert [path.name for path in files_of(tmp_path)] == ["a.pvd"]
    (tmp_path / "a.pvd").unlink()
    assert [path.name for path in files_of(tmp_path)] == ["a_1.vtu", "a_2.vtu"]


# the command

ARGUMENTS = ["--viscosity", "0.05", "-s", "box=box(0.71, 0.43, 1.83, 1.39)", "--law", "mass,momentum"]


def test_the_command_gives_table_json_csv_and_figure_of_the_same_numbers(tmp_path):
    run = command(
        "history",
        SAMPLES / "mixed_cell_series.pvd",
        *ARGUMENTS,
        "--json",
        tmp_path / "h.json",
        "--csv",
        tmp_path / "h.csv",
        "--plot",
        tmp_path / "h.svg",
    )
    assert run.status in (0, 1, 3) and run.err == ""
    assert max(map(len, run.out.splitlines())) <= 80
    data = json.loads((tmp_path / "h.json").read_text())
    rows = list(csv.DictReader(io.StringIO((tmp_path / "h.csv").read_text())))
    assert len(data["history"]) == 5 and len(rows) == 15
    row = data["history"][2]["surfaces"][0]["laws"][1]
    line = next(r for r in rows if r["step"] == "2" and r["component"] == "x")
    assert float(line["imbalance"]) == row["imbalance"] and row["storage"] != 0
    assert row["imbalance"] == pytest.approx(row["storage"] + row["flux"] + row["boundary"] - row["source"])
    assert (tmp_path / "h.svg").read_text().lstrip().startswith("<?xml")
    assert {"trends", "totals", "settled"} <= set(data)


@pytest.mark.parametrize(
    "arguments, message",
    [
        (["--plot", "h.bmp"], "cannot be written as"),
        (["--reference-length", "1"], "two references"),
        (["--json", "-", "--csv", "-"], "standard output"),
        (["--step", "2"], "no meaning"),
        (["--csv", "no/such/folder.csv"], "cannot be written there"),
    ],
)
def test_what_cannot_be_is_said_in_one_line(arguments, message):
    run = command("history", SAMPLES / "mixed_cell_series.pvd", *ARGUMENTS, *arguments)
    assert run.status == 2 and message in run.err and run.err.count("\n") == 1 and run.out == ""


def test_following_prints_a_line_per_snapshot(tmp_path):
    for number in range(3):
        write_step(tmp_path, number)
    run = command(
        "history", tmp_path, "--follow", "--every", "0.02", "--limit", "3", "--density", "1", *ARGUMENTS
    )
    assert run.status in (0, 1, 3), run.err
    lines = [line for line in run.out.splitlines() if line.startswith("iteration ")]
    assert len(lines) == 3 and "ended: the limit of 3 snapshots is reached" in run.out
