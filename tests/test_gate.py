"""The gate: planted errors are found, equal runs pass, and nothing that is missing ever passes."""

import json
import os
import shutil
import subprocess
import sys
from pathlib import Path
from xml.etree import ElementTree as Tree

import crashing
import numpy as np
import pytest

import fvcheck
from fvcheck.cli.app import run

ROOT = Path(__file__).parent.parent
MESHES = ROOT / "meshes"
DEMO = (MESHES / "demo.toml").read_text(encoding="utf-8")
BASELINE = '[baseline]\nfile = "baseline.json"\ntolerance_percent = 0.2\n'


def check_file(folder, text=DEMO, name="check.toml", export="demo-coarse.vtu"):
    """A check file of the demo beside a copy of its export."""
    if not (folder / "demo-coarse.vtu").exists():
        shutil.copy(MESHES / export, folder / "demo-coarse.vtu")
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def change(path, edit):
    """Edit the cell arrays of an export by another library (PyVista), precision kept."""
    import pyvista

    grid = pyvista.read(path)
    centres = grid.cell_centers().points
    for name in ("U", "p", "T"):
        values = np.array(grid.cell_data[name])
        grid.cell_data[name] = edit(name, centres, values).astype(values.dtype)
    grid.save(path)


def judged(*paths, **options):
    return fvcheck.gate(paths, **{"workers": 0, "diagnosis": False} | options)


def with_baseline(folder):
    """A check file whose baseline is the run as it is."""
    path = check_file(folder, DEMO + BASELINE)
    made = judged(path, update_baseline=True)
    assert made.updated == (str(folder / "baseline.json"),)
    return path


def said(found):
    return {finding.name: finding for _, finding in found.failures}


def test_the_demo_passes_with_all_that_its_check_file_asks_for(tmp_path):
    found = judged(check_file(tmp_path))
    assert found.status == 0 and found.passed and not found.failures
    findings = found.outcomes[0].findings
    # Two surfaces with five rows, of which three are spoken of by hand; the case; three
    # limits on rows; two limits at three control surfaces.
    assert len([f for f in findings if f.kind == "row"]) == 8
    assert len([f for f in findings if f.kind == "expectation"]) == 3 + 2 * 3


def test_an_equal_run_has_not_drifted(tmp_path):
    assert judged(with_baseline(tmp_path)).status == 0


def test_a_planted_change_of_drag_by_one_percent_is_found(tmp_path):
    path = with_baseline(tmp_path)
    flow = fvcheck.open_flow(
        MESHES / "demo-coarse.vtu",
        fluid=fvcheck.Fluid(density=1.2, viscosity=1.8e-5),
        walls=["patch-3", "patch-4"],
    )
    before = fvcheck.forces(flow, "patch-4", methods=["body-surface"]).estimates[0]
    factor = 1 + 0.01 * before.drag / before.pressure[0]  # drag is linear in p
    change(tmp_path / "demo-coarse.vtu", lambda name, x, v: v * factor if name == "p" else v)
    found = judged(path)
    assert found.status == 1
    finding = said(found)["baseline: patch-4 body-surface"]
    assert "drag has drifted" in finding.message
    new = next(f for f in found.outcomes[0].result["forces"] if f["method"] == "body-surface")
    assert new["drag"] == pytest.approx(1.01 * before.drag, rel=1e-4)  # the file has 32-bit numbers


def test_a_planted_mass_source_of_half_a_percent_is_found(tmp_path):
    path = with_baseline(tmp_path)

    def edit(name, centres, values):
        # Behind the bar everything is 0.5 % faster: a source between x = 0.021 and 0.024.
        ramp = np.clip((centres[:, 0] - 0.021) / 0.003, 0, 1)
        return values * (1 + 0.005 * ramp)[:, None] if name == "U" else values

    change(tmp_path / "demo-coarse.vtu", edit)
    found = judged(path)
    assert found.status == 1
    finding = said(found)["baseline: channel section, mass"]
    assert "has drifted" in finding.message
    row = found.outcomes[0].result["surfaces"][1]["laws"][0]
    # 0.0244 % before; the flow through the section is the scale.
    assert row["law"] == "mass" and row["imbalance_percent"] == pytest.approx(0.0244 + 0.5, abs=0.02)


