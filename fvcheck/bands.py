"""How far a ledger's number can be trusted: bands from the difference of degrees.

The same flux is taken with polynomials of degree 1, 2 and 3. What degree 3
changes against 2 bounds the error of integrating from discrete data (sampling
band); what degree 2 changes against 1 is what a second-order scheme could not
see on this mesh (resolution band).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

Array = np.ndarray

# Roache's factor of safety for an estimate from two levels (Roache 1998; recalled
# from memory). On a converged finite-volume run the measured imbalance reached
# 1.7 times the bare estimate.
RESOLUTION_FACTOR = 3.0

# Root sum of squares of the pieces' differences, times this. Twice (GUM, JCGM
# 100:2008, k = 2) would do for independent errors; those of neighbouring pieces
# share a sign often enough that the study of scripts/calibrate.py asks for three
# in the sampling band. The resolution band has its factor of safety already.
_SAMPLING_COVERAGE, _RESOLUTION_COVERAGE = 3.0, 2.0

# Where fits reach out of their data, degree 3 may be off by as much as it
# changes degree 2, or by this share of what degree 2 changes degree 1: on a
# coarse curved boundary the series of degrees hardly converges outside the data.
_REACHING = 1.0


class Bands(NamedTuple):
    """Half-widths about the reported number."""

    sampling: float
    resolution: float
    rounding: float


def spread(difference: Array, coverage: float = _SAMPLING_COVERAGE) -> float:
    """Half-width from per-piece differences (k,): net, or ``coverage`` times the root sum of squares."""
    return float(max(abs(difference.sum()), coverage * np.sqrt(np.sum(difference**2))))


def bands(
    first: Array,
    second: Array,
    third: Array,
    rounding: float = 0.0,
    chosen: Array | None = None,
    reaching: Array | None = None,
) -> Bands:
    """Bands of Σ third from contributions per piece by degree, (k,) each.

    rounding : half-width from the precision of the stored data
    chosen : contributions by the degree that the data support, where that is
        not degree 3 everywhere. Around a jump the errors have one sign, that of
        the jump's unknown place in its cell, and add up
    reaching : (m,) bool, m ≤ k, leading pieces whose errors have one sign and add
        up: where values are extrapolated (cell data on the domain boundary, all
        fits reach out on the same side), and near a jump
    """
    d23, d12 = third - second, second - first
    outside = np.zeros(len(d23), bool)
    if reaching is not None:
        outside[: len(reaching)] = reaching
    if chosen is not None:
        outside |= chosen != third
    sampling = _half_width(d23[~outside], d12[~outside]) + rounding
    sampling += float(np.maximum(np.abs(d23), _REACHING * np.abs(d12))[outside].sum())
    resolution = RESOLUTION_FACTOR * sum(
        spread(part, _RESOLUTION_COVERAGE) for part in (d12[~outside], d12[outside])
    )
    return Bands(sampling, max(resolution, sampling), rounding)


def _half_width(d23: Array, d12: Array) -> float:
    if np.abs(d23).sum() > 0.5 * np.abs(d12).sum():
        # The series of degrees does not settle: nothing may be said to cancel.
        return float(np.abs(d23).sum())
    return spread(d23)
