"""What a control volume holds, snapshot by snapshot, and how fast that changes.

The content ∫ b dV itself is differenced in time, not the fields: a shock that
passes changes ρ and u at once, where the product rule over differenced fields
fails and the difference of ρu does not; volumes that move need no extra term;
and the changes of successive steps add up to the change over all of them.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from fvcheck.bands import RESOLUTION_FACTOR, bands, spread
from fvcheck.laws import Law
from fvcheck.laws.state import Datum
from fvcheck.mesh.mesh import Mesh
from fvcheck.sampling.sampler import DEGREES
from fvcheck.timeweights import rate_weights, window
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray

# The difference between the formulas through four and through three times is the
# error of the latter to leading order; these factors cover what is beyond. Within
# the series that of Roache 1998 for three levels does; at both ends, all times lie
# on one side, and the error is told by what happens more than a step away.
TIME_FACTOR, TIME_FACTOR_ENDS = 1.25, 2.0

# Units in the last place that sums and weighted averages may be off by.
_ROUNDINGS = 64.0

# Standard deviations that cover 99 in 100.
_COVERAGE = 3.0


@dataclass(frozen=True, eq=False)
class Content:
    """∫ b dV of one law at one time.

    mesh : whose cells are meant; contents on meshes of the same cells are differenced cell by cell
    cells : (k,) mesh cells
    amounts : degree (`BEST` included) -> (k, c)
    slope : (c,) change of the total per unit of the law's datum
    rounding : (c,) half-width from the precision of the stored data
    """

    mesh: Mesh
    cells: Array
    amounts: dict[int, Array]
    slope: Array
    rounding: Array

    @property
    def total(self) -> Array:
        """(c,) by the degree that the data support."""
        return self.amounts[BEST].sum(axis=0)


@dataclass(frozen=True, eq=False)
class Change:
    """A rate of change of a content, or a change between two times; all (c,).

    linear : of linear interpolation; sampling, resolution, rounding : half-widths
        as in a `Row`; time : half-width from the steps in time
    floor : rounding of our own sums; nothing below it is a change
    """

    value: Array
    linear: Array
    sampling: Array
    resolution: Array
    rounding: Array
    time: Array
    floor: Array


def content_of(volume: SampledVolume, law: Law) -> Content:
    """What the volume holds, counted from a datum of zero."""
    none, one = Datum(), _unit_datum(law)
    amounts = {}
    for degree in DEGREES:
        cells, amounts[degree] = volume.content(law, degree, none)
    amounts[BEST] = volume.content(law, BEST, none)[1] if volume.falls else amounts[DEGREES[-1]]
    best = amounts[BEST]
    slope = volume.content(law, DEGREES[-1], one)[1].sum(axis=0) - amounts[DEGREES[-1]].sum(axis=0)
    slope[np.abs(slope) <= 1e-9 * np.abs(best).sum(axis=0)] = 0.0
    # A datum of a cell is shared by its places, so a cell's content is off as a whole.
    rounding = _COVERAGE * volume.probe.precision * np.sqrt(np.sum(best**2, axis=0))
    return Content(volume.flow.mesh, cells, amounts, slope, rounding)


def _unit_datum(law: Law) -> Datum:
    """A datum of one in what the law counts from."""
    _, scalar, name = (law.datum or "pressure").partition("scalar:")
    if scalar:
        return Datum(scalars={name: 1.0})
    levels: dict[str, Any] = {law.datum or "pressure": 1.0}
    return Datum(**levels)


def rate_of(contents: Sequence[Content], times: Array, at: int, datum: float, hint: Array) -> Change:
    """Rate of change at ``times[at]`` from the contents around.

    Second order in the step, at the first and last time too. ``datum`` is the
    level that the law counts from at that time. ``hint`` (c,) is
    the half-width that stands for the error in time where two times are all
    there are.
    """
    n = len(contents)
    near = window(n, at, 3)
    weights = rate_weights(times[near], at - near.start)
    change = combined(contents[near], weights, datum)
    if n == 2:
        time = hint
    elif n == 3:
        pair = window(n, at, 2)
        coarse = combined(contents[pair], rate_weights(times[pair], at - pair.start), datum)
        time = np.abs(coarse.value - change.value)
    else:
        # One-sided sets of four on both sides: the error of three may have a zero at one of them.
        firsts = {max(min(at - shift, n - 4), 0) for shift in (1, 2)}
        factor = TIME_FACTOR if 0 < at < n - 1 else TIME_FACTOR_ENDS
        time = np.zeros_like(change.value)
        for first in firsts:
            four = slice(first, first + 4)
            finer = combined(contents[four], rate_weights(times[four], at - first), datum)
            time = np.maximum(time, factor * np.abs(finer.value - change.value))
    return replace(change, time=time)


def combined(contents: Sequence[Content], weights: Array, datum: float) -> Change:
    """Σ weight × content and its bands; the weights add up to zero."""
    level = sum(w * content.slope * datum for w, content in zip(weights, contents))
    rounding = np.sqrt(sum((w * content.rounding) ** 2 for w, content in zip(weights, contents)))
    value = sum(w * content.total for w, content in zip(weights, contents)) + level
    linear = sum(w * content.amounts[1].sum(axis=0) for w, content in zip(weights, contents)) + level
    rounding = np.asarray(rounding)
    if _comparable(contents):
        by_degree = _cell_by_cell(contents, weights)
        found = [
            bands(
                *(by_degree[1][:, c], by_degree[2][:, c], by_degree[3][:, c]),
                rounding=float(rounding[c]),
                chosen=by_degree[BEST][:, c],
            )
            for c in range(len(value))
        ]
        sampling, resolution = (
            np.array([getattr(b, kind) for b in found]) for kind in ("sampling", "resolution")
        )
    else:
        # Different cells: the errors of the contents have nothing in common that would cancel.
        sampling, resolution = rounding.copy(), np.zeros_like(rounding)
        for w, content in zip(weights, contents):
            first, second, third = (content.amounts[d] for d in DEGREES)
            for c in range(len(value)):
                sampling[c] += abs(w) * spread((third - second)[:, c])
                resolution[c] += abs(w) * RESOLUTION_FACTOR * spread((second - first)[:, c])
        resolution = np.maximum(resolution, sampling)
    size = sum(abs(w) * np.abs(content.amounts[BEST]).sum(axis=0) for w, content in zip(weights, contents))
    floor = _ROUNDINGS * np.finfo(float).eps * np.asarray(size)
    return Change(value, linear, sampling, resolution, rounding, np.zeros_like(value), floor)


def _comparable(contents: Sequence[Content]) -> bool:
    from fvcheck.series import same_cells

    first = contents[0].mesh
    return all(content.mesh is first or same_cells(content.mesh, first) for content in contents[1:])


def _cell_by_cell(contents: Sequence[Content], weights: Array) -> dict[int, Array]:
    """Degree -> (k, c) Σ weight × content over the union of their cells."""
    cells = np.unique(np.concatenate([content.cells for content in contents]))
    out = {}
    for degree in (*DEGREES, BEST):
        total = np.zeros((len(cells), contents[0].amounts[degree].shape[1]))
        for w, content in zip(weights, contents):
            total[np.searchsorted(cells, content.cells)] += w * content.amounts[degree]
        out[degree] = total
    return out
