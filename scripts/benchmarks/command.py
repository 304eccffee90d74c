"""The whole command against a bare VTK read of the same file, each in a fresh process."""

from __future__ import annotations

from benchmarks.cases import CIRCLE, make_grid, told
from benchmarks.plain import READ
from benchmarks.section import Case, Ratio, Section
from benchmarks.timing import process


def measure(case: Case) -> dict[str, float]:
    """``fvcheck balance`` on the file and on a small one, and the reader alone; the file's bytes once."""
    path, small = case.folder / "case.vtu", case.folder / "small.vtu"
    make_grid(case.kind, case.cells).save(path)
    make_grid(case.kind, 3000).save(small)
    figures = {}
    figures["first verdict"], figures["first verdict MB"] = process(told(small, CIRCLE))
    figures["command"], figures["command MB"] = process(told(path, CIRCLE))
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
