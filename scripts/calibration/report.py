"""Tables of the study, and what misses its requirement."""

from __future__ import annotations

import itertools
from collections.abc import Iterable, Sequence

import numpy as np

from calibration.measure import PLANTED, TIGHT

# What must be reached.
COVERAGE, COVERAGE_UNDER = 0.99, 0.95
GAIN, GAIN_FINE = 10.0, 30.0
WIDTH = 30.0
FOUND = 0.95
FALSE_ALARMS = 1 / 200

# Median mass imbalance by degree 3 that an early study reached: field, mesh,
# location, size in the suite nearest below the one of that study -> limit.
FLOOR = {
    ("kovasznay", "triangles", "point", "coarse"): 9.4e-5,
    ("taylor-green", "triangles", "point", "under-resolved"): 3.8e-3,
    ("taylor-green", "triangles", "point", "middle"): 1.7e-4,
    ("cylinder", "triangles", "point", "middle"): 2.7e-6,
    ("shear-layer", "triangles", "point", "under-resolved"): 1.0e-4,
    ("taylor-green", "triangles", "average", "middle"): 8.5e-5,
}

_CELL = ("field", "mesh", "location", "row")

_COLUMNS = (
    ("row", "row", "{:<11}"),
    ("median_1", "deg 1", "{:8.1e}"),
    ("median_2", "deg 2", "{:8.1e}"),
    ("median_3", "deg 3", "{:8.1e}"),
    ("median", "error", "{:8.1e}"),
    ("p95", "95 %", "{:8.1e}"),
    ("band", "band", "{:8.1e}"),
    ("resolution_band", "res.band", "{:8.1e}"),
    ("coverage", "cover", "{:6.3f}"),
    ("worst_ratio", "worst", "{:6.2f}"),
    ("band_over_error", "b/e", "{:6.1f}"),
    ("gain", "gain", "{:7.1f}"),
    ("open", "open", "{:4d}"),
    ("degree_3_share", "deg3", "{:5.2f}"),
    ("planted_found", "0.5 %", "{:5.2f}"),
    ("planted_able", "able", "{:4d}"),
    ("planted_found_able", "of these", "{:8d}"),
    ("smallest_found", "smallest", "{:8.4f}"),
)


def header() -> str:
    """Names of the columns of `line`."""
    widths = [len(form.format("" if form.startswith("{:<") else 0)) for _, _, form in _COLUMNS]
    return " ".join(f"{title:>{width}}" for (_, title, _), width in zip(_COLUMNS, widths))


def line(record: dict) -> str:
    """One record as a row of the table."""
    return " ".join(form.format(record[key]) if key in record else "" for key, _, form in _COLUMNS).rstrip()


def _grouped(records: Iterable[dict], *keys: str) -> Iterable[tuple[tuple, list[dict]]]:
    def key(record):
        return tuple(record[k] for k in keys)

    for group, members in itertools.groupby(sorted(records, key=key), key):
        yield group, list(members)


def misses(records: Sequence[dict]) -> list[str]:
    """What does not reach its requirement, with its numbers."""
    groups = list(_grouped(records, "field", "mesh", "location", "row"))
    return [
        *itertools.chain.from_iterable(_coverage(" · ".join(key), members) for key, members in groups),
        *itertools.chain.from_iterable(
            _widths_and_alarms(" · ".join(key), members) for key, members in groups
        ),
        *itertools.chain.from_iterable(_plants_and_floor(record) for record in records),
        *_gains(records),
    ]


def _coverage(cell: str, members: list[dict]) -> Iterable[str]:
    for resolved, least in ((True, COVERAGE), (False, COVERAGE_UNDER)):
        here = [r for r in members if r["resolved"] == resolved]
        count = sum(r["count"] for r in here)
        if count and (share := sum(r["covered"] for r in here) / count) < least:
            worst = max(here, key=lambda r: r["worst_ratio"])
            sizes = ", ".join(f"{r['size']}/{r['precision'][5:]} {r['coverage']:.3f}" for r in here)
            yield (
                f"coverage {share:.4f} < {least} ({'resolved' if resolved else 'under-resolved'}): {cell}; "
                f"worst error {worst['worst_ratio']:.2f} bands ({worst['size']}, {worst['precision']}); "
                f"by size {sizes}"
            )


def _widths_and_alarms(cell: str, members: list[dict]) -> Iterable[str]:
    for r in members:
        if r["resolved"] and r["band_over_error"] > WIDTH:
            yield (
                f"band is {r['band_over_error']:.0f} errors wide: {cell}, {r['size']}, {r['precision']} "
                f"(band {r['band']:.1e})"
            )
    alarms, count = sum(r["open"] for r in members), sum(r["count"] for r in members)
    if alarms > FALSE_ALARMS * count:
        yield f"false alarms: {alarms} of {count}: {cell}"


def _plants_and_floor(record: dict) -> Iterable[str]:
    cell = " · ".join(record[k] for k in ("field", "mesh", "location", "precision", "size"))
    able = record.get("planted_able", 0)
    if record["resolved"] and able and record["planted_found_able"] < FOUND * able:
        yield (
            f"{100 * PLANTED:g} % of throughflow found in {record['planted_found_able']} of {able} able "
            f"to tell, at {TIGHT} %: {cell} "
            f"(sampling band {record['band']:.1e}, resolution band {record['resolution_band']:.1e})"
        )
    limit = FLOOR.get(tuple(record[k] for k in ("field", "mesh", "location", "size")))
    # Linear sampling left 7.7e-5 about the cylinder of the floor: no surface there cut the body (2.7e-3).
    if limit and record["row"] == "mass" and record["median_clear"] > limit:
        yield f"floor {limit:.1e} not reached: {cell}: {record['median_clear']:.1e}"


def _gains(records: Sequence[dict]) -> Iterable[str]:
    smooth = [r for r in records if r["resolved"] and r["row"] == "mass" and r["precision"] == "float64"]
    fine = [r for r in smooth if r["size"] == "fine"]
    for what, chosen, least in (("resolved", smooth, GAIN), ("finer", fine, GAIN_FINE)):
        for where in ("point", "average"):
            gains = [r["gain"] for r in chosen if r["location"] == where]
            if gains and (gain := np.median(gains)) < least:
                yield f"gain over linear sampling {gain:.1f} < {least:g}: {what} meshes, {where} data"


def summary(records: Sequence[dict]) -> list[str]:
    """The study in a few lines."""
    out = []
    for resolved in (True, False):
        here = [r for r in records if r["resolved"] == resolved]
        if not here:
            continue
        count = sum(r["count"] for r in here)
        gains = [r["gain"] for r in here if r["row"] == "mass"]
        alarms = sum(r["open"] for r in here)
        widths = [r["band_over_error"] for r in here]
        out.append(
            f"{'resolved' if resolved else 'under-resolved'}: {len(here)} rows, {count} balances; "
            f"covered {sum(r['covered'] for r in here) / count:.4f}; "
            f"median gain (mass) {np.median(gains):.1f}; median band over error {np.median(widths):.1f}; "
            f"false alarms {alarms}"
        )
    return out
