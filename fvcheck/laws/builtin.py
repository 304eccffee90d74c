"""Mass and momentum, linear and angular: a few lines each."""

from __future__ import annotations

import numpy as np

from fvcheck.laws.law import Law, register
from fvcheck.laws.parts import column, field_source
from fvcheck.laws.state import State

Array = np.ndarray

mass = register(
    Law(
        name="mass",
        components=(None,),
        unit="kg/s/m",
        density=lambda s: column(s.density),
        source=lambda s: field_source(s, "mass_source"),
        tolerance_percent=0.5,
        summary="what flows in flows out, or is stored",
    )
)


def _pressure_force(s: State, n: Array) -> Array:
    return column(s.pressure) * n


def _viscous_force(s: State, n: Array) -> Array | None:
    return None if s.stress is None else -np.einsum("qij,qj->qi", s.stress, n)


def _momentum_source(s: State) -> Array | None:
    if s.hoop_force is None:
        return s.body_force
    assert s.axis is not None
    force = np.zeros((len(s.x), 2), s.hoop_force.dtype)
    force[:, 1 - s.axis] = s.hoop_force
    return force if s.body_force is None else force + s.body_force


momentum = register(
    Law(
        name="momentum",
        components=("x", "y"),
        unit="N/m",
        density=lambda s: column(s.density) * s.velocity[:, :2],
        fluxes={"pressure": _pressure_force, "viscous": _viscous_force},
        source=_momentum_source,
        level=lambda s, n: s.datum.pressure * n,
        summary="forces equal the net outflow of momentum",
    )
)


def _moment(s: State, force: Array) -> Array:
    """(q, 1) moment of forces (q, 2) about the point that angular momentum counts from."""
    return column(s.arm[:, 0] * force[:, 1] - s.arm[:, 1] * force[:, 0])


def _swirl(s: State) -> Array:
    """(q, 1) r u_θ."""
    return column(s.radius * s.turn * s.velocity[:, 2])


def _angular_density(s: State) -> Array:
    return column(s.density) * (_moment(s, s.velocity[:, :2]) if s.axis is None else _swirl(s))


def _pressure_moment(s: State, n: Array) -> Array | None:
    # In an axisymmetric run the pressure passes through the axis.
    return _moment(s, _pressure_force(s, n)) if s.axis is None else None


def _viscous_moment(s: State, n: Array) -> Array | None:
    if s.axis is None:
        force = _viscous_force(s, n)
        return None if force is None else _moment(s, force)
    if s.cross_shear is None:
        return None
    return column(-s.radius * s.turn * np.einsum("qj,qj->q", s.cross_shear, n))


def _moment_of_forces(s: State) -> Array | None:
    if s.axis is None:
        return None if s.body_force is None else _moment(s, s.body_force)
    return None if s.force_across is None else column(s.radius * s.turn * s.force_across)


angular_momentum = register(
    Law(
        name="angular-momentum",
        components=(None,),
        unit="N m/m",
        density=_angular_density,
        fluxes={"pressure": _pressure_moment, "viscous": _viscous_moment},
        source=_moment_of_forces,
        level=lambda s, n: _moment(s, s.datum.pressure * n) if s.axis is None else np.zeros((len(n), 1)),
        on_request=True,
        summary="torques equal the net outflow of angular momentum",
    )
)