def test_a_planted_mass_sink_is_no_better_than_a_source(tmp_path):
    # A maximum alone limits the size of an imbalance, whatever its sign.
    text = DEMO.replace("imbalance_percent = { max = 0.5 }", "imbalance_percent = { max = 0.3 }")
    path = check_file(tmp_path, text)
    assert judged(path).status == 0

    def edit(name, centres, values):
        ramp = np.clip((centres[:, 0] - 0.021) / 0.003, 0, 1)
        return values * (1 - 0.005 * ramp)[:, None] if name == "U" else values

    change(tmp_path / "demo-coarse.vtu", edit)
    found = judged(path)
    assert found.status == 1
    finding = said(found)["[[expect]] 2: channel section, mass: imbalance_percent"]
    assert "at most 0.3 in size" in finding.message and finding.value < -0.4


def test_a_minimum_alone_does_not_excuse_an_open_row(tmp_path):
    text = DEMO + '[[expect]]\nsurface = "around the bar"\nlaw = "heat"\nimbalance_percent = { min = -90.0 }'
    found = judged(check_file(tmp_path, text, export="demo-coarse-0020.vtu"))
    assert "around the bar, heat" in said(found)


def test_a_re_meshed_equal_run_does_not_fail(tmp_path):
    # The meshes differ by a factor of two in cell size; the demo's own file says that the coarse run
    # is 0.3 % low in drag and 2.4 % low in lift, so tolerances of some percent are sensible.
    text = DEMO + BASELINE.replace("0.2", "2.5")
    path = check_file(tmp_path, text)
    assert judged(path, update_baseline=True).status == 0
    shutil.copy(MESHES / "demo-fine.vtu", tmp_path / "demo-coarse.vtu")
    found = judged(path)
    assert found.status == 0, found.failures


def test_on_another_mesh_a_real_change_is_still_found(tmp_path):
    path = check_file(tmp_path, DEMO + BASELINE.replace("0.2", "2.5"))
    judged(path, update_baseline=True)
    shutil.copy(MESHES / "demo-fine.vtu", tmp_path / "demo-coarse.vtu")
    change(tmp_path / "demo-coarse.vtu", lambda name, x, v: 1.1 * v if name == "U" else v)
    assert "baseline: around the bar, mass" in said(judged(path))


MISSING = {
    "case file": (DEMO.replace("demo-coarse.vtu", "gone.vtu"), "gone.vtu"),
    "pattern": (DEMO.replace("demo-coarse.vtu", "gone*.vtu"), "meets no file"),
    "field": (DEMO.replace('pressure = "p"', 'pressure = "q"'), "q"),
    "surface": (DEMO + '[[expect]]\nsurface = "outer"\nlaw = "mass"\nflux = { max = 9.0 }', "no surface"),
    "row": (
        DEMO + '[[expect]]\nsurface = "around the bar"\nlaw = "mass"\ncomponent = "x"\nflux = { max = 9.0 }',
        "no row",
    ),
    "law without data": (
        DEMO + '[[expect]]\nsurface = "around the bar"\nlaw = "scalar:dye"\nflux = { max = 9.0 }',
        "no row",
    ),
    "body": (DEMO + '[[expect]]\nbody = "patch-9"\ndrag = { max = 9.0 }', "patch-9"),
    "baseline": (DEMO + BASELINE, "no baseline"),
    "law": (DEMO + "[tolerance2]", "tolerance2"),
    "wall": (DEMO.replace('"patch-3", "patch-4"]', '"patch-3", "pier"]'), "pier"),
}


@pytest.mark.parametrize("what", MISSING)
def test_what_is_missing_is_a_failure(what, tmp_path):
    text, words = MISSING[what]
    found = judged(check_file(tmp_path, text))
    assert found.status == 2
    assert any(words in finding.message for _, finding in found.failures), found.failures


