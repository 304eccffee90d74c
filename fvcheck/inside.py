"""Whether a law's terms have to be integrated over the volume, or are the same all over it."""

from __future__ import annotations

import numpy as np

from fvcheck.flow import Flow
from fvcheck.laws import Law, MissingData, State
from fvcheck.laws.state import Datum


def bare_state(flow: Flow, about: tuple[float, float] = (0.0, 0.0)) -> State:
    """One place, no fields: what can be had from it is the same everywhere. MissingData for sources."""
    if any("source" in role or role == "body_force" for role in flow.fields):
        raise MissingData("constant sources", "")
    return State(flow.fluid, {}, np.full((1, 2), np.nan), Datum(), about, flow.case.axis)


def varies_inside(
    flow: Flow, law: Law, *, unsteady: bool = False, about: tuple[float, float] = (0.0, 0.0)
) -> bool:
    """Whether the law's volume terms vary over the volume, so that they must be sampled.

    unsteady : its density counts too, by contents that are compared over time
    """
    if flow.has_rates:
        return True
    try:
        constants = [law.source(bare_state(flow, about))]
        if unsteady:
            constants.append(law.density(bare_state(flow, about)))
    except (MissingData, KeyError):
        return True
    there = [values for values in constants if values is not None]
    # What depends on the place comes out as NaN; around an axis so does every volume.
    return any(flow.case.axis is not None or bool(np.isnan(values).any()) for values in there)
