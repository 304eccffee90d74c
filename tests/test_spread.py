"""Meshes, cases and snapshots as tasks: every number that of the work done here, one after another."""

import json
from pathlib import Path

import pytest

import fvcheck
from fvcheck.cli.app import run

MESHES = Path(fvcheck.__file__).parent.parent / "meshes"
FLUID = fvcheck.Fluid(density=1.2, viscosity=0.012)
BOX = fvcheck.ControlSurface.box(0.2, 0.1, 0.9, 0.3, name="box")


@pytest.fixture(scope="module")
def scheduler():
    distributed = pytest.importorskip("distributed")
    with distributed.LocalCluster(
        n_workers=2, threads_per_worker=1, processes=True, dashboard_address=None
    ) as cluster:
        yield cluster.scheduler_address


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


def test_without_dask_a_scheduler_is_refused_by_naming_the_extra(monkeypatch, capsys):
    import sys

    monkeypatch.setitem(sys.modules, "distributed", None)
    assert run(["gate", str(MESHES / "demo.toml"), "--scheduler", "tcp://127.0.0.1:1"]) == 2
    assert "pip install 'fvcheck[cluster]'" in capsys.readouterr().err


def test_workers_and_a_scheduler_exclude_one_another(capsys):
    words = ["study", MESHES / "demo-fine.vtu", MESHES / "demo-coarse.vtu", "-c", MESHES / "demo.toml"]
    assert run([*map(str, words), "--workers", "2", "--scheduler", "tcp://127.0.0.1:1"]) == 2
    assert "workers and a scheduler" in capsys.readouterr().err
