"""What a wrong or missing setting would leave in a ledger: its signature, in the sign of an imbalance."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from fvcheck.diagnosis.cells import Term
from fvcheck.flow import Flow
from fvcheck.laws import State
from fvcheck.laws.parts import column

Array = np.ndarray

_AXES = "xy"


def _unit(component: int) -> Array:
    return np.eye(2)[component][None, :]


def _along(component: int, amount: Callable[[State], Array]) -> Callable[[State], Array]:
    return lambda s: column(amount(s)) * _unit(component)


def _warmth(s: State) -> Array:
    return s.temperature - s.datum.temperature


def _coriolis(s: State) -> Array:
    """−ρ 2Ω (v, −u) for Ω = 1."""
    return -2.0 * column(s.density) * np.column_stack([s.velocity[:, 1], -s.velocity[:, 0]])


def _resistance(power: int) -> Callable[[State], Array]:
    return lambda s: s.velocity[:, :2] * column(np.sqrt(s.speed2)) ** (power - 1)


def _isotropic(s: State, n: Array) -> Array | None:
    if "turbulence_energy" not in s.fields:
        return None
    return column(2.0 / 3.0 * s.density * s.fields["turbulence_energy"].value) * n


def _dissipated(s: State) -> Array | None:
    return None if s.dissipation is None else -column(s.dissipation)


def _spread_from(axis: int) -> Callable[[State], Array]:
    """ρ u_r/r, what a plane ledger of an axisymmetric flow lacks; the axis runs along x (0) or y (1)."""

    def amount(s: State) -> Array:
        r = s.x[:, 1 - axis]
        away = np.abs(r) > 1e-12 * np.abs(s.x).max(initial=0.0)
        return column(s.density * s.velocity[:, 1 - axis] * np.where(away, 1.0 / np.where(away, r, 1.0), 0.0))

    return amount


# Scales that a temperature may be in, and what they are in kelvin.
KELVIN: dict[str, Callable[[Array], Array]] = {
    "celsius": lambda t: t + 273.15,
    "fahrenheit": lambda t: (t + 459.67) / 1.8,
}


def _denser(kelvin: Callable[[Array], Array]) -> Callable[[State], Array]:
    """Share by which the density of a gas changes whose temperature is not in kelvin: ρ = p/(R T)."""
    return lambda s: s.temperature / kelvin(s.temperature) - 1.0


def _rescaled(kelvin: Callable[[Array], Array], law: str) -> Callable[[State, Array], Array]:
    """What all that the flow carries changes by with that density: ρ, ρu or ½ρu²."""
    share = _denser(kelvin)

    def flux(s: State, n: Array) -> Array:
        mass = column(share(s) * s.density * _through(s, n))
        if law == "momentum":
            return mass * s.velocity[:, :2]
        return mass if law == "mass" else mass * column(0.5 * s.speed2)

    return flux


def _from_pressure_and_temperature(flow: Flow) -> bool:
    """Whether the density follows from both."""
    return flow.fluid.ideal_gas and not {"density", "momentum"} & set(flow.fields)


def terms_of(flow: Flow, laws: tuple[str, ...]) -> dict[str, Term]:
    """The signatures that the laws, and the fields of the flow, give a sense to."""
    out: dict[str, Term] = {}
    gravity = np.asarray(flow.fluid.gravity)
    if "momentum" in laws:
        if flow.fluid.pressure_kind == "reduced":
            # A factor on the data does not change the weight that is added to them.
            out["pressure"] = Term(line=lambda s, n: column(s.pressure - s.density * (s.x @ gravity)) * n)
        for c, name in enumerate(_AXES):
            out[f"force-{name}"] = Term(area=_along(c, lambda s: np.full(len(s.x), -1.0)))
        if "temperature" in flow.fields and not flow.fluid.ideal_gas:
            for c, name in enumerate(_AXES):
                out[f"warmth-{name}"] = Term(area=_along(c, lambda s: -_warmth(s)))
        if not flow.fluid.frame_rate and flow.case.axis is None:
            out["coriolis"] = Term(area=_coriolis)
            out["centrifugal"] = Term(area=lambda s: -column(s.density) * s.x)
        out["resistance"] = Term(area=_resistance(1))
        out["resistance-2"] = Term(area=_resistance(2))
        if "turbulence_energy" in flow.fields:
            out["turbulence"] = Term(line=_isotropic)
    if "heat" in laws:
        out["heating"] = Term(area=lambda s: np.full((len(s.x), 1), -1.0))
        if not flow.fluid.viscous_heating:
            out["dissipation"] = Term(area=_dissipated)
    if "total-energy" in laws:
        out["heating"] = Term(area=lambda s: np.full((len(s.x), 1), -1.0))
        out["pressure-carried"] = Term(line=lambda s, n: column(s.pressure * _through(s, n)))
        out["kinetic-carried"] = Term(line=lambda s, n: column(0.5 * s.density * s.speed2 * _through(s, n)))
    if "temperature" in flow.fields and _from_pressure_and_temperature(flow):
        for name, kelvin in KELVIN.items():
            for law in {"mass", "momentum", "total-energy"} & set(laws):
                out[f"{name}:{law}"] = Term(line=_rescaled(kelvin, law))
    if "mass" in laws and flow.case.axis is not None:
        spread = _spread_from(flow.case.axis)
        out["gathering"] = Term(area=lambda s: -spread(s))
    if "mass" in laws and flow.case.axis is None:
        x0, y0, _, _ = flow.mesh.bounds
        size = max(abs(bound) for bound in flow.mesh.bounds)
        for axis, least in enumerate((y0, x0)):
            if least >= -1e-9 * size:
                out[f"spreading-{_AXES[axis]}"] = Term(area=_spread_from(axis))
    return out


def _through(s: State, n: Array) -> Array:
    return np.einsum("qi,qi->q", s.velocity[:, :2], n)
