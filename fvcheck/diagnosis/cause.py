"""What a cause is: a model of the ledgers, and what a coefficient of it means in words and settings."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field, replace
from typing import Any

import numpy as np

from fvcheck.diagnosis.fitting import Fit, Model
from fvcheck.fields import Field
from fvcheck.flow import Flow

Array = np.ndarray
Change = Callable[[Flow], Flow]

# A coefficient that should be one number may be off by this share, or by its interval.
_NEAR = 0.02


@dataclass(frozen=True, eq=False)
class Told:
    """A cause in words: coefficient and interval, the setting that would express it, the flow with it."""

    cause: str
    coefficient: float
    interval: tuple[float, float]
    setting: str
    change: Change | None = None


@dataclass(frozen=True, eq=False)
class Cause:
    """One candidate.

    makes_idle : others that say the same in a vaguer way
    fixed : its coefficient can be one number only
    """

    name: str
    model: Model
    tell: Callable[[Fit], Told | None]
    makes_idle: frozenset[str] = field(default=frozenset())
    fixed: bool = False


@dataclass(frozen=True, eq=False)
class Setting:
    """What is known of the flow: density, level of temperature on the border."""

    flow: Flow
    density: float
    temperature: float


def linear(*columns: str) -> Model:
    return Model(columns, len(columns))


def factor_of(fit: Fit, number: int = 0) -> tuple[float, float, float] | None:
    """A factor 1 + α and its interval; None unless it may be positive and is not 1."""
    value, half = 1.0 + float(fit.theta[number]), float(fit.half[number])
    if value + half <= 0.0 or abs(value - 1.0) <= half:
        return None
    return value, value - half, value + half


def is_number(value: float, half: float, wanted: float) -> bool:
    return abs(value - wanted) <= max(half, _NEAR * abs(wanted))


def tell_number(
    fit: Fit, wanted: float, cause: str, setting: str, change: Change | None = None
) -> Told | None:
    """A cause whose coefficient can be one number only; None where it is another, or hardly known."""
    value, half = float(fit.theta[0]), float(fit.half[0])
    if not is_number(value, half, wanted) or half > 0.5:
        return None
    return Told(cause, value, (value - half, value + half), setting, change)


def mapped(role: str, function: Callable[[Array], Array]) -> Change:
    """A field replaced by a function of its values."""

    def change(flow: Flow) -> Flow:
        old: Field = flow.fields[role]
        rim = None if old.rim is None else function(np.asarray(old.rim, float))
        new = replace(old, values=function(np.asarray(old.values, float)), rim=rim)
        return replace(flow, fields={**flow.fields, role: new})

    return change


def scaled(role: str, factor: float) -> Change:
    return mapped(role, lambda values: values * factor)


def with_fluid(**changes: Any) -> Change:
    return lambda flow: replace(flow, fluid=replace(flow.fluid, **changes))


def both(*changes: Change | None) -> Change | None:
    there = [change for change in changes if change is not None]
    if len(there) < len(changes):
        return None

    def change(flow: Flow) -> Flow:
        for one in there:
            flow = one(flow)
        return flow

    return change
