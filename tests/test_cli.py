"""The command line: the same numbers as the library, exit statuses, JSON, settings from files and options."""

import json
import os
import re
import shutil
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from forked import fvcheck

import fvcheck as package
from fvcheck.cli.app import run
from fvcheck.cli.options import FluidOptions, Limits, Reading
from fvcheck.cli.settings import settle
from fvcheck.errors import SetupError
from fvcheck.jsonout import write
from fvcheck.ledger import Ledger, Result, Row
from fvcheck.verdict import EXIT_STATUS, VERDICTS

ROOT = Path(__file__).parent.parent
SAMPLES = Path(__file__).parent / "samples"
GOOD = SAMPLES / "tri_point.vtkhdf"
SERIES = SAMPLES / "tri_point_series.xdmf"


def strict(text: str) -> dict:
    def refuse(word: str) -> None:
        raise AssertionError(f"{word} in JSON")

    return json.loads(text, parse_constant=refuse)


def test_balance_gives_the_numbers_of_the_library(tmp_path):
    target = tmp_path / "result.json"
    shown = fvcheck("balance", GOOD, "--density", "1.5", "-s", "a=box(0.6, 0.5, 1.5, 1.2)", "--json", target)
    assert shown.status in (0, 1, 3) and "a  ·  box" in shown.out
    flow = package.open_flow(GOOD, fluid=package.Fluid(density=1.5))
    ours = package.balance_all(flow, [package.ControlSurface.box(0.6, 0.5, 1.5, 1.2, name="a")])
    assert strict(target.read_text()) == json.loads(json.dumps(ours.to_dict()))


def test_inspect_gives_the_facts_of_the_library():
    shown = fvcheck("inspect", GOOD, "--json", "-")
    found = package.inspect_file(GOOD)
    assert strict(shown.out) == json.loads(json.dumps(found.to_dict()))


def test_json_on_standard_output_stands_there_alone():
    shown = fvcheck("balance", GOOD, "--density", "1", "--json", "-")
    result = strict(shown.out)
    assert result["schema"] == "fvcheck-result/1"
    assert shown.status == EXIT_STATUS[result["verdict"]]


def test_a_json_file_replaces_an_earlier_one_whole(tmp_path):
    target = tmp_path / "result.json"
    target.write_text("x" * 1_000_000)
    assert fvcheck("balance", GOOD, "--density", "1", "--quiet", "--json", target).status != 2
    strict(target.read_text())
    assert [path.name for path in tmp_path.iterdir()] == ["result.json"]
    assert target.stat().st_mode & 0o777 == 0o666 & ~_umask()


def _umask() -> int:
    mask = os.umask(0)
    os.umask(mask)
    return mask


def test_json_keeps_links_and_writes_into_pipes(tmp_path):
    real, link, pipe = tmp_path / "real.json", tmp_path / "link.json", tmp_path / "pipe"
    real.write_text("old")
    link.symlink_to(real)
    write(link, {"a": 1})
    assert link.is_symlink() and strict(real.read_text()) == {"a": 1}
    os.mkfifo(pipe)
    reader = os.open(pipe, os.O_RDONLY | os.O_NONBLOCK)
    write(pipe, {"a": 2})
    assert strict(os.read(reader, 1000).decode()) == {"a": 2}
    os.close(reader)
    assert pipe.is_fifo()


def test_quiet_leaves_one_line():
    shown = fvcheck("balance", GOOD, "--density", "1", "--quiet", "--law", "mass")
    assert shown.out.count("\n") == 1 and shown.out.startswith("verdict ")


@pytest.mark.parametrize(
    ("verdict", "status"), [("closed", 0), ("open", 1), ("undecided", 3), ("mesh-limited", 3), (None, 0)]
)
def test_the_exit_status_tells_the_verdict(verdict, status, monkeypatch, capsys):
    from fvcheck import balancing

    row = Row("mass", None, "kg/s/m", {}, 1, 1, 0, 0, {}, 0, 0, 0.0, 1.0, 0.1, 0, 0, 0, 0.0, 0.5, verdict)
    ledger = Ledger("a", "box", True, 1.0, 1.0, degrees={}, rows=(row,), ports=())
    case = dict.fromkeys(("file", "cells", "location", "time", "step"))
    monkeypatch.setattr(balancing, "balance_all", lambda *_, **__: Result(case, (ledger,)))
    assert run(["balance", str(GOOD)]) == status


