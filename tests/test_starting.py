"""A check file that is begun from an export runs as written, and holds what was told."""

import shutil
from pathlib import Path

import pytest

import fvcheck
from fvcheck.checkfile import load
from fvcheck.cli.app import run

ROOT = Path(__file__).parent.parent
SAMPLES = ROOT / "tests" / "samples"
NAMES = [
    "mixed_cell.cgns",
    "mixed_cell_series.pvd",
    "mixed_point.exo",
    "ext_cell.cgns",
    "poly_cell.vtp",
    "rect_point.vtr",
    "tri6_point.xdmf",
    "tri_cell_scalars.vtu",
    "tri_cell_v41.msh",
    "tri_lines_point.med",
    "tri_point.vtkhdf",
]
EXPORTS = [SAMPLES / name for name in NAMES]
EXPORTS += [ROOT / "meshes" / "demo-coarse.vtu", ROOT / "tests" / "data" / "cylinder_re20.vtu"]


@pytest.mark.parametrize("export", EXPORTS, ids=lambda path: path.name)
def test_a_started_check_file_runs_as_written(export, tmp_path, capsys):
    check = tmp_path / "start.toml"
    assert run(["inspect", str(export), "--start-check", str(check)]) == 0, capsys.readouterr().err
    assert f"written: {check}" in capsys.readouterr().out
    for arguments in (["balance", "-c", str(check)], ["inspect", "-c", str(check)]):
        status = run([*arguments, "--quiet"])
        assert status in (0, 1, 3), capsys.readouterr().err
    found = fvcheck.gate(check, workers=0, diagnosis=False)
    assert found.status in (0, 1, 3), found.failures


def test_what_was_told_stands_in_the_check_file(tmp_path):
    check = tmp_path / "start.toml"
    options = "--density 1.2 --viscosity 1.8e-5 --gravity 0,-9.81 --depth 0.5 --cell-values centroid"
    options += " --wall patch-4 --wall patch-3=0.1,0 --wall patch-2=spin(2,0,1) --field velocity=cell:U"
    export = ROOT / "meshes" / "demo-coarse.vtu"
    assert run(["inspect", str(export), *options.split(), "--start-check", str(check), "-q"]) == 0
    made = load(check)
    assert made.fluid.density == 1.2 and made.fluid.viscosity == 1.8e-5 and made.fluid.gravity == (0, -9.81)
    assert made.case.depth == 0.5 and made.case.cell_values == "centroid"
    assert made.patches.wall == ("patch-4",) and made.patches.moving_wall["patch-3"] == (0.1, 0.0)
    assert made.patches.moving_wall["patch-2"].omega == 2.0
    assert made.fields["velocity"] == "cell:U"
    assert made.case_files()[0].resolve() == export.resolve()
    assert [surface.name for surface in made.surface] == ["domain", "around-patch-4"]


def test_a_check_file_that_is_there_is_kept_unless_forced(tmp_path, capsys):
    check = tmp_path / "start.toml"
    check.write_text("mine", encoding="utf-8")
    export = str(ROOT / "meshes" / "demo-coarse.vtu")
    assert run(["inspect", export, "--start-check", str(check)]) == 2
    assert "--force" in capsys.readouterr().err and check.read_text(encoding="utf-8") == "mine"
    assert run(["inspect", export, "--start-check", str(check), "--force"]) == 0
    assert load(check).case_files()
    assert run(["inspect", export, "--start-check", str(tmp_path / "no" / "start.toml")]) == 2
    assert run(["inspect", export, "--force"]) == 2


def test_names_that_toml_or_a_reader_could_stumble_over_do_no_harm(tmp_path):
    import pyvista

    grid = pyvista.read(ROOT / "meshes" / "demo-coarse.vtu")
    grid.cell_data["a # ][ é \\ '"] = grid.cell_data["p"]
    folder = tmp_path / 'a "quoted" folder # [é]'
    folder.mkdir()
    grid.save(folder / "x.vtu")
    check = tmp_path / "start.toml"
    assert run(["inspect", str(folder / "x.vtu"), "--start-check", str(check), "-q"]) == 0
    assert load(check).case_files()[0].resolve() == (folder / "x.vtu").resolve()


def test_two_arrays_of_one_role_are_written_down_to_be_checked(tmp_path):
    import pyvista

    grid = pyvista.read(ROOT / "meshes" / "demo-coarse.vtu")
    grid.cell_data["pressure"] = grid.cell_data["p"] + 1.0
    grid.save(tmp_path / "two.vtu")
    check = tmp_path / "start.toml"
    assert run(["inspect", str(tmp_path / "two.vtu"), "--start-check", str(check), "-q"]) == 0
    assert "PLEASE CHECK" in check.read_text(encoding="utf-8")
    assert run(["balance", "-c", str(check), "-q"]) in (0, 1, 3)


COMMANDS = ["inspect", "balance", "forces", "history", "study", "diagnose", "report"]


@pytest.mark.parametrize("command", COMMANDS)
def test_every_command_takes_its_files_from_a_check_file(command, tmp_path, capsys):
    for name in ("demo-coarse.vtu", "demo-fine.vtu"):
        shutil.copy(ROOT / "meshes" / name, tmp_path)
    text = (ROOT / "meshes" / "demo.toml").read_text(encoding="utf-8")
    text = text.replace("[case]", '[case]\nlaws = ["mass"]')
    if command == "study":
        text = text.replace('"demo-coarse.vtu"', '["demo-coarse.vtu", "demo-fine.vtu"]')
    check = tmp_path / "check.toml"
    check.write_text(text, encoding="utf-8")
    more = ["-o", str(tmp_path / "page.html")] if command == "report" else []
    assert run([command, "-c", str(check), "-q", *more]) in (0, 1, 3), capsys.readouterr().err
