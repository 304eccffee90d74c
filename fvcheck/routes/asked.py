"""What is asked about forces, checked: bodies, routes, references, points, directions."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from fvcheck.errors import LARGEST, SetupError, nearest
from fvcheck.flow import Flow
from fvcheck.routes.estimate import Reference
from fvcheck.surfaces import ControlSurface

METHODS = ("body-surface", "control-surface", "band", "wake", "circulation")

DIRECT = ("body-surface", "control-surface", "band")
"""Routes that need nothing but the flow."""


def default_methods(line: ControlSurface | None, reference: object) -> tuple[str, ...]:
    """Those that need nothing more, and those for which enough is told."""
    more = [*(["wake"] if line is not None else []), *(["circulation"] if reference else [])]
    return (*DIRECT, *more)


def methods_asked(methods: Iterable[str]) -> tuple[str, ...]:
    chosen = tuple(dict.fromkeys([methods] if isinstance(methods, str) else methods))
    for method in chosen:
        if method not in METHODS:
            mend = nearest(method, METHODS) or f"Routes: {', '.join(METHODS)}."
            raise SetupError(f"there is no route {method!r}", mend=mend)
    if not chosen:
        raise SetupError("no route is asked for", mend=f"Routes: {', '.join(METHODS)}.")
    return chosen


def bodies_of(flow: Flow, body: str | Sequence[str] | None) -> list[str]:
    names = flow.mesh.boundary.names
    chosen = flow.mesh.bodies if body is None else [body] if isinstance(body, str) else body
    for name in chosen:
        if name not in names:
            mend = nearest(name, names) or f"Patches: {', '.join(names)}."
            raise SetupError(f"there is no body {name!r}", mend=mend)
    if not chosen:
        raise SetupError("the domain holds no body", mend=f"Name a patch as the body: {', '.join(names)}.")
    return list(dict.fromkeys(chosen))


def reference_of(told: Reference | Mapping[str, Any] | None, body: str) -> Reference | None:
    if told is None or isinstance(told, Reference):
        return told
    known = ("velocity", "length", "density")
    if body in told or not set(told) & set(known):
        return reference_of(told.get(body), body)
    if set(told) != set(known):
        raise SetupError(f"the reference has {', '.join(told)}", mend=f"Give {', '.join(known)}.")
    return Reference(**{name: float(told[name]) for name in known})


def area_of(flow: Flow, reference: Reference | None) -> float | None:
    """Reference area: length times depth; around an axis the disc of that diameter."""
    if reference is None:
        return None
    if flow.case.axis is not None:
        return 0.25 * math.pi * reference.length**2
    return reference.length * (flow.case.depth or 1.0)


def unit_vector(direction: tuple[float, float]) -> tuple[float, float]:
    size = math.hypot(*direction)
    if not (math.isfinite(size) and size > 0):
        raise SetupError(f"the direction of the stream is {direction}", mend="Give a vector, such as 1,0.")
    return direction[0] / size, direction[1] / size


def point_of(
    about: tuple[float, float] | Mapping[str, tuple[float, float]], body: str
) -> tuple[float, float]:
    """The point that moments on a body count from; (0, 0) where none is told for it."""
    x, y = about.get(body, (0.0, 0.0)) if isinstance(about, Mapping) else about
    if not (abs(x) < LARGEST and abs(y) < LARGEST):
        raise SetupError(f"the point of the moment is ({x}, {y})", mend="Give two finite numbers.")
    return float(x), float(y)
