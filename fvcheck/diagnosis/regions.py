"""Places that carry an imbalance: what stands out, moved and widened until it holds all of it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from fvcheck.diagnosis.cells import CellLedgers, Column
from fvcheck.diagnosis.volumes import (
    Blocks,
    Found,
    blocks_by_label,
    measure,
)

Array = np.ndarray

# So many regions are told apart at most.
_MOST = 8


@dataclass(frozen=True)
class Region:
    """A place that carries an imbalance.

    size : diameter of the disc of the same spread [m]; amount and band (sampling)
        in the law's unit; share : of all that stands out; significance : amount in bands
    patch : of the boundary that it lies along, None for none
    """

    law: str
    component: str | None
    centre: tuple[float, float]
    size: float
    amount: float
    band: float
    share: float
    significance: float
    patch: str | None = None


@dataclass(frozen=True, eq=False)
class Level:
    """One level of the hierarchy: labels (m,) of the cells, and what was found for each block."""

    labels: Array
    found: Found


def stands_out(found: Found, c: int, limit: float) -> Array:
    """(k,) bool."""
    size = np.abs(found.value[:, c])
    return (size > found.resolution[:, c]) & (size > limit * found.sampling[:, c])


def peel(
    ledgers: CellLedgers,
    law: str,
    component: str | None,
    c: int,
    column: Column,
    shaken: Array | None,
    windows: list[Blocks],
    seen: list[Found],
    limit: float,
) -> tuple[Region, ...]:
    """The window that stands out most, measured and taken away, then the next."""
    n = len(ledgers.centres)
    # Imbalance of each cell alone, to weigh places with.
    alone = cell_values(ledgers, column, c)
    taken = np.zeros(n, bool)
    found: list[tuple[Array, Array, float, float, float]] = []
    candidates = [np.flatnonzero(stands_out(f, c, limit)) for f in seen]
    while len(found) < _MOST:
        best, which = 0.0, None
        for number, (window, f) in enumerate(zip(windows, seen)):
            rows = candidates[number]
            if len(rows) == 0:
                continue
            if taken.any():
                rows = rows[(window.cells[rows] @ taken) == 0]
                candidates[number] = rows
            if len(rows) == 0:
                continue
            score = np.abs(f.value[rows, c]) / f.resolution[rows, c]
            at = int(np.argmax(score))
            if score[at] > best:
                best, which = float(score[at]), (number, rows[at])
        if which is None:
            break
        start = windows[which[0]].cells[which[1]].indices
        cells, centre, size = _settle(ledgers, alone, start, taken)
        got = measure(_single(ledgers, cells), column, ledgers.outside, shaken)
        found.append((cells, centre, size, float(got.value[0, c]), float(got.sampling[0, c])))
        taken[_around(ledgers, cells)] = True
    total = max(sum(abs(f[3]) for f in found), 1e-300)
    return tuple(
        Region(
            law,
            component,
            (float(centre[0]), float(centre[1])),
            size,
            amount,
            band,
            abs(amount) / total,
            abs(amount) / max(band, 1e-300),
            _patch_beside(ledgers, cells),
        )
        for cells, centre, size, amount, band in sorted(found, key=lambda f: -abs(f[3]))
    )


def cell_values(ledgers: CellLedgers, column: Column, c: int) -> Array:
    edges = ledgers.edges
    flux = column.edge[-1][:, c]
    n = len(ledgers.centres)
    inner = edges.other >= 0
    out = np.bincount(edges.owner, flux, n) - np.bincount(edges.other[inner], flux[inner], n)
    return out if column.cell is None else out + column.cell[-1][:, c]


def _settle(ledgers: CellLedgers, alone: Array, start: Array, taken: Array) -> tuple[Array, Array, float]:
    """Cells, centre and size of what stands out in a window, moved and widened until it holds all of it."""
    centres = ledgers.centres
    cells = start
    centre, size = _moments(centres[cells], alone[cells])
    for _ in range(8):
        spacing = np.sqrt(np.median(ledgers.areas[cells]))
        reach = 0.6 * size + 2.5 * spacing
        wider = np.flatnonzero((np.hypot(*(centres - centre).T) < reach) & ~taken)
        if len(wider) < 4 or np.array_equal(wider, cells):
            break
        cells = wider
        last, (centre, size) = centre, _moments(centres[cells], alone[cells])
        if np.hypot(*(centre - last)) < 0.05 * spacing:
            break
    return cells, centre, size


def _moments(places: Array, amounts: Array) -> tuple[Array, float]:
    """Centre, and diameter of the disc of the same second moment; what counts the other way is left out."""
    weight = np.maximum(amounts * np.sign(amounts.sum()), 0.0)
    total = weight.sum()
    if total <= 0.0:
        return places.mean(axis=0), float(2.0 * np.sqrt(2.0 * np.mean(np.var(places, axis=0))))
    centre = weight @ places / total
    spread = float(weight @ np.sum((places - centre) ** 2, axis=1) / total)
    return centre, 2.0 * np.sqrt(2.0 * spread)


def _single(ledgers: CellLedgers, cells: Array) -> Blocks:
    labels = np.full(len(ledgers.centres), -1)
    labels[cells] = 0
    return blocks_by_label(ledgers.edges, labels, 1)


def _around(ledgers: CellLedgers, cells: Array) -> Array:
    """The cells and three rings around, where the reconstruction still feels what happens there."""
    mark = np.zeros(len(ledgers.centres), bool)
    mark[cells] = True
    edges = ledgers.edges
    inner = np.flatnonzero(edges.other >= 0)
    a, b = edges.owner[inner], edges.other[inner]
    for _ in range(4):
        touched = mark[a] | mark[b]
        mark[a[touched]] = True
        mark[b[touched]] = True
    return np.flatnonzero(mark)


def _patch_beside(ledgers: CellLedgers, cells: Array) -> str | None:
    """The patch that most of the cells' boundary edges belong to, where they touch it."""
    edges = ledgers.edges
    inside = np.zeros(len(ledgers.centres), bool)
    inside[cells] = True
    beside = edges.patch[(edges.other < 0) & inside[edges.owner]]
    beside = beside[beside >= 0]
    if len(beside) < 2:
        return None
    return ledgers.flow.mesh.boundary.names[int(np.argmax(np.bincount(beside)))]


def tiles_as_regions(
    ledgers: CellLedgers, law: str, component: str | None, c: int, level: Level, limit: float
) -> tuple[Region, ...]:
    """The blocks of a level that stand out, as regions."""
    areas, found = ledgers.areas, level.found
    count = len(found.value)
    totals = np.bincount(level.labels, areas, count)
    x, y = (np.bincount(level.labels, areas * ledgers.centres[:, k], count) / totals for k in range(2))
    rows = np.flatnonzero(stands_out(found, c, limit))
    sizes = np.abs(found.value[:, c])
    whole = max(float(sizes.sum()), 1e-300)
    return tuple(
        Region(
            law,
            component,
            (float(x[k]), float(y[k])),
            float(2.0 * np.sqrt(totals[k] / np.pi)),
            float(found.value[k, c]),
            float(found.sampling[k, c]),
            float(sizes[k] / whole),
            float(sizes[k] / max(found.sampling[k, c], 1e-300)),
        )
        for k in rows[np.argsort(-sizes[rows])]
    )