def test_open_lines_alone_have_no_verdict_and_exit_with_0():
    shown = fvcheck("balance", GOOD, "--density", "1", "-s", "line(1 0.3, 1 1.5)", "--json", "-")
    assert shown.status == 0 and strict(shown.out)["verdict"] is None


def test_all_steps_give_a_ledger_each():
    shown = fvcheck("balance", SERIES, "--density", "1", "--law", "mass", "--step", "all", "--json", "-")
    result = strict(shown.out)
    assert [entry["step"] for entry in result["history"]] == [0, 1, 2, 3, 4]
    assert result["history"][-1]["surfaces"] == result["surfaces"]
    worst = max((entry["verdict"] for entry in result["history"]), key=VERDICTS.index)
    assert result["verdict"] == worst and shown.status == EXIT_STATUS[worst]


def test_a_step_counts_from_the_end_when_negative():
    one = fvcheck("balance", SERIES, "--density", "1", "--law", "mass", "--step", "-2", "--json", "-")
    assert strict(one.out)["case"]["step"] == 3


@pytest.mark.parametrize(
    ("line", "offered"),
    [
        ("fvcheck bal", "balance"),
        ("fvcheck balance --visc", "--viscosity"),
        ("fvcheck balance --law mass,mom", "mass,momentum"),
        ("fvcheck balance --pressure-kind red", "reduced"),
        ("fvcheck explain und", "undecided"),
    ],
)
def test_the_shell_is_told_how_a_line_goes_on(line, offered):
    asked = {"_FVCHECK_COMPLETE": "complete_bash", "COMP_WORDS": line, "COMP_CWORD": str(line.count(" "))}
    done = subprocess.run(
        [sys.executable, "-m", "fvcheck"],
        env={**os.environ, **asked},
        capture_output=True,
        text=True,
        cwd=ROOT,
    )
    assert (done.stdout.split(), done.stderr, done.returncode) == ([offered], "", 0)


def test_version_and_help_are_everywhere():
    for command in ("inspect", "balance", "demo", "explain"):
        assert fvcheck(command, "--version").out == f"fvcheck {package.__version__}\n"
        for name in ("-h", "--help"):
            shown = fvcheck(command, name)
            assert shown.status == 0 and f"fvcheck {command}" in shown.out
    assert fvcheck().out == fvcheck("--help").out


def test_a_reader_that_goes_away_is_no_error():
    code = f"{sys.executable} -m fvcheck explain | true; exit ${{PIPESTATUS[0]}}"
    done = subprocess.run(["bash", "-c", code], capture_output=True, text=True, cwd=ROOT)
    assert done.stderr == "" and done.returncode in (0, 141)


def test_ctrl_c_ends_with_one_line():
    # a shell that runs the tests in the background has its children ignore the signal
    code = "import signal\nsignal.signal(signal.SIGINT, signal.default_int_handler)\n"
    code += "import fvcheck.balancing, time\nfrom fvcheck.cli import app\n"
    code += "fvcheck.balancing.balance_all = lambda *_, **__: (print('here', flush=True), time.sleep(60))\n"
    code += f"raise SystemExit(app.run(['balance', {str(GOOD)!r}, '--density', '1']))"
    child = subprocess.Popen(
        [sys.executable, "-c", code], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True, cwd=ROOT
    )
    assert child.stdout is not None and child.stdout.readline() == "here\n"
    time.sleep(0.1)
    child.send_signal(signal.SIGINT)
    _, err = child.communicate(timeout=20)
    assert child.returncode == 130
    assert err == "error: stopped from the keyboard.\n"


