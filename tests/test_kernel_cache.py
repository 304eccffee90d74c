"""Compiled loops are kept from run to run wherever a folder allows it, and first use says so."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest

from fvcheck.cli.progress import say_first_use
from fvcheck.kernels import cache

PACKAGE = Path(__file__).resolve().parent.parent / "fvcheck"

# What a run of any command needs of the loops, and where they were kept.
ASK = (
    "import numpy as np, numba\n"
    "from fvcheck.kernels import cache, cells\n"
    "print(cache.cold(), cache.kept())\n"
    "area = cells.polygon_areas(np.eye(3, 2), np.array([0, 3]), np.arange(3))\n"
    "stats = cells.polygon_areas.stats\n"
    "print(sum(stats.cache_misses.values()), sum(stats.cache_hits.values()), stats.cache_path)\n"
)


@pytest.fixture
def package(tmp_path):
    """A copy of the package beside whose loops nothing can be written, not even by an administrator."""
    target = tmp_path / "site" / "fvcheck"
    (target / "kernels").mkdir(parents=True)
    (target / "__init__.py").touch()
    for source in (PACKAGE / "kernels").glob("*.py"):
        (target / "kernels" / source.name).write_bytes(source.read_bytes())
    (target / "kernels" / "__pycache__").touch()  # a file where a folder would be
    return target.parent


def ask(package, **environment):
    kept = {k: v for k, v in os.environ.items() if k not in ("NUMBA_CACHE_DIR", "XDG_CACHE_HOME", "HOME")}
    run = subprocess.run(
        [sys.executable, "-c", ASK],
        env=kept | {"PYTHONPATH": str(package)} | environment,
        capture_output=True,
        text=True,
        cwd=package,
    )
    assert run.returncode == 0, run.stderr
    first, second = run.stdout.splitlines()
    misses, hits, path = second.split()
    return first.split(), (int(misses), int(hits)), path


@pytest.mark.parametrize("variable", ["NUMBA_CACHE_DIR", "HOME"])
def test_beside_a_package_that_cannot_be_written_the_loops_of_one_process_serve_the_next(
    package, tmp_path, variable
):
    home = tmp_path / "home"
    home.mkdir()
    environment = {variable: str(home)} | ({} if variable == "HOME" else {"HOME": os.devnull})
    (_, kept), counts, path = ask(package, **environment)
    assert kept == "True" and counts == (1, 0)
    assert Path(path).is_relative_to(home)
    assert ask(package, **environment)[1] == (0, 1)


def test_with_no_folder_to_write_the_loops_still_run_and_leave_nothing_behind(package):
    (cold, kept), counts, path = ask(package, HOME=os.devnull)
    assert (cold, kept) == ("True", "False")
    assert counts == (1, 0)
    assert not Path(path).exists()


def test_first_use_says_that_it_compiles_on_a_terminal_only(monkeypatch, capsys):
    monkeypatch.setattr(cache, "kept", lambda: True)
    monkeypatch.setattr(cache, "cold", lambda: True)
    say_first_use()
    assert capsys.readouterr().err == ""
    monkeypatch.setattr(sys.stderr, "isatty", lambda: True, raising=False)
    say_first_use()
    assert "compiles its loops on first use" in capsys.readouterr().err
    monkeypatch.setattr(cache, "cold", lambda: False)
    say_first_use()
    assert capsys.readouterr().err == ""


def test_where_nothing_can_be_kept_each_run_names_the_remedy(monkeypatch, capsys):
    monkeypatch.setattr(cache, "kept", lambda: False)
    say_first_use()
    assert "NUMBA_CACHE_DIR" in capsys.readouterr().err
