"""The ledgers of the cells in a chosen region."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from fvcheck.diagnosis.cells import CellLedgers, Column, MeshEdges
from fvcheck.errors import SurfaceError
from fvcheck.mesh.mesh import Mesh
from fvcheck.overlay.overlay import lay_over
from fvcheck.overlay.pieces import DRAWN
from fvcheck.surfaces import ControlSurface

Array = np.ndarray

# Fewer cells cannot be divided into volumes that say anything.
_LEAST = 24


def cells_in(mesh: Mesh, region: ControlSurface) -> Array:
    """(m,) the cells that lie wholly within a closed surface; SurfaceError for too few of them."""
    placed = region.resolve(mesh)
    if not placed.closed:
        raise SurfaceError(
            "a region is the inside of a closed surface", where=region.text, mend="Give a box or the like."
        )
    cells = np.sort(lay_over(mesh, placed).whole)
    if len(cells) < _LEAST:
        raise SurfaceError(
            f"the region holds {len(cells)} whole cells", where=region.text, mend="Make it larger."
        )
    return cells


def part_of(ledgers: CellLedgers, cells: Array) -> tuple[CellLedgers, Callable[[Column], Column]]:
    """The ledgers of some cells, renumbered, and what does the same to a further column of all cells."""
    edges, n = ledgers.edges, len(ledgers.centres)
    number = np.full(n + 1, -1)
    number[cells] = np.arange(len(cells))
    owner, other = number[edges.owner], number[edges.other]  # −1, for none, is the last
    kept = np.flatnonzero((owner >= 0) | (other >= 0))
    owner, other = owner[kept], other[kept]
    turned = owner < 0
    cut = (other < 0) & (edges.other[kept] >= 0) | turned
    sign = np.where(turned, -1.0, 1.0)[:, None]

    def part(column: Column) -> Column:
        cell = None if column.cell is None else column.cell[:, cells]
        return Column(column.edge[:, kept] * sign, cell)

    start, end = edges.start[kept], edges.end[kept]
    inner = MeshEdges(
        start=np.where(turned, end, start),
        end=np.where(turned, start, end),
        triangle=edges.triangle[kept],
        owner=np.where(turned, other, owner),
        other=np.where(turned, -1, other),
        patch=np.where(cut, DRAWN, edges.patch[kept]),
    )
    parts = {law: {name: part(c) for name, c in of_law.items()} for law, of_law in ledgers.parts.items()}
    smaller = replace(
        ledgers,
        edges=inner,
        columns={law: part(column) for law, column in ledgers.columns.items()},
        parts=parts,
        terms={name: part(column) for name, column in ledgers.terms.items()},
        outside=ledgers.outside[kept],
        shaken={law: moved[:, kept] * sign for law, moved in ledgers.shaken.items()},
        magnitude={law: size[kept] for law, size in ledgers.magnitude.items()},
        centres=ledgers.centres[cells],
        cells=ledgers.cells[cells],
    )
    return smaller, part
