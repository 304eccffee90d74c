"""The pytest plugin, tried on small suites of its own (pytester)."""

import shutil
from pathlib import Path

import pytest

pytest_plugins = ["pytester"]

MESHES = Path(__file__).parent.parent / "meshes"
FLUID = 'FLUID = __import__("fvcheck").Fluid(density=1.2, viscosity=1.8e-5)\nWALLS = ["patch-3", "patch-4"]\n'
BAR = '"box(0.0115, 0.003, 0.0215, 0.012)"'


@pytest.fixture
def suite(pytester):
    """A folder with the demo; called with the text of a test file, it gives the outcome of its run."""
    for name in ("demo-coarse.vtu", "demo-coarse-0020.vtu", "demo.toml"):
        shutil.copy(MESHES / name, pytester.path)
    early = (MESHES / "demo.toml").read_text(encoding="utf-8").replace("coarse.vtu", "coarse-0020.vtu")
    (pytester.path / "early.toml").write_text(early, encoding="utf-8")

    def run(text, *options):
        pytester.makepyfile("import pytest\n" + FLUID + text)
        # By name, in case the installation is older than the entry point; twice does no harm.
        return pytester.runpytest_subprocess("-p", "fvcheck.testing", "--strict-markers", *options)

    return run


def test_a_ledger_is_asserted_in_two_lines(suite):
    suite(f"""
def test_it(fvcheck_ledger):
    ledger = fvcheck_ledger("demo-coarse.vtu", {BAR}, ["mass", "momentum"], fluid=FLUID, walls=WALLS)
    ledger.assert_within(0.5)
    ledger.assert_within(0.1, "mass")
    assert ledger["mass"].imbalance_percent < 0.1
""").assert_outcomes(passed=1)


def test_the_tolerance_decides_on_the_verdict(suite):
    suite(f"""
def test_it(fvcheck_ledger):
    fvcheck_ledger("demo-coarse.vtu", {BAR}, "mass", fluid=FLUID, tolerance={{"mass": 0.5}}).assert_closed()
""").assert_outcomes(passed=1)


def test_a_failure_names_row_imbalance_bands_and_verdict(suite):
    run = suite(f"""
def test_it(fvcheck_ledger):
    fvcheck_ledger("demo-coarse-0020.vtu", {BAR}, fluid=FLUID, walls=WALLS).assert_closed("momentum")
""")
    run.assert_outcomes(failed=1)
    run.stdout.fnmatch_lines(
        ["*ledger of 'box': 2 of * rows not closed", "*momentum-x: imbalance 1?.? %, ±data *verdict open"]
    )
    assert "def assert_closed" not in run.stdout.str()  # no code of ours in the way


def test_a_row_that_is_missing_fails(suite):
    run = suite(f"""
def test_it(fvcheck_ledger):
    fvcheck_ledger("demo-coarse.vtu", {BAR}, "mass", fluid=FLUID).assert_closed("heat")
""")
    run.assert_outcomes(failed=1)
    run.stdout.fnmatch_lines(["*has no row 'heat'*"])


def test_a_marked_test_passes_with_its_check_file(suite):
    suite("""
@pytest.mark.fvcheck("demo.toml")
def test_it(): pass

@pytest.mark.fvcheck("demo.toml")
def test_gate(fvcheck_gate): fvcheck_gate.assert_passed()
""").assert_outcomes(passed=2)


def test_a_marked_test_fails_with_its_check_file(suite):
    run = suite("""
@pytest.mark.fvcheck("early.toml")
def test_it(): pass

@pytest.mark.fvcheck("demo.toml", "gone.toml")
def test_missing(fvcheck_gate): fvcheck_gate.assert_passed()

def test_unmarked(fvcheck_gate): pass
""")
    run.assert_outcomes(failed=2, errors=1)
    run.stdout.fnmatch_lines(["*gate: exit status 1", "*gate: exit status 2", "*no such check file*"])


def test_the_plugin_loads_nothing_slow(suite):
    suite("""
def test_it():
    import subprocess, sys
    code = "import fvcheck.testing, sys; print(sorted(m for m in sys.modules if m in %r))"
    slow = ("numpy", "numba", "scipy", "fvcheck.gating", "fvcheck.flow")
    assert subprocess.check_output([sys.executable, "-c", code % (slow,)]).strip() == b"[]"
""").assert_outcomes(passed=1)
