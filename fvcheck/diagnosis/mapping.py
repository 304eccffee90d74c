"""The imbalance of every cell as a picture's data: a VTK file (VTU, ASCII XML) of cells with values."""

from __future__ import annotations

from collections.abc import Iterable
from pathlib import Path

import numpy as np

from fvcheck.diagnosis.diagnosing import Diagnosis
from fvcheck.errors import SetupError

Array = np.ndarray

_POLYGON = 7


def write_map(path: str | Path, found: Diagnosis) -> None:
    """Per law and component ``imbalance_per_area_…`` and ``significance_…`` (in resolution bands) at cells.

    Of each cell's smallest block that stands out. SetupError where the file cannot be written.
    """
    mesh = found.cells.flow.mesh
    points = np.column_stack([mesh.points, np.zeros(mesh.n_points)])
    data = {}
    for place in found.where:
        name = place.law if place.component is None else f"{place.law}-{place.component}"
        data[f"imbalance_per_area_{name}"] = place.map
        data[f"significance_{name}"] = place.significance
    lines = [
        '<?xml version="1.0"?>',
        '<VTKFile type="UnstructuredGrid" version="0.1" byte_order="LittleEndian">',
        "<UnstructuredGrid>",
        f'<Piece NumberOfPoints="{mesh.n_points}" NumberOfCells="{mesh.n_cells}">',
        "<Points>",
        _array("points", "Float64", points.ravel(), 3),
        "</Points>",
        "<Cells>",
        _array("connectivity", "Int64", mesh.nodes),
        _array("offsets", "Int64", mesh.offsets[1:]),
        _array("types", "UInt8", np.full(mesh.n_cells, _POLYGON)),
        "</Cells>",
        "<CellData>",
        *(_array(name, "Float64", values) for name, values in data.items()),
        "</CellData>",
        "</Piece>",
        "</UnstructuredGrid>",
        "</VTKFile>",
    ]
    try:
        Path(path).write_text("\n".join(lines) + "\n", encoding="utf-8")
    except OSError as error:
        raise SetupError(f"the map cannot be written: {error.strerror}", where=path) from None


def _array(name: str, kind: str, values: Iterable[float] | Array, components: int = 1) -> str:
    words = np.asarray(values).tolist()
    text = " ".join(repr(word) for word in words)
    more = f' NumberOfComponents="{components}"' if components > 1 else ""
    return f'<DataArray type="{kind}" Name="{name}"{more} format="ascii">\n{text}\n</DataArray>'
