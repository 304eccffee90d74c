"""Where an imbalance sits: blocks that tile the domain, and round windows around what stands out."""

from __future__ import annotations

from dataclasses import dataclass
from statistics import NormalDist
from typing import Any

import numpy as np

from fvcheck.diagnosis.cells import CellLedgers, Column
from fvcheck.diagnosis.tree import bisect
from fvcheck.diagnosis.volumes import (
    SAMPLING_DEVIATIONS,
    Blocks,
    Found,
    blocks_by_label,
    blocks_of,
    measure,
)

Array = np.ndarray

# A block stands out when its imbalance is beyond its resolution band, which no
# converged run of second order leaves, and so far beyond its sampling band that a
# single one by chance, among all that are looked at, is at most so likely.
_FALSE = 0.01

# Sampling bands that are asked for at least, however few blocks there are.
_BANDS = 1.5

# Radii of windows in cells, and the distance between their centres in radii.
_RADII, _SPACING = (2.5, 4.0, 6.5, 10.0, 16.0), 0.6

# So many regions are told apart at most.
_MOST = 8

# Spread: where blocks that stand out cover so much of the area, at a level of so many blocks.
_SPREAD, _TILES = 0.5, 64

# Along a boundary: so much of what stands out lies in cells beside it.
_ALONG = 0.7


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


@dataclass(frozen=True, eq=False)
class Place:
    """One row of a law: its hierarchy, what stands out, and how it lies.

    kind : "nowhere", "concentrated", "spread" or "along a patch"
    map : (m,) imbalance per area of each cell's smallest block; significance : (m,) in resolution bands
    """

    law: str
    component: str | None
    kind: str
    levels: tuple[Level, ...]
    regions: tuple[Region, ...]
    map: Array
    significance: Array
    tested: int


@dataclass(frozen=True, eq=False)
class Tiling:
    """Blocks to look at, the same for all laws: labels (m,) and blocks by level; round windows."""

    labels: list[Array]
    blocks: list[Blocks]
    windows: list[Blocks]

    @property
    def size(self) -> int:
        """How many blocks and windows there are."""
        return sum(len(some.size) for some in (*self.blocks, *self.windows))

    @classmethod
    def of(cls, ledgers: CellLedgers) -> Tiling:
        from scipy.spatial import cKDTree

        labels = bisect(ledgers.centres)
        blocks = [blocks_by_label(ledgers.edges, label, 2**number) for number, label in enumerate(labels)]
        tree, order = cKDTree(ledgers.centres), _walk(ledgers.centres)
        found = (_windows(ledgers, radius, tree, order) for radius in _RADII)
        windows = [window for window in found if window is not None]
        return cls(labels, blocks, windows)


def where(ledgers: CellLedgers, law: str, components: tuple[str | None, ...], tiling: Tiling) -> list[Place]:
    """Each component of a law."""
    column, shaken = ledgers.columns[law], ledgers.shaken.get(law)
    levels = [
        Level(label, measure(block, column, ledgers.outside, shaken))
        for label, block in zip(tiling.labels, tiling.blocks)
    ]
    seen = [measure(window, column, ledgers.outside, shaken) for window in tiling.windows]
    limit = family_limit(tiling.size * sum(each.edge.shape[2] for each in ledgers.columns.values()))
    return [
        _place(ledgers, law, component, c, column, shaken, levels, tiling.windows, seen, limit)
        for c, component in enumerate(components)
    ]


def family_limit(tests: int) -> float:
    """Sampling bands beyond which an imbalance counts, where so many are looked at.

    By Bonferroni's inequality (O. J. Dunn, Multiple comparisons among means, Journal
    of the American Statistical Association 56, 1961): each test has its share of the
    chance of a false one in all, `_FALSE`, both signs, normal errors. It holds however
    the tests depend on each other, and blocks overlap.
    """
    share = _FALSE / (2.0 * max(tests, 1))
    return max(_BANDS, -NormalDist().inv_cdf(share) / SAMPLING_DEVIATIONS)


