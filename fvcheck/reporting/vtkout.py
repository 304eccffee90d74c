"""Surfaces with flux densities as VTP, quantities of cells as VTU, for any viewer that reads VTK's XML."""

from __future__ import annotations

import re
from collections.abc import Mapping, Sequence
from pathlib import Path

import numpy as np

from fvcheck.diagnosis.cells import CellLedgers, cell_ledgers
from fvcheck.diagnosis.diagnosing import LAWS as DIAGNOSED
from fvcheck.diagnosis.mapping import maps_of
from fvcheck.laws import Law, MissingData
from fvcheck.overlay.pieces import DRAWN
from fvcheck.reporting.border import Along
from fvcheck.reporting.gathering import Gathered
from fvcheck.vtkfile import polygons, segments
from fvcheck.wholefile import write_whole

Array = np.ndarray


def write_vtk(folder: Path, found: Gathered, along: Mapping[str, Sequence[Along]]) -> list[Path]:
    """surface-NAME.vtp for each surface, and cells.vtu; their paths."""
    out = []
    names = _file_names(list(along))
    for name, rows in along.items():
        if rows and len(rows[0].border.order):
            out.append(folder / f"surface-{names[name]}.vtp")
            write_whole(out[-1], _surface(rows))
    out.append(folder / "cells.vtu")
    write_whole(out[-1], _cells(found, names))
    return out


def _file_names(names: Sequence[str]) -> dict[str, str]:
    """Names that are safe in any file system, each once."""
    out: dict[str, str] = {}
    for name in names:
        safe = re.sub(r"[^A-Za-z0-9]+", "-", name).strip("-")[:60] or "surface"
        number, unique = 2, safe
        while unique.lower() in {known.lower() for known in out.values()}:
            unique, number = f"{safe}-{number}", number + 1
        out[name] = unique
    return out


def _surface(rows: Sequence[Along]) -> bytes:
    """Pieces as lines in walking order: per law flux and bands per metre, degree, patch, normal."""
    border = rows[0].border
    n, overlay = len(border.order), border.overlay
    ends = np.stack([overlay.start[border.order], overlay.end[border.order]], axis=1)
    lengths = np.maximum(np.diff(border.at), 1e-300)
    data: dict[str, Array] = {
        "along": 0.5 * (border.at[1:] + border.at[:-1]),
        "length": np.diff(border.at),
        "normal": np.column_stack([border.normal, np.zeros(n)]),
        "patch": border.patch.astype(np.int64),
        "drawn": (border.patch == DRAWN).astype(np.uint8),
        "cell": overlay.cell[border.order].astype(np.int64),
        "degree": rows[0].degree.astype(np.int64),
    }
    for row in rows:
        data[f"flux_density_{row.label}"] = row.density
        data[f"sampling_band_density_{row.label}"] = row.sampling / lengths
        data[f"resolution_band_density_{row.label}"] = row.resolution / lengths
    return segments(ends, data)


def _cells(found: Gathered, names: Mapping[str, str]) -> bytes:
    """The mesh with its fields, what the surfaces enclose, degrees used, imbalance per cell."""
    flow = found.flow
    mesh = flow.mesh
    data: dict[str, Array] = {"area": mesh.areas}
    points: dict[str, Array] = {}
    for role, field in flow.fields.items():
        values = np.asarray(field.values, float)
        (points if field.location == "point" else data)[f"field_{role}"] = values
    for ledger, volume in zip(found.result.ledgers, found.volumes):
        overlay, name = volume.overlay, names[ledger.name]
        degree = np.zeros(mesh.n_cells, np.int64)
        degree[volume.line_cells] = volume.line.supported
        data[f"degree_{name}"] = degree
        if overlay.closed:
            inside = np.zeros(mesh.n_cells)
            inside[overlay.whole] = 1.0
            cut = np.bincount(overlay.corner_cell, overlay.corner_areas, mesh.n_cells)
            data[f"share_inside_{name}"] = inside + cut / mesh.areas
    for name, values in _imbalances(found).items():
        data[name] = values
    return polygons(mesh.points, mesh.offsets, mesh.nodes, data, points)


def _imbalances(found: Gathered) -> dict[str, Array]:
    """Per law: net outflow less source of each cell by itself, and the maps of a diagnosis."""
    out: dict[str, Array] = {}
    laws = [law for law in found.laws if law.name in DIAGNOSED]
    try:
        groups = [(laws, cell_ledgers(found.flow, laws, {}))] if laws else []
    except MissingData:
        groups = [([law], ledgers) for law in laws if (ledgers := _one(found, law)) is not None]
    for held, ledgers in groups:
        for law in held:
            values = cell_imbalance(ledgers, law.name)
            for c, component in enumerate(law.components):
                name = law.name if component is None else f"{law.name}-{component}"
                out[f"imbalance_{name}"] = values[:, c]
    if found.diagnosis is not None:
        out |= maps_of(found.diagnosis)
    return out


def _one(found: Gathered, law: Law) -> CellLedgers | None:
    """Ledgers of one law; None where its data are missing."""
    try:
        return cell_ledgers(found.flow, [law], {})
    except MissingData:
        return None


def cell_imbalance(ledgers: CellLedgers, law: str) -> Array:
    """(m, c) imbalance of each cell, by the degree that the data support; inner edges cancel in sums."""
    column, edges = ledgers.columns[law], ledgers.edges
    m = ledgers.flow.mesh.n_cells
    flux = column.edge[-1]
    inner = edges.other >= 0
    out = np.column_stack(
        [
            np.bincount(edges.owner, f, m) - np.bincount(edges.other[inner], f[inner], m)
            for f in flux.T
        ]
    )  # fmt: skip
    return out if column.cell is None else out + column.cell[-1]
