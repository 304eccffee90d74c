"""Meshes, cases and snapshots as tasks: every number that of the work done here, one after another."""

import json
from pathlib import Path

import numpy as np
import pytest

import fvcheck
from fvcheck.cli.app import run

MESHES = Path(fvcheck.__file__).parent.parent / "meshes"
FLUID = fvcheck.Fluid(density=1.2, viscosity=0.012)
BOX = fvcheck.ControlSurface.box(0.2, 0.1, 0.9, 0.3, name="box")


@pytest.fixture(params=["processes", "dask"])
def where(request):
    if request.param == "processes":
        return {"workers": 2}
    return {"scheduler": request.getfixturevalue("scheduler")}


def arguments(where):
    return [word for name, value in where.items() for word in (f"--{name}", str(value))]


def told(capsys, *words):
    """Exit status and the JSON that a command writes."""
    status = run([*map(str, words), "--json", "-"])
    return status, json.loads(capsys.readouterr().out)


def without_times(value):
    if isinstance(value, dict):
        return {name: without_times(part) for name, part in value.items() if name != "seconds"}
    return [without_times(part) for part in value] if isinstance(value, list) else value


def test_a_study_of_files_on_workers_is_that_of_one_process(where, capsys):
    words = ["study", MESHES / "demo-fine.vtu", MESHES / "demo-coarse.vtu", "-c", MESHES / "demo.toml"]
    assert told(capsys, *words, *arguments(where)) == told(capsys, *words)


def test_a_study_without_surfaces_takes_those_of_the_first_mesh(where):
    files = [MESHES / "demo-coarse.vtu", MESHES / "demo-fine.vtu"]
    given = {"laws": ["mass"], "fluid": FLUID}
    assert fvcheck.study(files, **given, **where).to_dict() == fvcheck.study(files, **given).to_dict()


def test_check_files_on_workers_give_what_they_give_here(where, capsys):
    words = ["gate", MESHES / "demo.toml"]
    status, found = told(capsys, *words, *arguments(where))
    here, alone = told(capsys, *words, "--workers", "1")
    assert (status, without_times(found)) == (here, without_times(alone))


def write_series(folder, moves=False):
    """Twelve snapshots of a vortex that decays, at points of a mesh at rest or one that breathes."""
    import pyvista

    rng = np.random.default_rng(1)
    n = 24
    x, y = (part.ravel() for part in np.meshgrid(*2 * [np.linspace(0, 1, n + 1)]))
    inner = (np.minimum(x, y) > 0) & (np.maximum(x, y) < 1)
    x, y = (part + inner * rng.uniform(-0.2, 0.2, len(x)) / n for part in (x, y))
    number = np.arange((n + 1) ** 2).reshape(n + 1, n + 1)
    a, b, c, d = (
        part.ravel() for part in (number[:-1, :-1], number[:-1, 1:], number[1:, 1:], number[1:, :-1])
    )
    cells = np.concatenate([np.stack([a, b, c], axis=1), np.stack([a, c, d], axis=1)])
    lists = np.column_stack([np.full(len(cells), 3), cells]).ravel()
    listed = ""
    for step in range(12):
        time = 0.07 * step + 0.01 * step**2
        at = np.column_stack([x * (1 + 0.1 * moves * np.sin(time)), y, 0 * x])
        grid = pyvista.UnstructuredGrid(lists, np.full(len(cells), 5, np.uint8), at)
        u, v, decay = 2 * np.pi * at[:, 0], 2 * np.pi * at[:, 1], np.exp(-time)
        grid.point_data["U"] = decay * np.column_stack([np.sin(u) * np.cos(v), -np.cos(u) * np.sin(v), 0 * u])
        grid.point_data["p"] = 0.3 * decay**2 * (np.cos(2 * u) + np.cos(2 * v))
        grid.save(folder / f"s{step:02d}.vtu")
        listed += f'<DataSet timestep="{time}" file="s{step:02d}.vtu"/>'
    path = folder / "run.pvd"
    path.write_text(
        f'<?xml version="1.0"?><VTKFile type="Collection"><Collection>{listed}</Collection></VTKFile>'
    )
    return path


@pytest.mark.parametrize("case", ["times", "iterations", "moving mesh", "moving surface"])
def test_snapshots_taken_on_workers_have_the_numbers_of_those_taken_here(case, where, tmp_path, capsys):
    path = write_series(tmp_path, case == "moving mesh")
    words = ["history", path, "-s", "o=circle(0.52, 0.48, 0.2)", "--density", "1.2", "--viscosity", "0.02"]
    if case == "moving surface":
        words[3] += " @ velocity(0.1, 0.05)"
    if case == "iterations":
        words += ["--steady", "-s", "domain()"]
    assert told(capsys, *words, *arguments(where)) == told(capsys, *words)


def test_a_snapshot_that_fails_on_a_worker_is_named_as_here(tmp_path, capsys):
    path = write_series(tmp_path)
    damaged = tmp_path / "s09.vtu"
    damaged.write_bytes(damaged.read_bytes()[:-400])
    words = ["history", str(path), "-s", "circle(0.5, 0.5, 0.2)", "--density", "1.2", "--law", "mass"]
    said = []
    for more in ([], ["--workers", "2"]):
        assert run([*words, *more]) == 2
        said.append(capsys.readouterr().err.splitlines()[-1])
    assert said[0] == said[1]


def test_a_run_that_still_writes_is_not_followed_by_workers(tmp_path, capsys):
    words = [
        "history",
        str(tmp_path),
        "--follow",
        "-s",
        "circle(0, 0, 1)",
        "--density",
        "1",
        "--workers",
        "2",
    ]
    assert run(words) == 2
    assert "followed here" in capsys.readouterr().err


def test_without_dask_a_scheduler_is_refused_by_naming_the_extra(monkeypatch, capsys):
    import sys

    monkeypatch.setitem(sys.modules, "distributed", None)
    assert run(["gate", str(MESHES / "demo.toml"), "--scheduler", "tcp://127.0.0.1:1"]) == 2
    assert "pip install 'fvcheck[cluster]'" in capsys.readouterr().err


def test_workers_and_a_scheduler_exclude_one_another(capsys):
    words = ["study", MESHES / "demo-fine.vtu", MESHES / "demo-coarse.vtu", "-c", MESHES / "demo.toml"]
    assert run([*map(str, words), "--workers", "2", "--scheduler", "tcp://127.0.0.1:1"]) == 2
    assert "workers and a scheduler" in capsys.readouterr().err
