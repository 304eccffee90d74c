"""What README.md shows works as it stands, and so do the examples in docstrings."""

import doctest
import importlib
import re
import shlex
from pathlib import Path

import pytest
from forked import fvcheck

import fvcheck as package

ROOT = Path(__file__).parent.parent
README = (ROOT / "README.md").read_text(encoding="utf-8")
BLOCKS = re.findall(r"^```(\w+)\n(.*?)^```", README, re.MULTILINE | re.DOTALL)
COMMANDS = [
    line for kind, text in BLOCKS if kind == "sh" for line in text.splitlines() if line.startswith("fvcheck ")
]


@pytest.mark.parametrize("line", COMMANDS)
def test_a_command_of_the_readme_works(line):
    run = fvcheck(*shlex.split(line)[1:], cwd=ROOT)
    assert run.status in (0, 1, 3), run.err
    assert run.err == "" and run.out


def test_the_early_iteration_is_open_in_momentum_by_what_the_readme_says():
    line = next(line for line in COMMANDS if "0020" in line)
    run = fvcheck(*shlex.split(line)[1:], cwd=ROOT)
    assert run.status == 1
    assert re.search(r"momentum-x +1[12]\.\d", run.out), run.out  # percent, for the box around the bar


def test_the_python_of_the_readme_works(monkeypatch, capsys):
    monkeypatch.chdir(ROOT)
    (code,) = [text for kind, text in BLOCKS if kind == "python"]
    exec(compile(code, "README.md", "exec"), {})
    assert len(capsys.readouterr().out.split()) == 4


def test_the_check_file_of_the_readme_can_be_read(tmp_path):
    from fvcheck.checkfile import load
    from fvcheck.laws import law_names

    (text,) = [text for kind, text in BLOCKS if kind == "toml"]
    path = tmp_path / "check.toml"
    path.write_text(text, encoding="utf-8")
    check = load(path, laws=law_names())
    assert [surface.name for surface in check.control_surfaces()] == ["outer"]


def test_ci_runs_the_test_command_of_the_readme():
    set_up = [text.strip() for kind, text in BLOCKS if kind == "sh" and text.startswith("python3 -m venv")]
    assert len(set_up) == 2
    assert set_up[1] in (ROOT / ".ci" / "run").read_text().splitlines()


def modules() -> list[str]:
    """Modules with examples."""
    files = sorted(Path(package.__file__).parent.rglob("*.py"))
    with_examples = [path for path in files if ">>> " in path.read_text(encoding="utf-8")]
    return [".".join(path.relative_to(ROOT).with_suffix("").parts) for path in with_examples]


@pytest.mark.parametrize("name", modules())
def test_examples_in_docstrings_give_what_they_show(name):
    assert doctest.testmod(importlib.import_module(name)).failed == 0