def test_a_law_on_request_is_balanced_where_it_is_expected(tmp_path):
    # Default surfaces, and a law that is not among the default ones.
    text = DEMO.split("[[surface]]")[0] + '[[expect]]\nsurface = "domain"\nlaw = "angular-momentum"\n'
    found = judged(check_file(tmp_path, text + "inflow = { min = 0.0 }"))
    names = [finding.name for finding in found.outcomes[0].findings if finding.kind == "expectation"]
    assert names == ["[[expect]] 1: domain, angular-momentum: inflow"]
    assert found.outcomes[0].findings[-1].passed


def test_a_check_file_that_is_missing_is_a_failure(tmp_path):
    found = judged(tmp_path / "gone.toml")
    assert found.status == 2 and "no such check file" in found.failures[0][1].message


def test_a_number_that_could_not_be_had_misses_its_expectation(tmp_path):
    # There is no wake line, so the wake route has no numbers.
    text = DEMO + '[[expect]]\nbody = "patch-4"\nmethod = "wake"\ndrag = { max = 9.0 }'
    found = judged(check_file(tmp_path, text))
    assert found.status in (1, 2)
    assert any("patch-4 wake" in finding.name for _, finding in found.failures)
    text = DEMO + '[[expect]]\nsurface = "open"\nlaw = "mass"\nimbalance = { max = 9.0 }'
    text += '\n[[surface]]\nname = "open"\nshape = "line(0.01 0.002, 0.01 0.012)"'
    found = judged(check_file(tmp_path, text))
    assert found.status == 1 and "there is no imbalance" in found.failures[0][1].message


def edited(path, edit):
    data = json.loads(path.read_text(encoding="utf-8"))
    edit(data)
    path.write_text(json.dumps(data), encoding="utf-8")


def _unit(data):
    data["surfaces"][0]["laws"][0]["unit"] = "kg/s"


def _null(data):
    data["surfaces"][0]["laws"][0]["flux"] = None


SPOILT = {
    "name": (lambda d: d["surfaces"][0].update(name="elsewhere"), 2),
    "kind": (lambda d: d["surfaces"][0].update(kind="circle"), 2),
    "area": (lambda d: d["surfaces"][0].update(area=1.01 * d["surfaces"][0]["area"]), 2),
    "length": (lambda d: d["surfaces"][0].update(length=1.01 * d["surfaces"][0]["length"]), 2),
    "unit": (_unit, 2),
    "number": (_null, 1),
    "depth": (lambda d: d["case"].update(depth=2.0), 2),
    "schema": (lambda d: d.update(schema="other/1"), 2),
    "rows": (lambda d: d["surfaces"][0]["laws"].pop(), 2),
    "surfaces": (lambda d: d.pop("surfaces"), 2),
    "forces": (lambda d: d.pop("forces"), 2),
    "text for a number": (lambda d: d["surfaces"][0]["laws"][0].update(flux="much"), 2),
}


@pytest.mark.parametrize("what", SPOILT)
def test_a_baseline_of_something_else_is_a_failure(what, tmp_path):
    path = with_baseline(tmp_path)
    edit, status = SPOILT[what]
    edited(tmp_path / "baseline.json", edit)
    assert judged(path).status == status


@pytest.mark.parametrize(
    "text", ["", "{", "[]", '{"schema": NaN}', '{"schema": 1e999}', "\x00", "[" * 100_000]
)
def test_a_baseline_that_cannot_be_read_is_a_failure(text, tmp_path):
    path = check_file(tmp_path, DEMO + BASELINE)
    (tmp_path / "baseline.json").write_text(text, encoding="utf-8")
    found = judged(path)
    assert found.status == 2 and [f.kind for _, f in found.failures] == ["baseline"]


