"""Set-up errors that may be named, by the law that tells them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from fvcheck.diagnosis.cause import (
    Cause,
    Setting,
    Told,
    is_number,
    linear,
)
from fvcheck.diagnosis.energy_causes import energy_causes, heat_causes
from fvcheck.diagnosis.fitting import Fit
from fvcheck.diagnosis.momentum_causes import momentum_causes

Array = np.ndarray


def causes_of(law: str, known: Setting, columns: set[str]) -> list[Cause]:
    """The candidates of a law whose signatures are there."""
    make = {
        "mass": mass_causes,
        "momentum": momentum_causes,
        "heat": heat_causes,
        "total-energy": energy_causes,
    }.get(law)
    found = [] if make is None else make(known)
    return [cause for cause in found if set(cause.model.columns) <= columns]


def storage_cause() -> Cause:
    """What is stored between two states, left out."""

    def tell(fit: Fit) -> Told | None:
        value, half = float(fit.theta[0]), float(fit.half[0])
        if not is_number(value, half, 1.0) or half > 0.5:
            return None
        return Told(
            "storage: the run is unsteady, and what the volumes store is missing",
            value,
            (value - half, value + half),
            "fvcheck history, which takes storage from the snapshots",
        )

    return Cause("storage", linear("storage"), tell, frozenset({"resistance"}), fixed=True)


def mass_causes(known: Setting) -> list[Cause]:
    def turned(axis: str) -> Callable[[Fit], Told | None]:
        def tell(fit: Fit) -> Told | None:
            value, half = float(fit.theta[0]), float(fit.half[0])
            if not is_number(value, half, 1.0) or half > 0.5:
                return None
            return Told(
                f"the run is axisymmetric about the {axis} axis and was read as plane",
                value,
                (value - half, value + half),
                f"--axisymmetric --axis {axis}",
                lambda flow: replace(
                    flow, case=replace(flow.case, symmetry="axisymmetric", axis="xy".index(axis), depth=None)
                ),
            )

        return tell

    return [Cause(f"axisymmetric-{a}", linear(f"spreading-{a}"), turned(a)) for a in "xy"]
