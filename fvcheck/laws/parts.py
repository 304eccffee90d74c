"""Shapes that laws share: columns, sources of a field, sums of what there is."""

from __future__ import annotations

import numpy as np

from fvcheck.laws.state import State

Array = np.ndarray


def column(values: Array) -> Array:
    """(q,) as (q, 1)."""
    return values[:, None]


def field_source(state: State, role: str) -> Array | None:
    """(q, 1) values of a field of sources; None when there is none."""
    return column(state.fields[role].value) if role in state.fields else None


def total(*parts: Array | None) -> Array | None:
    """Sum of those that exist; None when none does."""
    there = [part for part in parts if part is not None]
    return sum(there[1:], start=there[0]) if there else None