def check_file(folder: Path, more: str = "") -> Path:
    shutil.copy(GOOD, folder / "run.vtkhdf")
    path = folder / "check.toml"
    path.write_text(
        "[case]\nfile = 'run.vtkhdf'\ndepth = 2.0\n[fluid]\ndensity = 3.0\ngravity = [0.0, -9.81]\n"
        "[tolerance]\nmass = 7.0\nmomentum = 8.0\n[patches]\nwall = ['left']\n"
        "[[surface]]\nname = 'inner'\nshape = 'box(0.6, 0.5, 1.5, 1.2)'\n" + more
    )
    return path


def settled(check: Path | None, file: Path | None = None, surfaces=None, limits=None, fluid=None, **reading):
    return settle(
        file, Reading(check=check, **reading), fluid or FluidOptions(), surfaces, limits or Limits()
    )


def test_a_check_file_gives_the_settings(tmp_path):
    settings = settled(check_file(tmp_path))
    assert settings.file == tmp_path / "run.vtkhdf"
    assert settings.reading["fluid"] == package.Fluid(density=3.0, gravity=(0.0, -9.81))
    assert settings.reading["depth"] == 2.0 and settings.reading["walls"] == {"left": (0.0, 0.0)}
    assert settings.tolerance == {"mass": 7.0, "momentum": 8.0}
    assert [surface.name for surface in settings.surfaces] == ["inner"]


def test_an_option_wins_over_the_check_file(tmp_path):
    settings = settled(
        check_file(tmp_path),
        file=Path("other.vtu"),
        surfaces=["mine=circle(1, 1, 0.2)"],
        limits=Limits(tolerance=["mass=0.1"], law=["mass,heat", "momentum"], scale=["heat=5"]),
        fluid=FluidOptions(density="1.25", gravity="1,2"),
        depth="0.5",
        wall=["left=1,0", "top"],
        step="3",
    )
    assert settings.file == Path("other.vtu") and settings.step == "3"
    assert settings.reading["fluid"] == package.Fluid(density=1.25, gravity=(1.0, 2.0))
    assert settings.reading["depth"] == 0.5
    assert settings.reading["walls"] == {"left": (1.0, 0.0), "top": (0.0, 0.0)}
    assert settings.tolerance == {"mass": 0.1, "momentum": 8.0} and settings.scale == {"heat": 5.0}
    assert settings.laws == ["mass", "heat", "momentum"]
    assert [surface.name for surface in settings.surfaces] == ["mine"]


def test_a_property_option_wins_over_an_array_of_the_check_file(tmp_path):
    check = check_file(tmp_path, "[fields]\nviscosity = 'mu'\nvelocity = 'U'\n")
    settings = settled(
        check, fluid=FluidOptions(viscosity="nut"), field=["velocity=point:V", "scalar:smoke=s"]
    )
    assert settings.reading["fields"] == {"velocity": "point:V", "scalar:smoke": "s"}
    assert settings.reading["fluid"].viscosity == "nut"


def test_sources_of_the_check_file_count(tmp_path):
    check = check_file(
        tmp_path,
        "[[source]]\nlaw = 'mass'\nshape = 'box(0.6, 0.5, 0.8, 0.7)'\nrate = 0.25\n"
        "[[source]]\nlaw = 'momentum'\nshape = 'box(0.6, 0.5, 0.8, 0.7)'\nrate = [3.0, -4.0]\n",
    )
    shown = strict(fvcheck("balance", "-c", check, "--law", "mass,momentum", "--json", "-").out)
    without = strict(
        fvcheck("balance", "-c", check_file(tmp_path), "--law", "mass,momentum", "--json", "-").out
    )
    rows, before = shown["surfaces"][0]["laws"], without["surfaces"][0]["laws"]
    added = [row["source"] - old["source"] for row, old in zip(rows, before)]
    assert added == pytest.approx([0.25, 3.0, -4.0], abs=1e-9)  # weight is in both, summed in one order


@pytest.mark.parametrize(
    ("source", "words"),
    [
        ("law = 'mass'\nshape = 'domain()'\nrate = 1.0", "closed shape"),
        ("law = 'mass'\nshape = 'line(0 0, 1 1)'\nrate = 1.0", "closed shape"),
    ],
)
def test_a_source_that_cannot_be_spread_is_refused(source, words, tmp_path):
    with pytest.raises(SetupError, match=words):
        settled(check_file(tmp_path, f"[[source]]\n{source}\n"))


