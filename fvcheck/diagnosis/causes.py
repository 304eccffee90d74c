"""Set-up errors that may be named, by the law that tells them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import partial

import numpy as np

from fvcheck.diagnosis.cause import Cause, Setting, Told, linear, mapped, tell_number
from fvcheck.diagnosis.columns import KELVIN
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
    found = [] if make is None else [*make(known), *scale_causes(law)]
    return [cause for cause in found if set(cause.model.columns) <= columns]


def storage_cause() -> Cause:
    """What is stored between two states, left out."""

    def tell(fit: Fit) -> Told | None:
        return tell_number(
            fit,
            1.0,
            "storage: the run is unsteady, and what the volumes store is missing",
            "fvcheck history, which takes storage from the snapshots",
        )

    return Cause("storage", linear("storage"), tell, frozenset({"resistance"}), fixed=True)


def mass_causes(known: Setting) -> list[Cause]:
    def turned(axis: str) -> Callable[[Fit], Told | None]:
        return lambda fit: tell_number(
            fit,
            1.0,
            f"the run is axisymmetric about the {axis} axis and was read as plane",
            f"--axisymmetric --axis {axis}",
            lambda flow: replace(
                flow, case=replace(flow.case, symmetry="axisymmetric", axis="xy".index(axis), depth=None)
            ),
        )

    def flat(fit: Fit) -> Told | None:
        return tell_number(
            fit,
            1.0,
            "the run is plane and was read as axisymmetric",
            'symmetry = "planar": leave --axisymmetric out',
            lambda flow: replace(flow, case=replace(flow.case, symmetry="planar", axis=None)),
        )

    return [
        *(Cause(f"axisymmetric-{a}", linear(f"spreading-{a}"), turned(a)) for a in "xy"),
        Cause("plane", linear("gathering"), flat, fixed=True),
    ]


def scale_causes(law: str) -> list[Cause]:
    """A temperature of a gas that is not in kelvin, as the law sees it."""
    return [Cause(name, linear(f"{name}:{law}"), partial(_not_kelvin, name), fixed=True) for name in KELVIN]


def _not_kelvin(name: str, fit: Fit) -> Told | None:
    return tell_number(
        fit,
        1.0,
        f"the temperature is in degrees {name.capitalize()}, a gas needs kelvin",
        "export the temperature in kelvin",
        mapped("temperature", KELVIN[name]),
    )
