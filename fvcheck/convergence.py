"""From the same number on three meshes to its error: observed order and grid convergence index.

Procedure of Celik et al. 2008, Journal of Fluids Engineering 130, 078001;
factors of safety of Roache 1998; standard uncertainty as in ASME V&V 20-2009
(all recalled from memory, the worked examples of the first recomputed).
"""

from __future__ import annotations

import itertools
import math
from collections.abc import Sequence
from dataclasses import dataclass

from fvcheck.errors import SetupError

FORMAL_ORDER = 2.0
"""Order of the schemes that are assumed where two meshes cannot show one."""

_SAFETY, _SAFETY_TWO = 1.25, 3.0

# Order below which extrapolation divides by next to nothing.
_LEAST_ORDER = 0.5

# Expanded (95 %) to standard uncertainty of a grid convergence index (V&V 20-2009).
_COVERAGE = 2.0


@dataclass(frozen=True)
class Convergence:
    """What the finest mesh's value is worth; values and sizes from fine to coarse.

    kind : "monotone", "oscillatory", "diverging" (differences grow with
        refinement), "still" (no difference) or "two meshes"
    order : observed order p; None where there is none
    extrapolated : value at cell size zero by p
    error, extrapolated_error : relative, of the finest against the next, and
        against the extrapolated value; None where that is zero
    gci : 1.25 error / (r^p − 1), relative
    band : the same in the unit of the values, p taken between ½ and 2, factor 3
        where the order is not an observed one
    uncertainty : standard uncertainty u_num in the sense of V&V 20
    """

    sizes: tuple[float, ...]
    values: tuple[float, ...]
    kind: str
    order: float | None
    extrapolated: float | None
    error: float | None
    extrapolated_error: float | None
    gci: float | None
    band: float
    uncertainty: float


def grid_convergence(values: Sequence[float], sizes: Sequence[float]) -> Convergence:
    """Observed order, extrapolated value and index from values on meshes of representative cell sizes.

    Two or more meshes in any order; of more than three the three finest count.
    SetupError where two sizes are the same (less than 1 % apart) or there is one mesh only.
    """
    pairs = sorted(zip(sizes, values))
    if len(pairs) < 2:
        raise SetupError("there is one mesh only", mend="Give two or more meshes, better three.")
    h, v = tuple(float(p[0]) for p in pairs), tuple(float(p[1]) for p in pairs)
    for a, b in itertools.pairwise(h):
        if not b > 1.01 * a > 0:
            raise SetupError(
                f"two meshes have nearly the same cell size, {a:.6g} and {b:.6g}",
                mend="Give meshes that differ, by a factor of 1.3 or more.",
            )
    e21 = v[1] - v[0]
    r21 = h[1] / h[0]
    if len(v) == 2:
        shift = e21 / (r21**FORMAL_ORDER - 1.0)
        return _result(h, v, "two meshes", None, v[0] - shift, _SAFETY_TWO * abs(shift), shift)
    e32, r32 = v[2] - v[1], h[2] / h[1]
    if max(abs(e21), abs(e32)) <= 1e-13 * max(map(abs, v)):
        return _result(h, v, "still", None, v[0], 0.0, 0.0)
    order = observed_order(e21, e32, r21, r32)
    if order is None or order <= 0.0:
        # Nothing supports an extrapolation: what the values differ by, with the wide factor.
        span = max(v[:3]) - min(v[:3])
        return _result(h, v, "diverging", order, None, _SAFETY_TWO * span, None)
    kind = "monotone" if e32 * e21 > 0 else "oscillatory"
    shift = e21 / (r21**order - 1.0)
    limited = min(max(order, _LEAST_ORDER), FORMAL_ORDER)
    safety = _SAFETY if order >= _LEAST_ORDER else _SAFETY_TWO
    band = safety * abs(e21) / (r21**limited - 1.0)
    return _result(h, v, kind, order, v[0] - shift, band, shift)


def observed_order(e21: float, e32: float, r21: float, r32: float) -> float | None:
    """p of p = |ln|ε32/ε21| + q(p)| / ln r21, q = ln((r21^p − s)/(r32^p − s)), s = sgn(ε32/ε21).

    Negative where the differences grow towards the finer mesh; None where one of them is zero, or the
    equation has no solution.
    """
    if e21 == 0.0 or e32 == 0.0:
        return None
    ratio, s = e32 / e21, math.copysign(1.0, e32 / e21)
    p = abs(math.log(abs(ratio))) / math.log(r21)
    for _ in range(500):
        # The published iteration, damped by half so that unlike ratios do not make it swing.
        top, bottom = r21**p - s, r32**p - s
        if top <= 0.0 or bottom <= 0.0 or p > 50.0:
            return None
        new = abs(math.log(abs(ratio)) + math.log(top / bottom)) / math.log(r21)
        if abs(new - p) < 1e-12:
            break
        p = 0.5 * (p + new)
    else:
        return None
    # The absolute value hides whether the differences shrink.
    growing = math.log(abs(ratio)) + math.log((r21**p - s) / (r32**p - s)) < 0.0
    return -p if growing else p


def _result(
    h: tuple[float, ...],
    v: tuple[float, ...],
    kind: str,
    order: float | None,
    extrapolated: float | None,
    band: float,
    shift: float | None,
) -> Convergence:
    error = abs((v[0] - v[1]) / v[0]) if v[0] != 0.0 else None
    beyond = None
    if extrapolated:
        beyond = abs((extrapolated - v[0]) / extrapolated)
    safety = _SAFETY_TWO if kind == "two meshes" else _SAFETY
    index = None if shift is None or v[0] == 0.0 else safety * abs(shift / v[0])
    return Convergence(h, v, kind, order, extrapolated, error, beyond, index, band, band / _COVERAGE)