def stands_out(found: Found, c: int, limit: float) -> Array:
    """(k,) bool."""
    size = np.abs(found.value[:, c])
    return (size > found.resolution[:, c]) & (size > limit * found.sampling[:, c])


def _place(
    ledgers: CellLedgers,
    law: str,
    component: str | None,
    c: int,
    column: Column,
    shaken: Array | None,
    levels: list[Level],
    windows: list[Blocks],
    seen: list[Found],
    limit: float,
) -> Place:
    areas = ledgers.areas
    density, significance = _map(levels, areas, c, limit)
    tested = sum(len(f.value) for f in seen) + sum(len(level.found.value) for level in levels)
    tiles = min(int(np.log2(_TILES)), len(levels) - 1)
    out = stands_out(levels[tiles].found, c, limit)
    covered = float(areas[out[levels[tiles].labels]].sum() / areas.sum())
    if covered > _SPREAD:
        regions = _quarters(ledgers, law, component, c, levels[min(2, len(levels) - 1)], limit)
        return Place(law, component, "spread", tuple(levels), regions, density, significance, tested)
    regions = _peel(ledgers, law, component, c, column, shaken, windows, seen, limit)
    kind = "nowhere" if not regions else "concentrated"
    if regions and sum(r.share for r in regions if r.patch) > _ALONG:
        kind = "along a patch"
    return Place(law, component, kind, tuple(levels), regions, density, significance, tested)


def _map(levels: list[Level], areas: Array, c: int, limit: float) -> tuple[Array, Array]:
    """Per cell, of the smallest block that stands out, or of the smallest there is."""
    density, ratio = _per_cell(levels[-1], areas, c)
    done = stands_out(levels[-1].found, c, limit)[levels[-1].labels]
    for level in levels[-2::-1]:
        here = stands_out(level.found, c, limit)[level.labels] & ~done
        if here.any():
            wider, stronger = _per_cell(level, areas, c)
            density[here], ratio[here] = wider[here], stronger[here]
            done |= here
    return density, ratio


def _per_cell(level: Level, areas: Array, c: int) -> tuple[Array, Array]:
    """(m,) imbalance per area, and in resolution bands, of each cell's block."""
    value, band = level.found.value[:, c], level.found.resolution[:, c]
    ratio = np.abs(value) / np.where(band > 0.0, band, np.inf)
    return (value / np.bincount(level.labels, areas))[level.labels], ratio[level.labels]


def _windows(ledgers: CellLedgers, radius: float, tree: Any, order: Array) -> Blocks | None:
    """Sets of neighbouring cells, about as many as a disc of so many cells in radius holds."""
    from scipy import sparse

    centres = ledgers.centres
    n, k = len(centres), int(np.pi * radius**2)
    if k > 0.1 * n:
        return None
    # Cells far apart in number lie anywhere; a walk through the plane picks evenly.
    step = max(1, int((_SPACING * radius) ** 2))
    chosen = order[step // 2 :: step]
    _, near = tree.query(centres[chosen], k=k, workers=2)
    rows = np.repeat(np.arange(len(chosen)), k)
    shape = (len(chosen), n)
    return blocks_of(
        ledgers.edges, sparse.csr_matrix((np.ones(len(rows)), (rows, np.asarray(near).ravel())), shape=shape)
    )


def _walk(centres: Array) -> Array:
    """Cells along a curve that visits neighbours soon: that of the bits of both coordinates in turn."""
    low, high = centres.min(axis=0), centres.max(axis=0)
    grid = ((centres - low) / np.maximum(high - low, 1e-300) * 65535).astype(np.int64)
    code = np.zeros(len(centres), np.int64)
    for bit in range(16):
        for c in range(2):
            code |= ((grid[:, c] >> bit) & 1) << (2 * bit + c)
    return np.argsort(code, kind="stable")


def _peel(
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
    alone = _cell_values(ledgers, column, c)
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


def _cell_values(ledgers: CellLedgers, column: Column, c: int) -> Array:
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


def _quarters(
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
