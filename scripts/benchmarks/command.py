"""The whole command against a bare VTK read of the same file, each in a fresh process."""

from __future__ import annotations

from benchmarks.cases import CIRCLE, make_grid
from benchmarks.plain import READ
from benchmarks.section import Case, Ratio, Section
from benchmarks.timing import process


def measure(case: Case) -> dict[str, float]:
    """``fvcheck balance`` with three laws, and the reader alone; the file's bytes once."""
    path = case.folder / "case.vtu"
    make_grid(case.kind, case.cells).save(path)
    surface = f"circle{CIRCLE}".replace(" ", "")
    told = ["--density", "1", "--viscosity", "0.01", "--specific-heat", "1000", "--conductivity", "0.1"]
    command = ["-m", "fvcheck", "balance", str(path), "-s", surface, *told, "-q"]
    figures = {}
    figures["command"], figures["command MB"] = process([*command, "--law", "mass,momentum,heat"])
    read = ["-c", READ.format("vtkXMLUnstructuredGridReader"), str(path)]
    figures["vtk read"], figures["vtk read MB"] = process(read)
    figures["bytes"], _ = process(["-c", "import sys; open(sys.argv[1], 'rb').read()", str(path)])
    figures["file MB"] = path.stat().st_size / 2**20
    return figures


SECTION = Section(
    "command",
    measure,
    (
        Ratio("command / read", "command", "vtk read", "≤ 1.5"),
        Ratio("memory / read", "command MB", "vtk read MB", "≤ 1.5"),
        Ratio("command / bytes", "command", "bytes"),
    ),
)
