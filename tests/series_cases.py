"""Runs of known flows as series of snapshots, in memory."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path

import numpy as np
from core_cases import FIELDS, piece_of
from exact import ExactFlow
from exact_data import flow_data
from trial_meshes import Cells

from fvcheck.formats.check import check_piece
from fvcheck.mesh.piece import Export


def export_of(load: Callable[[float], tuple[Cells, dict]], times: Sequence[float], where="point") -> Export:
    """A series whose ``load(time)`` gives the mesh and the data by array name at each time."""

    def pieces(step):
        cells, data = load(times[step])
        kind = "point_data" if where == "point" else "cell_data"
        spatial = {
            name: np.column_stack([value, np.zeros(len(value))]) if value.ndim == 2 else value
            for name, value in data.items()
        }
        return [check_piece(piece_of(cells, **{kind: spatial}), "series")]

    return Export(Path("series"), "arrays", pieces, tuple(float(t) for t in times))


def series_of(
    exact: Callable[[float], ExactFlow], cells: Cells, times: Sequence[float], where="point"
) -> Export:
    """The snapshots of a closed-form flow on one mesh."""

    def load(time):
        values = flow_data(exact(time), cells, where)
        return cells, {FIELDS[role]: value for role, value in values.items()}

    return export_of(load, times, where)
