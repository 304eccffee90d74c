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

# Root sums of squares of the pieces' differences, times this. Twice (GUM, JCGM
# 100:2008, k = 2) would do for independent errors; those of neighbouring pieces
# share a sign often enough that the study of scripts/calibrate.py asks for three in
# the sampling band. The resolution band has its factor of safety already.
_COVERAGE, _RESOLUTION_COVERAGE = 3.0, 2.0

# Where fits reach out of their data all errors have one sign; cubics there may be off by
# this many times what they differ from quadratics and from one another.
_REACHING = 2.0


class Bands(NamedTuple):
    """Half-widths about the reported number."""

    sampling: float
    resolution: float
    rounding: float


def spread(difference: Array, coverage: float = _COVERAGE) -> float:
    """Half-width from per-piece differences (k,): net, or ``coverage`` times the root sum of squares."""
    return float(max(abs(difference.sum()), coverage * np.sqrt(np.sum(difference**2))))


def bands(
    first: Array,
    second: Array,
    third: Array,
    rounding: float = 0.0,
    chosen: Array | None = None,
    reaching: Array | None = None,
    cross: Array | None = None,
) -> Bands:
    """Bands of Σ third from contributions per piece by degree, (k,) each.

    rounding : half-width from the precision of the stored data
    chosen : contributions by the degree that the data support, where that is
        not degree 3 everywhere. Around a jump the errors have one sign, that of
        the jump's unknown place in its cell, and add up
    reaching : (m,) bool, m ≤ k, leading pieces whose errors have one sign and add
        up: where values are extrapolated (cell data on the domain boundary, all
        fits reach out on the same side), and near a jump
    cross : (n,), n ≤ k, leading pieces by the cubics of the other corners (`Sampler.crosswise`)

    What the cubics differ from one another has the order of their error, what they
    differ from quadratics one less: the first is the measure, the second a net
    below it, once in place of three times where the first is known.
    """
    d23, d12 = third - second, second - first
    apart, known = np.zeros(len(d23)), np.zeros(len(d23), bool)
    if cross is not None:
        apart[: len(cross)], known[: len(cross)] = cross - third[: len(cross)], True
    outside, fell = outer_pieces(third, chosen, reaching)
    within = ~outside
    sampling = _half_width(d23[within], d12[within], apart[within], known[within]) + rounding
    sampling += float(outer_widths(d23, d12, apart, known, fell)[outside].sum())
    resolution = RESOLUTION_FACTOR * sum(
        spread(part, _RESOLUTION_COVERAGE) for part in (d12[within], d12[outside])
    )
    return Bands(sampling, max(resolution, sampling), rounding)


def outer_pieces(third: Array, chosen: Array | None, reaching: Array | None) -> tuple[Array, Array]:
    """(k,) bool: pieces whose errors add up, and those among them where the degree fell."""
    fell = np.zeros(len(third), bool) if chosen is None else chosen != third
    outside = fell.copy()
    if reaching is not None:
        outside[: len(reaching)] |= reaching
    return outside, fell


def outer_widths(d23: Array, d12: Array, apart: Array, known: Array, fell: Array) -> Array:
    """(k,) what a piece adds to the sampling band where errors add up."""
    plain = np.maximum(np.abs(d23), np.abs(d12)) + np.abs(apart)
    return np.where(known & ~fell, _REACHING * (np.abs(d23) + np.abs(apart)), plain)


def _half_width(d23: Array, d12: Array, apart: Array, known: Array) -> float:
    net = np.where(known, 1.0, _COVERAGE) * d23
    settled = max(abs(d23.sum()), float(np.sqrt(np.sum(net**2)))) + spread(apart)
    if np.abs(d23).sum() > 0.5 * np.abs(d12).sum():
        # The series of degrees does not settle: nothing may be said to cancel.
        return float(max(np.abs(d23).sum(), settled if known.any() else 0.0))
    return settled
