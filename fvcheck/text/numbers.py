"""Numbers as words: few digits, decimal points below one another."""

from __future__ import annotations

import math
from collections.abc import Iterable

_SUPERSCRIPT = str.maketrans("-0123456789", "⁻⁰¹²³⁴⁵⁶⁷⁸⁹")
MISSING = "-"


def short(value: float | None, digits: int = 4) -> str:
    """Few significant digits, an exponent only where there must be one.

    >>> short(0.0016295165), short(-12.35663), short(101325.2), short(3.1e-9), short(None)
    ('0.00163', '-12.36', '101325', '3.1e-09', '-')
    """
    if value is None or not math.isfinite(value):
        return MISSING if value is None else str(value)
    if 10.0**digits <= abs(value) < 1e7:
        return f"{value:.0f}"
    text = f"{value + 0.0:.{digits}g}"  # no minus before a zero
    return text if len(text) <= digits + 4 else f"{value:.{max(digits - 1, 1)}g}"


def percent(value: float | None) -> str:
    """Three significant digits in at most eight characters.

    >>> percent(0.053854), percent(12.3566), percent(2.0), percent(1.2e-13), percent(123456.0)
    ('0.0539', '12.4', '2.00', '1.2e-13', '1.2e+05')
    """
    if value is None or not math.isfinite(value):
        return MISSING if value is None else str(value)
    size = abs(value)
    if size == 0:
        return "0"
    if size < 1e-4 or size >= 1e5:
        return f"{value:.1e}"
    return f"{value:#.3g}".rstrip(".") if size < 999.5 else f"{value:.0f}"


def exponent(values: Iterable[float | None]) -> int:
    """The power of 1000 that brings the largest of the values to between 1 and 1000."""
    sizes = [abs(v) for v in values if v is not None and math.isfinite(v) and v != 0]
    return 3 * math.floor(math.log10(max(sizes)) / 3 + 1e-12) if sizes else 0


def scaled(value: float | None, power: int, decimals: int) -> str:
    """``value`` in units of 10^power to ``decimals``, or more of them where too few digits are left."""
    if value is None or not math.isfinite(value):
        return MISSING if value is None else str(value)
    number = value / 10.0**power
    if number == 0:
        return "0"
    if abs(number) < 0.5 * 10.0**-decimals * 100:
        return (
            f"{number:.1e}"
            if abs(number) < 1e-5
            else f"{number:.{-math.floor(math.log10(abs(number))) + 1}f}"
        )
    return f"{number:.{decimals}f}"


def decimals(values: Iterable[float | None], power: int) -> int:
    """Decimals that show five significant digits of the largest of the values."""
    sizes = [abs(v) for v in values if v is not None and math.isfinite(v) and v != 0]
    return 4 if not sizes else max(0, 4 - math.floor(math.log10(max(sizes) / 10.0**power) + 1e-12))


def unit(name: str, power: int, rich: bool) -> str:
    """``10⁻³ kg/s/m``, in ASCII ``1e-3 kg/s/m``."""
    if power == 0:
        return name
    return f"10{str(power).translate(_SUPERSCRIPT)} {name}" if rich else f"1e{power} {name}"


def gauge(value: float | None, band: float, limit: float | None, *, rich: bool, width: int = 13) -> str:
    """A scale from −2 to +2 limits: brackets at ± the limit, the value, its band.

    >>> gauge(0.25, 0.5, 1.0, rich=False)
    '...[.--o-]...'
    """
    if value is None or not limit or not math.isfinite(value):
        return ""
    dot, dash, mark, left, right = ("·", "─", "●", "◄", "►") if rich else (".", "-", "o", "<", ">")
    middle, step = width // 2, width // 4

    def place(number: float) -> int:
        return middle + round(max(-2.5, min(2.5, number / limit)) * step)

    cells = [dot] * width
    cells[middle] = "│" if rich else "|"
    for column in range(max(place(value - band), 0), min(place(value + band), width - 1) + 1):
        cells[column] = dash
    cells[middle - step], cells[middle + step] = "[", "]"
    at = place(value)
    cells[min(max(at, 0), width - 1)] = left if at < 0 else right if at >= width else mark
    return "".join(cells)