def test_baselines_are_written_all_or_not_at_all(tmp_path):
    good = with_baseline(tmp_path)
    kept = (tmp_path / "baseline.json").read_bytes()
    bad = check_file(
        tmp_path, MISSING["field"][0] + BASELINE.replace("baseline.json", "other.json"), "bad.toml"
    )
    with pytest.raises(fvcheck.SetupError, match="no baseline is written"):
        judged(good, bad, update_baseline=True)
    assert (tmp_path / "baseline.json").read_bytes() == kept and not (tmp_path / "other.json").exists()
    # The second cannot be written: the first is put back.
    nowhere = check_file(
        tmp_path, DEMO + BASELINE.replace("baseline.json", "gone/baseline.json"), "nowhere.toml"
    )
    (tmp_path / "baseline.json").write_bytes(b"mine")
    with pytest.raises(fvcheck.SetupError, match="cannot be written"):
        judged(good, nowhere, update_baseline=True)
    assert (tmp_path / "baseline.json").read_bytes() == b"mine"
    with pytest.raises(fvcheck.SetupError, match="the same one"):
        judged(good, check_file(tmp_path, DEMO + BASELINE, "twin.toml"), update_baseline=True)
    with pytest.raises(fvcheck.SetupError, match="names a baseline"):
        judged(check_file(tmp_path, DEMO, "plain.toml"), update_baseline=True)


@pytest.mark.parametrize("work", [crashing.die_at_bad, crashing.raise_at_bad])
def test_a_crash_fails_its_own_case_and_no_other(work, tmp_path):
    names = [check_file(tmp_path, DEMO, name) for name in ("bad.toml", "one.toml", "two.toml")]
    found = fvcheck.gate(names, workers=2, diagnosis=False, work=work)
    assert [outcome.status for outcome in found.outcomes] == [2, 0, 0]
    assert "died" in found.failures[0][1].message or "KeyError" in found.failures[0][1].message


def test_the_wake_of_a_body_is_expected_with_its_line(tmp_path):
    import pyvista

    # u = 1 − a exp(−y²/b²) at the pressure of the stream: D = ρ b √π (a − a²/√2), closed form
    x, y = np.linspace(0, 2, 41), np.linspace(-2, 2, 161)
    grid = pyvista.RectilinearGrid(x, y, np.zeros(1))
    height = grid.points[:, 1]
    grid["U"] = np.stack([1 - 0.4 * np.exp(-((height / 0.3) ** 2)), 0 * height, 0 * height], axis=1)
    grid["p"] = 0 * height
    grid.save(tmp_path / "wake.vtr")
    drag = 0.3 * np.sqrt(np.pi) * (0.4 - 0.4**2 / np.sqrt(2))
    text = f"""
[case]
file = "wake.vtr"
laws = ["mass"]
[fluid]
density = 1.0
[[surface]]
shape = "box(0.5, -1, 1.5, 1)"
[[body]]
name = "left"
reference = {{ velocity = 1.0, length = 1.0, density = 1.0 }}
wake = "line(1.03 -1.9, 1.03 1.9)"
[[expect]]
body = "left"
method = "wake"
drag = {{ value = {drag}, tolerance_percent = 0.1 }}
"""
    path = tmp_path / "check.toml"
    path.write_text(text, encoding="utf-8")
    found = judged(path)
    assert found.status == 0, found.failures
    assert [f.status for f in found.outcomes[0].findings if f.kind == "expectation"] == [0]
    without = tmp_path / "without.toml"
    without.write_text(text.replace("wake = ", "# wake = "), encoding="utf-8")
    assert judged(without).status == 1
    wrong = tmp_path / "wrong.toml"
    wrong.write_text(text.replace("line(1.03", "lime(1.03"), encoding="utf-8")
    assert "[[body]] left, wake" in judged(wrong).failures[0][1].message


def test_a_case_that_hangs_fails_by_itself(tmp_path):
    names = [check_file(tmp_path, DEMO, name) for name in ("bad.toml", "one.toml")]
    found = fvcheck.gate(names, workers=2, diagnosis=False, work=crashing.hang_at_bad, time_limit=10.0)
    assert [outcome.status for outcome in found.outcomes] == [2, 0]
    assert "longer than 10 s" in found.failures[0][1].message


