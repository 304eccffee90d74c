"""Forces on bodies over the snapshots of a run, by every route side by side.

What the fluid between a body and a surface around it stores is a part of the
force that the surface tells. Its rate comes from the snapshots beside: the
arrays of a few neighbouring times, weighted (`fvcheck.timeweights`), are fields
like any other and are sampled with them.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from fvcheck.content import TIME_FACTOR, TIME_FACTOR_ENDS
from fvcheck.fields import Field
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.routes import Forces, forces
from fvcheck.routes.asked import area_of, reference_of
from fvcheck.routes.estimate import Estimate, Pair
from fvcheck.routes.found import NUMBERS
from fvcheck.series import Series
from fvcheck.timeweights import rate_weights, window
from fvcheck.trends import Trend, trend_of

Array = np.ndarray

# Snapshots that a rate is taken from, second order in the step, and those that tell its error.
_WIDTH, _WIDER = 3, 5

# A force that keeps within this share of its largest size has settled.
_LIMIT = 0.01


@dataclass(frozen=True)
class ForceSeries:
    """Forces snapshot after snapshot.

    found : one per snapshot
    trends : of each body's drag, lift and moment by each route: ``trend.surface`` is the body,
        ``trend.name`` such as "drag, band"
    """

    found: tuple[Forces, ...]
    trends: tuple[Trend, ...]

    @property
    def hints(self) -> tuple[Hint, ...]:
        """Those of all snapshots; of one kind and body, which differ in numbers only, the last."""
        last = {(hint.code, hint.message.partition(":")[0]): hint for one in self.found for hint in one.hints}
        return tuple(last.values())


def force_series(
    series: Series,
    body: str | Sequence[str] | None = None,
    *,
    strouhal: tuple[float, float] | None = None,
    on_step: Callable[[int], None] | None = None,
    **asked: Any,
) -> ForceSeries:
    """Forces at every snapshot; with times, what is stored counts.

    body, asked : as in `fvcheck.forces`
    strouhal : (length, velocity) for the Strouhal number of trends
    on_step : called with the number of all after each, for a progress bar

    The rate of a stored quantity is of second order in the step, at both ends
    too; what one more snapshot, or one less where there are three,
    changes in it is part of the bands. Where the mesh
    moves or changes from one snapshot to the next, only the body's own surface
    tells the force, and a hint says so. Raises what `fvcheck.forces` and
    `open_flow` do.
    """
    found = []
    for number in range(len(series)):
        found.append(_at(series, number, body, asked))
        if on_step is not None:
            on_step(len(series))
    times = series.times
    steps = np.arange(len(found), dtype=float) if times is None else times
    return ForceSeries(tuple(found), tuple(_trends(found, steps, strouhal)))


def _at(series: Series, number: int, body: str | Sequence[str] | None, asked: Mapping[str, Any]) -> Forces:
    times, flow = series.times, series.flow(number)
    if times is None or len(series) < 2 or flow.has_rates:
        return forces(flow, body, **asked)
    count = len(series)
    if any(series.flow(k).mesh is not flow.mesh for k in range(count)[window(count, number, _WIDER)]):
        hint = Hint("forces-at-rest", "the mesh moves or changes: forces by the body's own surface only")
        only = forces(flow, body, **{**asked, "methods": ["body-surface"]})
        return replace(only, hints=tuple(dict.fromkeys([*only.hints, hint])))

    def rated(width: int) -> Flow:
        near = range(count)[window(count, number, width)]
        return _with_rates([series.flow(k) for k in near], times[list(near)], near.index(number))

    best = forces(rated(_WIDTH), body, **asked)
    # Of two snapshots all that is stored may be off.
    other = forces(flow if count < _WIDTH else rated(_WIDER if count > _WIDTH else 2), body, **asked)
    factor = TIME_FACTOR if 0 < number < count - 1 else TIME_FACTOR_ENDS
    estimates = []
    for one, two in zip(best.estimates, other.estimates):
        told = reference_of(asked.get("reference"), one.body)
        estimates.append(_widened(one, two, factor).with_coefficients(told, area_of(flow, told)))
    return replace(best, estimates=tuple(estimates))


def _with_rates(flows: Sequence[Flow], times: Array, at: int) -> Flow:
    """The flow ``at`` with the rates of change of all its fields."""
    weights, here = rate_weights(times, at), flows[at]
    fields = dict(here.fields)
    for role, field in here.fields.items():
        known = [flow.fields[role] for flow in flows if role in flow.fields]
        alike = all((f.location, f.values.shape) == (field.location, field.values.shape) for f in known)
        if len(known) < len(flows) or not alike:
            continue
        rims = [f.rim for f in known if f.rim is not None]
        fields[f"rate:{role}"] = Field(
            name=f"rate of {field.name}",
            location=field.location,
            values=_weighted(weights, [f.values for f in known]),
            slots=field.slots,
            rim=_weighted(weights, rims) if len(rims) == len(known) else None,
        )
    return replace(here, fields=fields)


def _weighted(weights: Array, values: Sequence[Array]) -> Array:
    out = np.zeros(values[0].shape)
    for weight, value in zip(weights, values):
        out += weight * value
    return out


def _widened(best: Estimate, other: Estimate, factor: float) -> Estimate:
    """The estimate with what another rate of change makes of it added to its bands."""

    def wider(half: float | None, one: float | None, two: float | None) -> float | None:
        return half if half is None or one is None or two is None else half + factor * abs(one - two)

    def pair(half: Pair) -> Pair:
        x, y = (wider(*of_one) for of_one in zip(half, best.force, other.force))
        return x, y

    bands = dict(best.bands)
    for name in set(NUMBERS) & set(bands):
        one, two = getattr(best, name), getattr(other, name)
        bands[name] = {kind: wider(half, one, two) for kind, half in bands[name].items()}
    sampling, resolution = pair(best.sampling_band), pair(best.resolution_band)
    return replace(best, bands=bands, sampling_band=sampling, resolution_band=resolution)


def _trends(found: Sequence[Forces], steps: Array, strouhal: tuple[float, float] | None) -> Iterator[Trend]:
    tables = [{(e.body, e.label): e for e in one.estimates} for one in found]
    keys = [key for key in tables[0] if all(key in table for table in tables)]
    values = {
        (key, n): np.array([_number(table[key], n) for table in tables]) for key in keys for n in NUMBERS
    }
    for body in dict.fromkeys(body for body, _ in keys):
        for name in NUMBERS:
            for key in keys:
                over_time = values[key, name]
                others = ("drag", "lift") if name != "moment" else ("moment",)
                largest = max(float(np.abs(values[key, other]).max()) for other in others)
                if key[0] != body or not np.isfinite(over_time).all() or not largest > 0:
                    continue
                unit, limit = found[0].unit_of(name), _LIMIT * largest
                yield trend_of(body, f"{name}, {key[1]}", unit, steps, over_time, limit, strouhal)


def _number(estimate: Estimate, name: str) -> float:
    value = getattr(estimate, name)
    return float("nan") if value is None else float(value)
