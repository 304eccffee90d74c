"""Rates of change and time integrals from values at uneven times.

Both are weights of the values, from the polynomial through neighbouring times
(Lagrange; e.g. Fornberg 1988, Mathematics of Computation 51, recalled from
memory): three times give a rate of second order anywhere among them, the first
and the last one included; four times give the next order, and so the error of
three.
"""

from __future__ import annotations

import numpy as np

Array = np.ndarray


def rate_weights(times: Array, at: int) -> Array:
    """(n,) weights of the values at ``times`` (n,) that give the rate of change at ``times[at]``.

    Exact for polynomials of degree n − 1.
    """
    shift, scale = _scaled(times, times[at])
    powers = np.vander(shift, increasing=True).T
    wanted = np.zeros(len(times))
    wanted[1:2] = 1.0 / scale
    return np.linalg.solve(powers, wanted)


def integral_weights(times: Array, points: int = 4) -> Array:
    """(n,) weights of the values at ``times`` (n,) that give the integral from the first to the last.

    In each interval the polynomial through the ``points`` nearest times is
    integrated: 2 the trapezoidal rule, 4 an error of fourth order in the step.
    """
    n = len(times)
    out = np.zeros(n)
    points = min(points, n)
    for i in range(n - 1):
        first = min(max(i + 1 - points // 2, 0), n - points)
        near = times[first : first + points]
        shift, scale = _scaled(near, times[i])
        step = (times[i + 1] - times[i]) / scale
        powers = np.vander(shift, increasing=True).T
        order = np.arange(1, points + 1)
        out[first : first + points] += np.linalg.solve(powers, step**order / order) * scale
    return out


def window(n: int, at: int, width: int) -> slice:
    """``width`` neighbouring steps out of n about step ``at``, shifted inwards at both ends."""
    width = min(width, n)
    first = min(max(at - (width - 1) // 2, 0), n - width)
    return slice(first, first + width)


def _scaled(times: Array, origin: float) -> tuple[Array, float]:
    """Times from an origin in units of their extent, and that unit: keeps the powers of one size."""
    shift = np.asarray(times, float) - origin
    scale = float(np.max(np.abs(shift))) or 1.0
    return shift / scale, scale
