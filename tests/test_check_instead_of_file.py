"""A check file that names its export stands in for FILE."""

from pathlib import Path

import pytest

from fvcheck.cli.app import run

DEMO = Path(__file__).parents[1] / "meshes" / "demo.toml"


def test_inspect_takes_its_file_from_the_check_file(capsys):
    assert run(["inspect", "-c", str(DEMO)]) == 0
    assert "demo-coarse.vtu" in capsys.readouterr().out


@pytest.mark.parametrize("command", ["balance", "forces", "diagnose", "history", "study", "inspect"])
def test_a_check_file_in_the_place_of_an_export_is_told_its_own(command, capsys):
    assert run([command, str(DEMO), "--density", "1"] if command != "inspect" else [command, str(DEMO)]) == 2
    error = capsys.readouterr().err
    assert error.count("\n") == 1 and f"-c {DEMO}" in error


@pytest.mark.parametrize("command", ["inspect", "balance", "forces", "diagnose"])
def test_without_a_file_and_a_check_file_one_line_asks_for_either(command, capsys):
    assert run([command]) == 2
    error = capsys.readouterr().err
    assert error.count("\n") == 1 and "-c" in error
