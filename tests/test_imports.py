"""Imports run downwards only, kernels need numpy and numba alone, nothing slow loads at the start."""

import ast
import subprocess
import sys
import tomllib
from pathlib import Path

import pytest

import fvcheck

PACKAGE = Path(fvcheck.__file__).parent
ROOT = PACKAGE.parent

# From the ground up; a room may import from its own row and from those before it.
ROWS = [
    ["errors", "hints", "version", "pages", "notebook", "wholefile", "vtkfile", "tasks"],
    ["kernels"],
    ["mesh"],
    ["formats"],
    [
        "flow",
        "laterflow",
        "flowfields",
        "revolution",
        "rim",
        "walls",
        "fields",
        "fieldnames",
        "arrays",
        "fluid",
    ],
    ["surfaces", "overlay"],
    ["sampling"],
    ["laws"],
    [
        "ledger",
        "bands",
        "verdict",
        "entries",
        "inside",
        "interior",
        "leftout",
        "volume",
        "many",
        "balancing",
        "opening",
        "ports",
        "plausible",
        "sources",
        "checktable",
        "checklimits",
        "checkmodel",
    ],
    [
        "checkfile",
        "settings",
        "inspection",
        "starting",
        "demo",
        "series",
        "timeweights",
        "content",
        "evolution",
        "trends",
        "overtime",
        "recording",
        "spreading",
        "timeseries",
        "following",
        "convergence",
        "meshstudy",
        "routes",
        "forceseries",
        "diagnosis",
    ],
    ["cli", "text", "charts", "reporting", "gating", "testing", "jsonout", "__main__"],
]
ROW = {room: number for number, rooms in enumerate(ROWS) for room in rooms}

FILES = sorted(PACKAGE.rglob("*.py"))
SLOW = {"pyvista", "vtkmodules", "vtk", "numba", "scipy", "matplotlib", "meshio", "h5py", "shapely"}


def room_of(path: Path) -> str:
    return path.relative_to(PACKAGE).with_suffix("").parts[0]


def imports(tree: ast.AST) -> set[str]:
    """Full names of all modules imported anywhere below, names imported from them included."""
    found = set()
    for node in ast.walk(tree):
        if isinstance(node, ast.Import):
            found |= {alias.name for alias in node.names}
        elif isinstance(node, ast.ImportFrom):
            assert node.level == 0, "imports are written in full"
            found |= {node.module, *(f"{node.module}.{alias.name}" for alias in node.names)}
    return found


def at_start(tree: ast.Module) -> set[str]:
    """Modules imported when the module itself is."""
    top = [node for node in tree.body if isinstance(node, ast.Import | ast.ImportFrom)]
    return imports(ast.Module(top, []))


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_a_module_imports_from_its_own_room_or_below(path):
    if path == PACKAGE / "__init__.py":
        return  # loads names on first use, see below
    room = room_of(path)
    assert room in ROW, f"{room} has no place in ROWS yet"
    for name in imports(ast.parse(path.read_text(encoding="utf-8"))):
        parts = name.split(".")
        if parts[0] == "fvcheck" and len(parts) > 1 and parts[1] in ROW:
            assert ROW[parts[1]] <= ROW[room], f"{room} imports {name}"


@pytest.mark.parametrize("path", sorted((PACKAGE / "kernels").glob("*.py")), ids=lambda path: path.name)
def test_a_kernel_imports_numpy_and_numba_only(path):
    for name in imports(ast.parse(path.read_text(encoding="utf-8"))):
        own = name.startswith("fvcheck.kernels")
        # The folder of the compiled loops is a matter of the system.
        system = path.name == "cache.py" and name in sys.stdlib_module_names
        assert own or system or name.split(".")[0] in {"numpy", "numba", "math", "typing", "__future__"}, name


@pytest.mark.parametrize("path", FILES, ids=lambda path: str(path.relative_to(PACKAGE)))
def test_slow_libraries_are_imported_where_they_are_used(path):
    if room_of(path) == "kernels":
        return
    for name in at_start(ast.parse(path.read_text(encoding="utf-8"))):
        assert name.split(".")[0] not in SLOW, name
        if room_of(path) != "kernels":
            assert not name.startswith("fvcheck.kernels."), f"{name} compiles when imported"


@pytest.mark.parametrize(
    "arguments",
    [["--help"], ["--version"], ["balance", "--help"], ["forces", "--help"], ["explain", "bands"]],
)
def test_help_and_version_come_without_slow_imports(arguments):
    code = (
        "import sys; from fvcheck.cli.app import run; status = run(sys.argv[1:]);"
        "print('|', *{name.partition('.')[0] for name in sys.modules}); sys.exit(status)"
    )
    done = subprocess.run([sys.executable, "-c", code, *arguments], capture_output=True, text=True, cwd=ROOT)
    assert done.returncode == 0, done.stderr
    loaded = set(done.stdout.rpartition("|")[2].split())
    assert "fvcheck" in loaded
    assert not loaded & {*SLOW, "numpy", "pandas"}


def test_importing_fvcheck_loads_nothing_else():
    code = "import fvcheck, sys; print(sorted(m for m in sys.modules if m.startswith(('fvcheck', 'numpy'))))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, cwd=ROOT, check=True)
    assert done.stdout.strip() == "['fvcheck', 'fvcheck.version']"


def test_the_public_names_are_these():
    assert fvcheck.__all__ == [
        "__version__",
        "ControlSurface",
        "Diagnosis",
        "Estimate",
        "FieldError",
        "Flow",
        "Fluid",
        "Forces",
        "FormatError",
        "FvcheckError",
        "GateResult",
        "History",
        "Inspection",
        "Law",
        "Ledger",
        "MeshError",
        "Motion",
        "Reference",
        "Report",
        "Result",
        "Row",
        "Series",
        "SetupError",
        "Source",
        "State",
        "Study",
        "SurfaceError",
        "balance",
        "balance_all",
        "diagnose",
        "follow",
        "forces",
        "gate",
        "grid_convergence",
        "history",
        "inspect_file",
        "open_flow",
        "open_series",
        "register",
        "report",
        "study",
    ]


def test_every_public_name_is_there():
    for name in fvcheck.__all__:
        assert getattr(fvcheck, name) is not None


def test_the_packages_that_are_installed_are_the_folders():
    project = tomllib.loads((ROOT / "pyproject.toml").read_text(encoding="utf-8"))
    folders = {".".join(path.parent.relative_to(ROOT).parts) for path in PACKAGE.rglob("__init__.py")}
    assert set(project["tool"]["setuptools"]["packages"]) == folders | {"fvcheck.meshes"}


def test_modules_are_short():
    long = {str(path.relative_to(ROOT)): len(path.read_text(encoding="utf-8").splitlines()) for path in FILES}
    # Most under 300 lines, none beyond twice that: a longer one holds more than one idea.
    assert not {name: lines for name, lines in long.items() if lines > 600}
    assert sum(lines > 300 for lines in long.values()) <= 0.1 * len(long)
