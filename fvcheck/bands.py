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

# Sums of independent contributions: twice the standard deviation (GUM, JCGM 100:2008, k = 2).
_COVERAGE = 2.0


class Bands(NamedTuple):
    """Half-widths about the reported number."""

    sampling: float
    resolution: float
    rounding: float


def spread(difference: Array) -> float:
    """Half-width from per-piece differences (k,): net, or twice the root sum of squares."""
    return float(max(abs(difference.sum()), _COVERAGE * np.sqrt(np.sum(difference**2))))


def bands(first: Array, second: Array, third: Array, rounding: float) -> Bands:
    """Bands of Σ third from contributions per piece by degree, (k,) each.

    rounding : half-width from the precision of the stored data
    """
    d23, d12 = third - second, second - first
    sampling = spread(d23)
    if np.abs(d23).sum() > 0.5 * np.abs(d12).sum():
        # The series of degrees does not settle: nothing may be said to cancel.
        sampling = float(np.abs(d23).sum())
    sampling += rounding
    return Bands(sampling, max(RESOLUTION_FACTOR * spread(d12), sampling), rounding)
