"""A conservation law as data: what is stored, what crosses a surface, what is made inside.

    d/dt ∫ b dV + ∮ [ b (u − w)·n + g·n ] dA − ∫ s dV = imbalance

(Reynolds transport theorem; e.g. White, Fluid Mechanics, chapter 3; Batchelor,
An Introduction to Fluid Dynamics, section 3.1.) A law is the triple (b, g, s)
over a `State`; it knows nothing of meshes.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field

import numpy as np

from fvcheck.errors import SetupError, nearest
from fvcheck.laws.state import State

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Law:
    """One balance law.

    components : ("x", "y") for a vector law, (None,) for a scalar one
    unit : of the flux, per metre of depth
    density : State -> b, (q, c) per volume
    fluxes : part name -> (State, n) -> (q, c) non-convective flux through unit
        normals n (q, 2), outward positive; None where the flow has no such part
    source : State -> (q, c) per volume, or None when nothing is made inside
    level : (State, n) -> (q, c) flux of a uniform state that no closed surface
        can feel; left out of the scale
    tolerance_percent : of the scale, where the user tells none
    inequality : the imbalance is a production that must not be negative
    on_request : left out unless asked for by name
    datum : "pressure", "temperature", "entropy" or "scalar:NAME" where the law
        counts from the mean of that on the border

    A law of one's own, here of the mass of oxygen where the export holds its
    share of the mass as ``scalar:oxygen``:

    >>> import fvcheck
    >>> oxygen = fvcheck.Law(
    ...     name="oxygen",
    ...     components=(None,),
    ...     unit="kg/s/m",
    ...     density=lambda s: (s.density * s.scalar("oxygen").value)[:, None],
    ...     on_request=True,
    ... )
    >>> fvcheck.register(oxygen).name
    'oxygen'
    >>> "oxygen" in fvcheck.laws.law_names()
    True
    """

    name: str
    components: tuple[str | None, ...]
    unit: str
    density: Callable[[State], Array]
    fluxes: Mapping[str, Callable[[State, Array], Array | None]] = field(default_factory=dict)
    source: Callable[[State], Array | None] = lambda state: None
    level: Callable[[State, Array], Array] | None = None
    tolerance_percent: float = 1.0
    summary: str = ""
    inequality: bool = False
    on_request: bool = False
    datum: str | None = None


_LAWS: dict[str, Law] = {}
_FAMILIES: dict[str, Callable[[str], Law]] = {}


def register(law: Law) -> Law:
    """Make a law known under its name; a user's own law registers like the built-in ones."""
    if law.name in _LAWS:
        raise SetupError(f"a law named {law.name!r} is registered already", mend="Choose another name.")
    _LAWS[law.name] = law
    return law


def register_family(prefix: str, law_of: Callable[[str], Law]) -> None:
    """Make laws known under ``PREFIX:NAME``, each from its NAME."""
    _FAMILIES[prefix] = law_of


def law_names() -> tuple[str, ...]:
    """Names of all registered laws, in the order of registration."""
    return tuple(_LAWS)


def find_law(name: str) -> Law:
    """The law of that name; SetupError naming the nearest one otherwise."""
    if name in _LAWS:
        return _LAWS[name]
    prefix, _, rest = name.partition(":")
    if prefix in _FAMILIES and rest:
        return _FAMILIES[prefix](rest)
    known = [*_LAWS, *(f"{family}:NAME" for family in _FAMILIES)]
    raise SetupError(f"unknown law {name!r}", mend=nearest(name, _LAWS) or f"Known laws: {', '.join(known)}.")


def convective(law: Law, state: State, n: Array, surface_velocity: Array | None) -> Array:
    """(q, c) b (u − w)·n through unit normals n (q, 2)."""
    return law.density(state) * throughflow(state, n, surface_velocity)[:, None]


def throughflow(state: State, n: Array, surface_velocity: Array | None) -> Array:
    """(q,) (u − w)·n through unit normals n (q, 2)."""
    relative = state.velocity[:, :2]
    if surface_velocity is not None:
        relative = relative - surface_velocity
    through: Array = np.einsum("qi,qi->q", relative, n)
    return through
