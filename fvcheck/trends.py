"""What a number does over the steps of a run: settles, swings, wanders."""

from __future__ import annotations

import itertools
from dataclasses import dataclass

import numpy as np

from fvcheck.timeweights import integral_weights

Array = np.ndarray

# Share of the record, from its end, that settling is judged by, and its least number of steps.
_TAIL, _LEAST = 0.25, 4

# A tail that stays within this share of the tolerance has settled.
_SETTLED = 0.25

# Share of the variance that a period with its harmonics must explain to be one.
_EXPLAINED = 0.9
_HARMONICS = 3

# Whole periods a record must hold, and values each of them.
_PERIODS, _PER_PERIOD = 2.0, 6

# Two-sided 95 % factors of Student's t (GUM, JCGM 100:2008, table G.2) for 1 to 10 degrees of freedom.
_T95 = (12.706, 4.303, 3.182, 2.776, 2.571, 2.447, 2.365, 2.306, 2.262, 2.228)


@dataclass(frozen=True)
class Trend:
    """One quantity over the steps of a run.

    surface, name, unit : which; ``name`` is a row's label with ``imbalance`` (in % of the scale),
        ``flux`` or ``force``; of a body in place of a surface "drag, ROUTE" and the like
    level : mean of the last quarter of the steps
    drift : change per step there, by a straight line
    reduction : first value over the last one, in magnitude
    settled : whether the last quarter stays within a quarter of the tolerance, or its periods repeat
    mean, mean_band : over whole periods where there are any, else behind the start-up; the band (None
        for a single value) is that of 95 % for correlated values
    amplitude : half of highest minus lowest there
    period, period_band : of the dominant oscillation [time, else steps]; None where there is none
    strouhal : length / (period × velocity) of the reference
    periods : whole periods that the mean is over
    """

    surface: str
    name: str
    unit: str
    level: float
    drift: float
    reduction: float | None
    settled: bool
    mean: float
    mean_band: float | None
    amplitude: float
    period: float | None = None
    period_band: float | None = None
    strouhal: float | None = None
    periods: int = 0


def trend_of(
    surface: str,
    name: str,
    unit: str,
    times: Array,
    values: Array,
    limit: float,
    reference: tuple[float, float] | None = None,
) -> Trend:
    """The trend of ``values`` (n,) at increasing ``times`` (n,).

    limit : the tolerance, in the unit of the values, that settling is measured against
    reference : (length, velocity) for the Strouhal number
    """
    n = len(values)
    tail = slice(max(0, n - max(_LEAST, round(_TAIL * n))), n)
    last = values[tail]
    drift = float(np.polyfit(np.arange(len(last)), last, 1)[0]) if len(last) > 1 else 0.0
    settled = n >= _LEAST and float(np.ptp(last)) <= _SETTLED * limit
    mean_band: float | None
    found = dominant_period(times, values)
    if found is not None:
        period, period_band, start = found
        mean, mean_band, amplitude, count, repeats = _over_periods(times[start:], values[start:], period)
        settled = settled or repeats <= _SETTLED * limit
    else:
        period, period_band, count = None, None, 0
        rest = values[start_up(values) :]
        mean, mean_band = float(rest.mean()), mean_half_width(rest) if len(rest) > 1 else None
        amplitude = 0.5 * float(np.ptp(rest))
    return Trend(
        surface=surface,
        name=name,
        unit=unit,
        level=float(last.mean()),
        drift=drift,
        reduction=abs(float(values[0] / values[-1])) if values[-1] != 0 and n > 1 else None,
        settled=settled,
        mean=mean,
        mean_band=mean_band,
        amplitude=amplitude,
        period=period,
        period_band=period_band,
        strouhal=None if period is None or reference is None else reference[0] / (period * reference[1]),
        periods=count,
    )


