"""From the integrated terms of a law to the rows of a ledger."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import replace

import numpy as np

from fvcheck.bands import Bands, Crosswise, bands
from fvcheck.laws import Law
from fvcheck.ledger import Row
from fvcheck.sampling.sampler import DEGREES
from fvcheck.sources import Source, share_inside
from fvcheck.verdict import CLOSED, judge, judge_production
from fvcheck.volume import BEST, Contributions, SampledVolume

Array = np.ndarray

# Three standard deviations of the spread under a shaken last digit cover 99 in 100.
_SHAKE_COVERAGE = 3.0

# Rounding of our own sums, in units of the last place of the summed |flux|: fits on
# cells of aspect ratio 2,500 pass on some hundred.
_ROUNDINGS = 256.0

# A scale below this share of the fluxes' own magnitude is rounding, not flow.
_NOTHING = 1e-11


def rows_of(
    law: Law,
    volume: SampledVolume,
    tolerance: Mapping[str, float],
    scale: Mapping[str, float],
    sources: Sequence[Source],
) -> list[Row]:
    degrees = [volume.contributions(law, degree) for degree in DEGREES]
    best = volume.contributions(law, BEST) if volume.falls else degrees[-1]
    closed = volume.overlay.closed
    raw = np.abs(best.total).sum()
    felt = best.total - best.level
    size = scale.get(law.name, 0.5 * float(np.hypot.reduce(felt, axis=1).sum())) if closed else None
    told = [
        (share_inside(source, volume.surface, volume.flow.mesh, volume.axis), source)
        for source in sources
        if source.law == law.name and closed
    ]
    shaken = [volume.fluxes(law, state) for state in volume.shaken_line_states()]
    cross, reaching = volume.crosswise(law), volume.reaching(law)
    rows = []
    for c, component in enumerate(law.components):
        pieces = [pieces_of(volume, terms, c) for terms in degrees]
        spread = [sum(part[:, c].sum() for part in parts.values()) for parts in shaken]
        rounding = _SHAKE_COVERAGE * float(np.std(spread)) if spread else 0.0
        rounding += _ROUNDINGS * np.finfo(float).eps * float(raw)
        chosen = pieces_of(volume, best, c) if volume.falls else None
        second = Crosswise(cross[:, c], volume.beside)
        band = bands(pieces[0], pieces[1], pieces[2], rounding, chosen, reaching, second)
        told_here = sum(share * source.along(component) for share, source in told)
        row = _row(law, component, volume, best, c, told_here)
        if closed:
            linear = float(pieces[0].sum()) - told_here
            row = _close(law, row, band, size, linear, tolerance, _NOTHING * float(raw))
        rows.append(
            replace(
                row,
                sampling_band=band.sampling,
                resolution_band=band.resolution,
                rounding_band=band.rounding,
            )
        )
    return rows


def pieces_of(volume: SampledVolume, terms: Contributions, c: int) -> Array:
    """Contributions to the imbalance, one per cell of the border, then those of the volume."""
    out = [volume.per_line_cell(terms.total[:, c : c + 1])[:, 0]]
    if terms.source is not None:
        out.append(-terms.source[:, c])
    if terms.storage is not None:
        out.append(terms.storage[:, c])
    return np.concatenate(out)


def _row(
    law: Law, component: str | None, volume: SampledVolume, terms: Contributions, c: int, told: float
) -> Row:
    drawn, closed = volume.drawn, volume.overlay.closed
    if not closed:
        # A patch taken as a surface has no drawn pieces: all of it counts.
        drawn = np.ones_like(drawn)
    total = terms.total[:, c]
    names = volume.flow.mesh.boundary.names
    enclosed = np.unique(volume.patch[~drawn])
    patches = {names[k]: float(total[volume.patch == k].sum()) for k in enclosed.tolist()}
    parts = {name: float(value[drawn, c].sum()) for name, value in terms.parts.items()}
    flux, boundary = float(total[drawn].sum()), float(total[~drawn].sum())
    source = told + (0.0 if terms.source is None else float(terms.source[:, c].sum()))
    storage = 0.0 if terms.storage is None else float(terms.storage[:, c].sum())
    datum = volume.level(law)
    return Row(
        law=law.name,
        component=component,
        unit=law.unit if volume.flow.case.per_metre else law.unit.removesuffix("/m"),
        parts=parts,
        inflow=float(-np.minimum(total[drawn], 0.0).sum()),
        outflow=float(np.maximum(total[drawn], 0.0).sum()),
        flux=flux,
        boundary=boundary if closed else None,
        patches=patches if closed else {},
        storage=storage if closed else None,
        source=source if closed else None,
        imbalance=storage + flux + boundary - source if closed else None,
        scale=None,
        imbalance_percent=None,
        sampling_band=0.0,
        resolution_band=0.0,
        rounding_band=0.0,
        linear_imbalance=None,
        tolerance_percent=None,
        verdict=None,
        datum=datum if closed else None,
        inequality=law.inequality,
    )


def _close(
    law: Law,
    row: Row,
    band: Bands,
    size: float | None,
    linear: float,
    tolerance: Mapping[str, float],
    floor: float,
) -> Row:
    """The row with scale, percent and verdict."""
    assert row.imbalance is not None and size is not None
    # A production has no tolerance: its limit is nothing.
    percent = 0.0 if law.inequality else tolerance.get(law.name, law.tolerance_percent)
    nothing = size <= floor
    if nothing and abs(row.imbalance) <= floor + band.rounding:
        verdict = CLOSED
    elif law.inequality:
        verdict = judge_production(row.imbalance, band.resolution)
    else:
        verdict = judge(row.imbalance, band.sampling, band.resolution, 0.01 * percent * size)
    return replace(
        row,
        scale=size,
        imbalance_percent=None if nothing else 100.0 * row.imbalance / size,
        linear_imbalance=linear,
        tolerance_percent=percent,
        verdict=verdict,
    )
