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

# Where what the cubics differ from one another has one sign along the surface, their error is so
# many times that (to 1.5 in the study, on polygons with averages of a gas).
_ONE_SIGN = 1.5

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
    cross: Crosswise | None = None,
) -> Bands:
    """Bands of Σ third from contributions per piece by degree, (k,) each.

    rounding : half-width from the precision of the stored data
    chosen : contributions by the degree that the data support, where that is
        not degree 3 everywhere. Around a jump the errors have one sign, that of
        the jump's unknown place in its cell, and add up
    reaching : (m,) bool, m ≤ k, leading pieces whose errors have one sign and add
        up: where values are extrapolated (cell data on the domain boundary, all
        fits reach out on the same side), and near a jump
    cross : a second opinion on the leading pieces, n ≤ k

    What the cubics differ from one another has the order of their error, what they
    differ from quadratics one less: the first is the measure, the second a net
    below it, once in place of three times where the first can be relied on.
    """
    steps = steps_of(first, second, third, chosen, reaching, cross)
    within, d12 = ~steps.outside, steps.d12
    sampling = _half_width(steps, within) + rounding + float(steps.outer_widths[steps.outside].sum())
    resolution = RESOLUTION_FACTOR * sum(
        spread(part, _RESOLUTION_COVERAGE) for part in (d12[within], d12[steps.outside])
    )
    return Bands(float(sampling), float(max(resolution, sampling)), float(rounding))


class Crosswise(NamedTuple):
    """A second opinion of the same order, (n,) each.

    values : contributions by the cubics of the other corners (`Sampler.crosswise`)
    beside : bool, in cells on the domain boundary, where all cubics reach out to the same
        side and may agree in what they miss
    """

    values: Array
    beside: Array


class Steps(NamedTuple):
    """What each piece changes from degree to degree, (k,) each; see `bands`.

    d12, d23 : degree 2 against 1, 3 against 2
    apart, known : cubics of the other corners against degree 3, and where there are such
    relied : where these alone would do
    outside, fell : where errors add up, and where among them the degree fell
    """

    d12: Array
    d23: Array
    apart: Array
    known: Array
    relied: Array
    outside: Array
    fell: Array

    @property
    def outer_widths(self) -> Array:
        """(k,) what a piece adds to the sampling band where errors add up."""
        d12, d23, apart = np.abs(self.d12), np.abs(self.d23), np.abs(self.apart)
        plain = np.maximum(d23, d12) + apart
        return np.where(self.known & ~self.fell, _REACHING * (d23 + apart), plain)

    @property
    def unsettled(self) -> bool:
        """Whether the series of degrees does not settle within: nothing may be said to cancel there."""
        within = ~self.outside
        return bool(np.abs(self.d23[within]).sum() > 0.5 * np.abs(self.d12[within]).sum())


def steps_of(
    first: Array,
    second: Array,
    third: Array,
    chosen: Array | None = None,
    reaching: Array | None = None,
    cross: Crosswise | None = None,
) -> Steps:
    """The steps of pieces; parameters as of `bands`."""
    apart = np.zeros(len(third))
    known, relied = np.zeros((2, len(third)), bool)
    if cross is not None:
        leading = slice(len(cross.values))
        apart[leading], known[leading], relied[leading] = cross.values - third[leading], True, ~cross.beside
    fell = np.zeros(len(third), bool) if chosen is None else chosen != third
    outside = fell.copy()
    if reaching is not None:
        outside[: len(reaching)] |= reaching
    return Steps(second - first, third - second, apart, known, relied, outside, fell)


def _half_width(steps: Steps, within: Array) -> float:
    d23, apart, relied = steps.d23[within], steps.apart[within], steps.relied[within]
    net = np.where(relied, 1.0, _COVERAGE) * d23
    settled = float(max(abs(d23.sum()), np.sqrt(np.sum(net**2))))
    settled += max(_ONE_SIGN * abs(apart.sum()), spread(apart))
    if steps.unsettled:
        return float(max(np.abs(d23).sum(), settled if steps.known.any() else 0.0))
    return settled
