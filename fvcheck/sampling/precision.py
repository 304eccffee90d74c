"""How precisely data are stored, and noise of that size."""

from __future__ import annotations

import numpy as np

Array = np.ndarray


def stored_precision(values: Array) -> float:
    """Relative precision [–] that numbers are stored with, judged by the numbers themselves.

    Half a unit of the last decimal digit when a sample needs 6 to 12
    significant digits (text files; numbers of fewer digits are taken as meant
    exactly), 2⁻²⁴ when all are exact in single precision, else 2⁻⁵³.
    """
    sample = values[:: max(1, len(values) // 512)].astype(float)
    sample = sample[np.isfinite(sample) & (sample != 0.0)]
    if len(sample) == 0 or np.all(sample == sample[0]):
        return 2.0**-53
    for digits in range(5, 13):
        unit = 10.0 ** (np.floor(np.log10(np.abs(sample))) - (digits - 1))
        if np.all(np.abs(np.round(sample / unit) * unit - sample) <= 4e-16 * np.abs(sample)):
            return 0.5 * 10.0 ** (1 - digits) if digits > 5 else 2.0**-53
    return 2.0**-24 if np.array_equal(sample.astype(np.float32).astype(float), sample) else 2.0**-53


def at_random(seed: int, number: int, sources: Array, width: int) -> Array:
    """Numbers (n, width) from -1 to 1 (SplitMix64, Steele, Lea & Flood 2014).

    number, sources : which group of fields, and which data (n,) of it. The numbers depend on the
    datum, not on which others are with it: a surface taken together with others has the
    rounding band that it has alone.
    """
    column = np.arange(width, dtype=np.uint64)
    stream = np.uint64((seed * 0x9E3779B97F4A7C15 + (number << 56)) % 2**64)
    x = (sources.astype(np.uint64)[:, None] << np.uint64(6)) + column + stream
    x = x * np.uint64(0x9E3779B97F4A7C15)
    x = (x ^ (x >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    x = (x ^ (x >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return (x ^ (x >> np.uint64(31))) / 2.0**63 - 1.0