def test_a_plain_script_may_call_the_gate(tmp_path):
    # No guard around the call, and once from standard input: nothing of the script runs twice.
    code = f"import fvcheck; print('once'); print(fvcheck.gate({str(check_file(tmp_path))!r}).status)"
    (tmp_path / "script.py").write_text(code, encoding="utf-8")
    for arguments, fed in (([str(tmp_path / "script.py")], ""), (["-"], code)):
        done = subprocess.run(
            [sys.executable, *arguments],
            input=fed,
            capture_output=True,
            text=True,
            env=os.environ | {"PYTHONPATH": str(ROOT)},
        )
        assert done.stdout.split() == ["once", "0"], done.stderr


def test_the_worst_of_all_cases_is_the_exit_status(tmp_path, capsys):
    good = check_file(tmp_path, DEMO, "good.toml")
    missed = check_file(tmp_path, DEMO.replace("1.2273e-4", "1.4e-4"), "missed.toml")
    unsure = check_file(tmp_path, DEMO.replace("momentum = 2.0", "momentum = 0.5"), "unsure.toml")
    broken = check_file(tmp_path, "[case]\nfile = 3", "broken.toml")

    def status(*paths):
        out = run(["gate", *map(str, paths), "--no-diagnosis", "--quiet"])
        capsys.readouterr()
        return out

    assert status(good) == 0
    assert status(good, unsure) == 3
    assert status(good, unsure, missed) == 1
    assert status(broken, good, unsure, missed) == 2
    assert status(tmp_path / "*nothing.toml") == 2
    assert run(["gate"]) == 2 and "no check file" in capsys.readouterr().err


def test_an_open_case_says_why_in_its_failure(tmp_path):
    # Iteration 20 of the demo: open in momentum.
    path = check_file(tmp_path, export="demo-coarse-0020.vtu")
    found = judged(path, diagnosis=True)
    assert found.status == 1
    assert "momentum" in found.outcomes[0].diagnosis
    root = Tree.fromstring(found.junit())
    texts = [case.text for case in root.iter("failure")]
    assert any("momentum: " in text for text in texts)
    assert "> momentum" in found.markdown()
    assert judged(path).outcomes[0].diagnosis == ""


def strict(text):
    def refuse(word):
        raise ValueError(word)

    return json.loads(text, parse_constant=refuse)


def test_the_json_is_strict_and_that_of_one_check_file_is_its_result_file(tmp_path, capsys):
    path = check_file(tmp_path)
    assert run(["gate", str(path), "--json", "-"]) == 0
    data = strict(capsys.readouterr().out)
    assert data["schema"] == "fvcheck-result/1" and data["status"] == 0 and data["verdict"] == "closed"
    assert len(data["surfaces"]) == 2 and all(entry["passed"] for entry in data["expectations"])
    missing = check_file(tmp_path, MISSING["field"][0], "missing.toml")
    target = tmp_path / "out.json"
    assert run(["gate", str(path), str(missing), "--json", str(target), "-q"]) == 2
    data = strict(target.read_text(encoding="utf-8"))
    assert [case["status"] for case in data["cases"]] == [0, 2]
    assert data["cases"][1]["result"] is None


