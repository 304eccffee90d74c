"""Where an imbalance sits: what stands out among all blocks and windows, and how it lies."""

from __future__ import annotations

from dataclasses import dataclass
from statistics import NormalDist

import numpy as np

from fvcheck.diagnosis.cells import CellLedgers, Column
from fvcheck.diagnosis.regions import Level, Region, peel, stands_out, tiles_as_regions
from fvcheck.diagnosis.tiling import Tiling
from fvcheck.diagnosis.volumes import (
    SAMPLING_DEVIATIONS,
    Blocks,
    Found,
    measure,
)

Array = np.ndarray

# A block stands out when its imbalance is beyond its resolution band, which no
# converged run of second order leaves, and so far beyond its sampling band that a
# single one by chance, among all that are looked at, is at most so likely.
_FALSE = 0.01

# Sampling bands that are asked for at least, however few blocks there are.
_BANDS = 1.5

# Spread: where blocks that stand out cover so much of the area, at a level of so many blocks.
_SPREAD, _TILES = 0.5, 64

# Along a boundary: so much of what stands out lies in cells beside it.
_ALONG = 0.7


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
        regions = tiles_as_regions(ledgers, law, component, c, levels[min(2, len(levels) - 1)], limit)
        return Place(law, component, "spread", tuple(levels), regions, density, significance, tested)
    regions = peel(ledgers, law, component, c, column, shaken, windows, seen, limit)
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
