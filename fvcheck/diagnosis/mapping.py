"""The imbalance of every cell as a picture's data: a VTU of cells with values."""

from __future__ import annotations

from pathlib import Path

import numpy as np

from fvcheck.diagnosis.result import Diagnosis
from fvcheck.vtkfile import polygons
from fvcheck.wholefile import write_whole

Array = np.ndarray


def maps_of(found: Diagnosis) -> dict[str, Array]:
    """Per law and component ``imbalance_per_area_…`` and ``significance_…`` (in resolution bands) at cells.

    Of each cell's smallest block that stands out; NaN outside the region that was looked at.
    """
    out = {}

    def spread(values: Array) -> Array:
        whole = np.full(found.cells.flow.mesh.n_cells, np.nan)
        whole[found.cells.cells] = values
        return whole

    for place in found.where:
        name = place.law if place.component is None else f"{place.law}-{place.component}"
        out[f"imbalance_per_area_{name}"] = spread(place.map)
        out[f"significance_{name}"] = spread(place.significance)
    return out


def write_map(path: str | Path, found: Diagnosis) -> None:
    """Write `maps_of` as a VTU; SetupError where the file cannot be written."""
    mesh = found.cells.flow.mesh
    write_whole(path, polygons(mesh.points, mesh.offsets, mesh.nodes, maps_of(found)), "map")