def test_the_junit_file_has_the_common_schema(tmp_path, capsys):
    xmlschema = pytest.importorskip("xmlschema")
    good = check_file(tmp_path)
    missed = check_file(tmp_path, DEMO.replace("1.2273e-4", "1.4e-4"), "missed.toml")
    unsure = check_file(tmp_path, DEMO.replace("momentum = 2.0", "momentum = 0.5"), "unsure.toml")
    broken = check_file(tmp_path, '[case]\nfile = "a\\u0007<&.vtu"', "broken.toml")
    target = tmp_path / "junit.xml"
    names = [str(path) for path in (good, missed, unsure, broken)]
    assert run(["gate", *names, "--junit", str(target), "--no-diagnosis", "-q"]) == 2
    xmlschema.XMLSchema(str(Path(__file__).parent / "junit.xsd")).validate(str(target))
    root = Tree.parse(target).getroot()
    for suite in root:
        assert int(suite.get("tests")) == len(suite)
        for tag, key in (("failure", "failures"), ("error", "errors"), ("skipped", "skipped")):
            assert int(suite.get(key)) == len(suite.findall(f"testcase/{tag}"))
    assert [int(root.get(key)) > 0 for key in ("failures", "errors", "skipped")] == [True] * 3
    assert int(root.get("tests")) == sum(int(suite.get("tests")) for suite in root)


def test_the_markdown_summary_names_what_failed(tmp_path, capsys):
    missed = check_file(tmp_path, DEMO.replace("1.2273e-4", "1.4e-4"), "mis|sed.toml")
    target = tmp_path / "summary.md"
    assert run(["gate", str(missed), "--markdown", str(target), "--no-diagnosis"]) == 1
    text = target.read_text(encoding="utf-8")
    assert text.startswith("## Conservation: ❌ failed") and "1.4e-4" not in text
    assert "expected: 0.00014 within 2 %" in text and "mis\\|sed.toml" in text
    assert "drag is" in capsys.readouterr().out


def test_a_series_is_judged_at_every_state(tmp_path):
    for step in ("0100", "0200", "0400"):
        shutil.copy(MESHES / f"demo-coarse-{step}.vtu", tmp_path)
    text = DEMO.replace('"demo-coarse.vtu"', '"demo-coarse-*.vtu"').replace(
        "[case]", '[case]\nlaws = ["mass"]'
    )
    text = text.split("[[expect]]")[0] + BASELINE
    path = check_file(tmp_path, text)
    made = judged(path, update_baseline=True)
    assert made.status in (0, 1, 3)
    result = made.outcomes[0].result
    assert len(result["history"]) == 3 and all(len(state["forces"]) >= 3 for state in result["history"])
    assert {f.name.split(",")[0] for f in made.outcomes[0].findings if f.kind == "row"} == {
        f"state {n}" for n in range(3)
    }
    assert not [f for _, f in judged(path).failures if f.kind == "baseline"]
    edited(tmp_path / "baseline.json", lambda d: d["history"].pop())
    assert judged(path).status == 2


def test_a_series_of_iterations_stores_nothing_and_has_rows_of_laws_that_are_only_expected(tmp_path):
    for step in ("0200", "0400"):
        shutil.copy(MESHES / f"demo-coarse-{step}.vtu", tmp_path)
    head = '[case]\nlaws = ["mass"]\nsteady = true'
    text = DEMO.replace('"demo-coarse.vtu"', '"demo-coarse-*.vtu"').replace("[case]", head)
    text = text.split("[[expect]]")[0] + (
        '[[expect]]\nsurface = "channel section"\nlaw = "angular-momentum"\nflux = { min = -1.0 }\n'
    )
    result = judged(check_file(tmp_path, text)).outcomes[0].result
    for state in result["history"]:
        laws = {one["name"]: [row["law"] for row in one["laws"]] for one in state["surfaces"]}
        assert laws == {"around the bar": ["mass"], "channel section": ["mass", "angular-momentum"]}
        assert all(row["storage"] == 0.0 for one in state["surfaces"] for row in one["laws"])
    timed = judged(check_file(tmp_path, text.replace("steady = true", "steady = false"))).outcomes[0].result
    rows = [row for one in timed["surfaces"] for row in one["laws"]]
    assert any(row["storage"] != 0.0 for row in rows)


def test_a_path_may_be_a_pattern_and_c_is_the_same(tmp_path, capsys):
    check_file(tmp_path)
    assert run(["gate", str(tmp_path / "*.toml"), "-q"]) == 0
    assert run(["gate", "-c", str(tmp_path / "check.toml")]) == 0
    assert "gate" in capsys.readouterr().out
