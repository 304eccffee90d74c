"""What a check file expects of the numbers: limits, on a row or on a body, and a baseline.

This module needs pydantic from the start; import it inside functions only.
"""

from __future__ import annotations

from typing import Literal

from pydantic import Field, model_validator

from fvcheck.checktable import NUMBER, PERCENT, Percent, Table


class Limit(Table):
    """What a quantity may be: between ``min`` and ``max``, and within a tolerance of ``value``."""

    min: float | None = Field(default=None, description=NUMBER)
    max: float | None = Field(default=None, description=NUMBER)
    value: float | None = Field(default=None, description=NUMBER)
    tolerance: Percent | None = Field(
        default=None, description="a number, zero or more, in the unit of the value"
    )
    tolerance_percent: Percent | None = Field(default=None, description=PERCENT)

    @model_validator(mode="after")
    def _says_something(self) -> Limit:
        tolerances = (self.tolerance, self.tolerance_percent)
        if self.value is None and self.min is None and self.max is None:
            raise ValueError(
                "no limit is given; write { max = … }, { min = … } or { value = …, tolerance = … }"
            )
        if (self.value is not None) != any(t is not None for t in tolerances) or None not in tolerances:
            raise ValueError("value goes with either tolerance or tolerance_percent")
        if self.min is not None and self.max is not None and self.min > self.max:
            raise ValueError("min is above max")
        return self

    def holds(self, number: float) -> bool:
        """Does the number keep the limits? Bounds count as kept; NaN never is."""
        if self.value is not None:
            allowed = self.tolerance if self.tolerance is not None else 0.0
            if self.tolerance_percent is not None:
                allowed = abs(self.value) * self.tolerance_percent / 100
            if not abs(number - self.value) <= allowed:
                return False
        above = self.min is None or number >= self.min
        return above and (self.max is None or number <= self.max)


LIMIT = "limits such as { max = 0.1 } or { value = 1.2, tolerance_percent = 2.0 }"
METHODS = ("body-surface", "control-surface", "band", "wake", "circulation")
LEDGER = (
    "imbalance_percent",
    "imbalance",
    "flux",
    "inflow",
    "outflow",
    "boundary",
    "storage",
    "source",
    "sampling_band",
    "resolution_band",
)
FORCES = ("drag", "lift", "moment")


class Expectation(Table):
    """[[expect]]: limits on one row of the ledger, or on the forces on one body.

    ``verdict`` demands that the row's verdict is this one.
    """

    surface: str | None = Field(default=None, description="the name of a surface")
    law: str | None = Field(default=None, description="the name of a law")
    component: Literal["x", "y", "z"] | None = Field(default=None, description='"x", "y" or "z"')
    verdict: Literal["closed", "undecided", "mesh-limited", "open"] | None = Field(
        default=None, description='"closed", "undecided", "mesh-limited" or "open"'
    )
    imbalance_percent: Limit | None = Field(default=None, description=LIMIT)
    imbalance: Limit | None = Field(default=None, description=LIMIT)
    flux: Limit | None = Field(default=None, description=LIMIT)
    inflow: Limit | None = Field(default=None, description=LIMIT)
    outflow: Limit | None = Field(default=None, description=LIMIT)
    boundary: Limit | None = Field(default=None, description=LIMIT)
    storage: Limit | None = Field(default=None, description=LIMIT)
    source: Limit | None = Field(default=None, description=LIMIT)
    sampling_band: Limit | None = Field(default=None, description=LIMIT)
    resolution_band: Limit | None = Field(default=None, description=LIMIT)
    body: str | None = Field(default=None, description="the name of a body")
    method: Literal["body-surface", "control-surface", "band", "wake", "circulation"] | None = Field(
        default=None, description=", ".join(f'"{method}"' for method in METHODS)
    )
    drag: Limit | None = Field(default=None, description=LIMIT)
    lift: Limit | None = Field(default=None, description=LIMIT)
    moment: Limit | None = Field(default=None, description=LIMIT)

    @model_validator(mode="after")
    def _is_about_one_thing(self) -> Expectation:
        if (self.surface is None) == (self.body is None):
            raise ValueError("an expectation is about either a surface or a body")
        if self.surface is not None and self.law is None:
            raise ValueError("an expectation about a surface needs its law")
        foreign = (
            ("method", *FORCES) if self.surface is not None else ("law", "component", "verdict", *LEDGER)
        )
        for key in foreign:
            if getattr(self, key) is not None:
                raise ValueError(
                    f"{key} does not go with {'surface' if self.surface is not None else 'body'}"
                )
        if self.verdict is None and not self.limits:
            raise ValueError("nothing is expected; add for example imbalance_percent = { max = 0.1 }")
        return self

    @property
    def limits(self) -> dict[str, Limit]:
        """Quantity -> its limits, of those that are given."""
        pairs = ((key, getattr(self, key)) for key in (*LEDGER, *FORCES))
        return {key: limit for key, limit in pairs if limit is not None}


class Baseline(Table):
    """[baseline]: an earlier result that this one has to agree with."""

    file: str = Field(description="the path of a result file")
    tolerance_percent: Percent = Field(description=PERCENT)
