"""Bad input ends with status 2 and one line that says what is wrong; nothing else appears."""

import json
from pathlib import Path

import pytest
from forked import Run, fvcheck

SAMPLES = Path(__file__).parent / "samples"
BAD = sorted(json.loads((SAMPLES / "bad" / "bad.json").read_text()))
GOOD = SAMPLES / "tri_point.vtkhdf"


def assert_refused(run: Run, *words: str) -> None:
    assert run.status == 2, run
    assert run.out == ""
    assert run.err.startswith("error: ") and run.err.endswith("\n") and run.err.count("\n") == 1, run.err
    assert "Traceback" not in run.err and "fault of its own" not in run.err, run.err
    for word in words:
        assert word in run.err, run.err


# What is odd about these may also be understood, says bad.json.
MAY_BE_READ = {"vtu_exponent_d.vtu", "xdmf_hyperslab.xdmf"}


@pytest.mark.parametrize("command", ["inspect", "balance"])
@pytest.mark.parametrize("name", sorted(set(BAD) - MAY_BE_READ))
def test_a_damaged_file_is_refused_in_one_line(name, command, tmp_path):
    target = tmp_path / "result.json"
    run = fvcheck(command, SAMPLES / "bad" / name, "--json", target)
    assert_refused(run)
    assert list(tmp_path.iterdir()) == [], "no part of a result is left behind"


@pytest.mark.parametrize("name", sorted(MAY_BE_READ))
def test_an_odd_file_is_refused_or_read_right(name):
    run = fvcheck("inspect", SAMPLES / "bad" / name, "--json", "-")
    if run.status != 0:
        assert_refused(run)
        return
    ranges = {row["name"]: (row["low"], row["high"]) for row in json.loads(run.out)["arrays"]}
    # The base fields of samples.json: |p| and |U| below 1.2, neither constant.
    for low, high in ranges.values():
        assert -1.2 < low < high < 1.2


def test_every_damaged_file_of_the_folder_is_in_the_list():
    files = {path.name for path in (SAMPLES / "bad").iterdir() if path.is_file()} - {"bad.json"}
    assert {name for name in BAD if (SAMPLES / "bad" / name).is_file()} <= files
    assert len(BAD) >= 95


BALANCE = ("balance", GOOD, "--density", "1")


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ((*BALANCE, "-s", "box(50, 50, 51, 51)"), ["outside the domain", "box-1"]),
        ((*BALANCE, "-s", "polygon(0.5 0.5, 1 1, 1 0.5, 0.5 1.2)"), ["crosses itself"]),
        ((*BALANCE, "-s", "box(0, 0, 1)"), ["4 numbers", "box(x0, y0, x1, y1)"]),
        ((*BALANCE, "-s", "bix(0, 0, 1, 1)"), ["bix", "'box'"]),
        ((*BALANCE, "-s", "circle(1, 1, nan)"), ["nan"]),
        ((*BALANCE, "-s", "patch(lefft)"), ["lefft", "'left'"]),
        ((*BALANCE, "-s", "around(nobody, 0.1)"), ["nobody"]),
        ((*BALANCE, "-s", "file(nowhere.csv)"), ["nowhere.csv"]),
        ((*BALANCE, "-s", "a=box(0.5, 0.5, 1, 1)", "-s", "a=box(1, 1, 2, 2)"), ["'a'"]),
        ((*BALANCE, "--law", "mas"), ["'mass'"]),
        ((*BALANCE, "--law", ","), ["no law"]),
        ((*BALANCE, "--tolerance", "mass"), ["LAW=PERCENT"]),
        ((*BALANCE, "--tolerance", "mass=tiny"), ["'tiny'"]),
        ((*BALANCE, "--tolerance", "mass=-1"), ["mass", "-1"]),
        ((*BALANCE, "--tolerance", "mess=1"), ["'mass'"]),
        ((*BALANCE, "--scale", "mass=0"), ["scale of mass"]),
        ((*BALANCE, "--wall", "lefft"), ["lefft", "'left'"]),
        ((*BALANCE, "--wall", "left=1"), ["--wall", "NAME=VX,VY"]),
        ((*BALANCE, "--gravity", "9.81"), ["--gravity GX,GY"]),
        ((*BALANCE, "--depth", "deep"), ["--depth"]),
        ((*BALANCE, "--depth", "0"), ["depth"]),
        ((*BALANCE, "--plane", "xq"), ["xq"]),
        ((*BALANCE, "--plane", "xz"), ["xz plane"]),
        ((*BALANCE, "--step", "7"), ["step 7"]),
        ((*BALANCE, "--step", "first"), ["first"]),
        ((*BALANCE, "--cell-values", "middle"), ["middle"]),
        ((*BALANCE, "--pressure-kind", "statik"), ["'static'"]),
        ((*BALANCE, "--viscosity", "-1"), ["viscosity"]),
        ((*BALANCE, "--gamma", "inf"), ["--gamma"]),
        ((*BALANCE, "--field", "speed=U"), ["speed"]),
        ((*BALANCE, "--field", "velocity=Uu"), ["Uu"]),
        ((*BALANCE, "--json", "nowhere/result.json"), ["nowhere"]),
        ((*BALANCE, "--json", "."), ["directory"]),
        ((*BALANCE, "--tolerence", "mass=1"), ["'--tolerance'"]),
        ((*BALANCE, "-c", "nowhere.toml"), ["nowhere.toml"]),
        (("balance",), ["FILE"]),
        (("balance", "nowhere.vtu"), ["no such file"]),
        (("balance", "."), ["directory"]),
        (("inspect",), ["FILE"]),
        (("inspect", GOOD, "--field", "velocity=Uu"), ["Uu"]),
        (("inspect", GOOD, "--field", "speed=U"), ["speed"]),
        (("inspect", GOOD, "--density", "rhoo"), ["rhoo"]),
        (("inspect", GOOD, "--wall", "lefft"), ["'left'"]),
        (("inspect", GOOD, GOOD), ["unexpected"]),
        (("blance", GOOD), ["'balance'"]),
        (("explain", "opne"), ["'open'"]),
        (("--verson",), ["'--version'"]),
    ],
    ids=lambda value: " ".join(map(str, value[-2:])) if isinstance(value, tuple) else "",
)
def test_what_cannot_be_used_is_refused_in_one_line(arguments, words):
    assert_refused(fvcheck(*arguments), *words)


def test_a_broken_check_file_is_refused_with_its_place(tmp_path):
    check = tmp_path / "check.toml"
    check.write_text("[case]\nfile = 'run.vtu'\nplain = 'xy'\n")
    assert_refused(fvcheck("balance", "-c", check), "plain", "'plane'")


def test_a_fault_within_is_told_without_a_traceback(monkeypatch, capsys):
    from fvcheck import balancing
    from fvcheck.cli.app import run

    monkeypatch.setattr(balancing, "balance_all", lambda *_, **__: 1 / 0)
    assert run(["balance", str(GOOD), "--density", "1"]) == 2
    shown = capsys.readouterr()
    assert shown.out == "" and shown.err.count("\n") == 1 and "ZeroDivisionError" in shown.err