def start_up(values: Array) -> int:
    """Steps to leave out at the start: those that make the standard error of the rest smallest.

    The marginal standard error rule (White 1997, Simulation 69, recalled from
    memory), over the first half.
    """
    n = len(values)
    if n < 8:
        return 0
    error = [np.var(values[d:]) / (n - d) for d in range(n // 2 + 1)]
    return int(np.argmin(error))


def mean_half_width(values: Array) -> float:
    """95 % half-width of the mean of correlated values (n,).

    The variance of the mean is s²/n times 1 + 2 Σ ρ_k, autocorrelations summed
    in pairs as long as a pair is positive (Geyer 1992, Statistical Science 7,
    recalled from memory).
    """
    n = len(values)
    if n < 2:
        return 0.0
    about = values - values.mean()
    variance = float(about @ about) / n
    if variance <= (1e-14 * np.abs(values).max(initial=0.0)) ** 2:
        return 0.0
    rho = np.array([about[: n - k] @ about[k:] for k in range(n)]) / (n * variance)
    inflation = -1.0
    for k in range(0, n - 1, 2):
        pair = rho[k] + rho[k + 1]
        if pair <= 0:
            break
        inflation += 2.0 * pair
    independent = max(n / max(inflation, 1.0), 2.0)
    return t95(independent - 1.0) * float(np.sqrt(variance * n / (n - 1) / independent))


def t95(freedom: float) -> float:
    """Two-sided 95 % factor of Student's t."""
    if freedom >= len(_T95):
        return 1.96 + 2.5 / freedom
    return float(np.interp(freedom, np.arange(1, len(_T95) + 1), _T95))


def dominant_period(times: Array, values: Array) -> tuple[float, float, int] | None:
    """Period of the strongest oscillation, its 95 % half-width, and the steps left out at the start.

    None where there is none: the sinusoid with harmonics, about a straight
    line, must explain nine tenths of the variance, fit in twice, and be
    resolved by six values. Later starts are taken where they leave far less.
    """
    n = len(values)
    starts = sorted({min(start_up(values), n // 2), n // 4, n // 2})
    best: tuple[float, float, int] | None = None
    least = 1.0 - _EXPLAINED
    for start in starts:
        found = _fitted(np.asarray(times[start:], float), np.asarray(values[start:], float))
        if found is not None and found[1] < least:
            (frequency, left), least = found, 0.5 * found[1]
            extent = float(times[-1] - times[start])
            # Fisher information of a sinusoid's frequency (Rife & Boorstyn 1974, recalled from memory).
            noise = 2.0 * np.sqrt(6.0 * left / (1.0 - left) / (n - start)) / (np.pi * extent)
            best = 1.0 / frequency, float(noise / frequency**2), start
    return best


def _fitted(t: Array, v: Array) -> tuple[float, float] | None:
    """The frequency whose sinusoid leaves the least share of the variance, and that share.

    Begun at the peak of the spectrum of the values between even times.
    """
    from scipy.optimize import minimize_scalar

    n = len(t)
    if n < _PERIODS * _PER_PERIOD or np.ptp(v) <= 1e-9 * np.abs(v).max(initial=0.0):
        return None
    extent = float(t[-1] - t[0])
    even = np.linspace(t[0], t[-1], n)
    about = np.interp(even, t, v)
    about = about - np.polyval(np.polyfit(even - t[0], about, 1), even - t[0])
    spectrum = np.abs(np.fft.rfft(about * np.hanning(n), 8 * n)) ** 2
    frequency = np.fft.rfftfreq(8 * n, extent / (n - 1))
    spectrum[frequency < (_PERIODS - 0.5) / extent] = 0.0
    spectrum[frequency > (n - 1) / (extent * _PER_PERIOD)] = 0.0
    if not spectrum.any():
        return None
    peak, near = float(frequency[np.argmax(spectrum)]), 0.5 / extent
    best = minimize_scalar(
        lambda f: _left(t, v, f),
        bounds=(max(peak - near, 0.5 * peak), peak + near),
        method="bounded",
        options={"xatol": 1e-9 * peak},
    )
    f = float(best.x)
    return (f, float(best.fun)) if f * extent >= _PERIODS - 0.05 else None


def _left(t: Array, v: Array, f: float) -> float:
    """Share of the variance that a mean, a drift, and a sinusoid with its harmonics leave."""
    columns = [np.ones_like(t), t - t.mean()]
    for k in range(1, _HARMONICS + 1):
        columns += [np.cos(2 * np.pi * k * f * t), np.sin(2 * np.pi * k * f * t)]
    basis = np.column_stack(columns)
    base = v - np.polyval(np.polyfit(t - t.mean(), v, 1), t - t.mean())
    rest = v - basis @ np.linalg.lstsq(basis, v, rcond=None)[0]
    return float((rest @ rest) / (base @ base))


def _over_periods(times: Array, values: Array, period: float) -> tuple[float, float, float, int, float]:
    """Mean over the last whole periods, its half-width, amplitude, their number, last change."""
    count = max(1, int((times[-1] - times[0]) / period + 0.02))
    ends = times[-1] - period * np.arange(count, -1, -1)
    means = np.array([_mean_between(times, values, a, b) for a, b in itertools.pairwise(ends)])
    inside = values[times >= ends[0] - 1e-9 * period]
    spread = float(np.std(means, ddof=1)) if count > 1 else 0.0
    band = t95(count - 1) * spread / np.sqrt(count) if count > 1 else 0.5 * float(np.ptp(inside))
    repeats = abs(float(means[-1] - means[-2])) if count > 1 else np.inf
    return float(means.mean()), float(band), 0.5 * float(np.ptp(inside)), count, repeats


def _mean_between(times: Array, values: Array, start: float, end: float) -> float:
    """Time mean between two times, the ends interpolated by cubics."""
    inner = (times > start) & (times < end)
    start = max(start, float(times[0]))
    t = np.concatenate([[start], times[inner], [end]])
    v = np.concatenate([[_at(times, values, start)], values[inner], [_at(times, values, end)]])
    keep = np.concatenate([[True], np.diff(t) > 1e-9 * (end - start)])
    t, v = t[keep], v[keep]
    return float(integral_weights(t) @ v / (t[-1] - t[0]))


def _at(times: Array, values: Array, time: float) -> float:
    first = int(np.clip(np.searchsorted(times, time) - 2, 0, max(len(times) - 4, 0)))
    t, v = times[first : first + 4], values[first : first + 4]
    weights = [np.prod([(time - b) / (a - b) for b in t if b != a]) for a in t]
    return float(np.dot(weights, v))
