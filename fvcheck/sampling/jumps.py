"""Where a polynomial of high degree meets a jump: signs that it does not follow the data."""

from __future__ import annotations

import numpy as np

Array = np.ndarray

# A jump shows where the three polynomials of a triangle disagree by more than
# DISAGREE of the range of the data two rings around, and the value leaves that
# range by more than EXCESS of it. Smooth fields down to eight cells a wave
# hardly ever do both, fits across a captured shock do so in each passage. Beside the
# domain boundary a straight profile through cell centres leaves the range by a quarter,
# one that steepens towards the boundary by more.
DISAGREE, EXCESS, EXCESS_RIM = 0.15, 0.01, 0.4

# Around a jump even this excess is an overshoot, and a value on which the polynomials
# disagree by more than APART of the range is none.
_OVERSHOOT, _APART = 0.005, 0.5

# Fits reach farther than the rings that ranges are taken from. Beside a jump data may
# be uniform there; then a value off by this share of the whole range has felt the jump.
_FELT = 0.05

# Share of the whole surface's range below which a local range is noise.
LEAST_EXTENT = 1e-3

# Rings of cells about a jump in which fits may feel it.
REACH = 2


def signs(values: Array, apart: Array, low: Array, high: Array, rim: Array) -> tuple[Array, Array]:
    """(q,) bool, which places see a jump; (q,) bool, which overshoot if there is one about.

    values, apart : (q, f) by cubics, and how far those of the corners disagree
    low, high : (q, f) smallest and largest datum around
    rim : (q,) bool, beside the domain boundary

    Differences small against the whole surface do not count.
    """
    extent = high - low
    whole = high.max(axis=0, initial=0.0) - low.min(axis=0, initial=0.0)
    matters = extent > LEAST_EXTENT * whole
    excess = np.maximum(values - high, low - values)
    allowed = np.where(rim, EXCESS_RIM, EXCESS)[:, None] * extent
    seeds = (matters & (excess > allowed) & (apart > DISAGREE * extent)).any(axis=1)
    seeds |= (~matters & (excess > _FELT * whole) & (apart > _FELT * whole)).any(axis=1)
    astray = (excess > _OVERSHOOT * extent) | (apart > _APART * extent)
    return seeds, (matters & astray).any(axis=1)
