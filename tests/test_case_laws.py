"""``laws`` under [case]: the set of laws where no ``--law`` is given."""

import json
from pathlib import Path

import pytest

from fvcheck.checkfile import load
from fvcheck.cli.app import run
from fvcheck.errors import SetupError

DEMO = Path(__file__).parents[1] / "meshes" / "demo-coarse.vtu"


def written(folder, laws):
    path = folder / "check.toml"
    path.write_text(
        f'[case]\nfile = "{DEMO.as_posix()}"\nlaws = {laws}\n'
        "[fluid]\ndensity = 1.2\nviscosity = 1.8e-5\n"
        '[[surface]]\nname = "bar"\nshape = "box(0.0115, 0.003, 0.0215, 0.012)"\n'
    )
    return path


def laws_of(capsys, *arguments):
    run(["balance", *map(str, arguments), "--json", "-"])
    rows = json.loads(capsys.readouterr().out)["surfaces"][0]["laws"]
    return {row["law"] for row in rows}


def test_the_laws_of_the_case_are_balanced_where_no_option_names_others(tmp_path, capsys):
    assert laws_of(capsys, "-c", written(tmp_path, '["mass"]')) == {"mass"}


def test_an_option_wins_over_the_laws_of_the_case(tmp_path, capsys):
    assert laws_of(capsys, "-c", written(tmp_path, '["mass"]'), "--law", "momentum") == {"momentum"}


def test_an_unknown_law_of_the_case_is_refused_with_the_nearest_name(tmp_path):
    with pytest.raises(SetupError, match=r"\[case\] laws.*momentum"):
        load(written(tmp_path, '["momentun"]'), laws=["mass", "momentum"])


def test_an_empty_list_of_laws_is_refused(tmp_path):
    with pytest.raises(SetupError, match="laws"):
        load(written(tmp_path, "[]"), laws=["mass", "momentum"])