def test_a_source_with_the_wrong_number_of_components_is_refused(tmp_path):
    check = check_file(
        tmp_path, "[[source]]\nlaw = 'momentum'\nshape = 'box(0.6, 0.5, 0.8, 0.7)'\nrate = 1.0\n"
    )
    shown = fvcheck("balance", "-c", check, "--law", "momentum")
    assert shown.status == 2 and "takes two numbers" in shown.err


def test_a_check_file_with_several_exports_asks_which(tmp_path):
    path = tmp_path / "check.toml"
    path.write_text("[case]\nfile = ['a.vtu', 'b.vtu']\n")
    with pytest.raises(SetupError, match="2 exports"):
        settled(path)


def test_inspect_works_where_roles_are_unclear(tmp_path):
    import meshio

    points = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0.0]]
    data = {"velocity": [[1.0, 0, 0]] * 4, "vel": [[2.0, 0, 0]] * 4, "gap": [1.0, float("nan"), 3.0, 4.0]}
    meshio.Mesh(points, [("triangle", [[0, 1, 2], [0, 2, 3]])], point_data=data).write(tmp_path / "two.vtu")
    shown = fvcheck("inspect", tmp_path / "two.vtu", "--json", "-")
    found = strict(shown.out)
    assert shown.status == 0
    assert [hint["code"] for hint in found["hints"]] == ["unclear-fields"]
    assert {row["name"]: row["not_finite"] for row in found["arrays"]}["gap"] == 1
    assert {row["name"]: row["role"] for row in found["arrays"]}["vel"] == "velocity?"
    told = fvcheck("inspect", tmp_path / "two.vtu", "--field", "velocity=vel")
    assert re.search(r"right\s.*\s2 *$", told.out, re.MULTILINE), told.out  # the velocity through x = 1


def test_inspect_shows_the_motion_although_another_role_is_unclear(tmp_path):
    import meshio

    points = [[0, 0, 0], [1, 0, 0], [1, 1, 0], [0, 1, 0.0]]
    data = {"U": [[2.0, 0, 0]] * 4, "p": [1.0] * 4, "pressure": [2.0] * 4}
    meshio.Mesh(points, [("triangle", [[0, 1, 2], [0, 2, 3]])], point_data=data).write(tmp_path / "two.vtu")
    found = package.inspect_file(tmp_path / "two.vtu")
    assert "pressure" in found.hints[0].message and found.hints[0].code == "unclear-fields"
    # A uniform velocity is sampled to rounding.
    assert {patch.name: patch.through for patch in found.patches}["right"] == pytest.approx(2.0, abs=1e-12)


def test_walls_are_suspected_from_the_data():
    # Channel with a cylinder (ngsolve, tests/data/cylinder_re20.json): inlet left, outlet right.
    found = package.inspect_file(Path(__file__).parent / "data" / "cylinder_re20.vtu")
    (hint,) = [hint for hint in found.hints if hint.code == "looks-like-wall"]
    assert hint.message.endswith("--wall bottom --wall top --wall body-1")
    through = {patch.name: patch.through for patch in found.patches}
    # Parabolic inflow of mean 0.2; the sampling is of second degree, the outlet is not fully developed.
    assert through["left"] == pytest.approx(-0.2, abs=2e-4) and through["right"] == pytest.approx(
        0.2, abs=2e-4
    )


def test_the_demo_ends_as_it_should():
    shown = fvcheck("demo", cwd=ROOT)
    assert shown.status == 0, shown.out + shown.err
    assert "As it should be" in shown.out
    first, second = re.findall(r"^verdict . (\w+)", shown.out, re.MULTILINE)
    assert (first, second) == ("open", "closed")


def test_commands_of_the_demo_work():
    shown = fvcheck("demo", cwd=ROOT)
    line = next(line for line in shown.out.splitlines() if line.startswith("  fvcheck balance meshes"))
    assert fvcheck(*line.split()[1:], cwd=ROOT).status == 1
