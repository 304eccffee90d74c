"""The built-in laws, a few lines each."""

from __future__ import annotations

import numpy as np

from fvcheck.errors import SetupError
from fvcheck.laws.law import Law, register
from fvcheck.laws.state import MissingData, State

Array = np.ndarray


def _column(values: Array) -> Array:
    return values[:, None]


def _field(state: State, role: str) -> Array | None:
    return _column(state.fields[role].value) if role in state.fields else None


def _total(*parts: Array | None) -> Array | None:
    """Sum of those that exist; None when none does."""
    there = [part for part in parts if part is not None]
    return sum(there[1:], start=there[0]) if there else None


mass = register(
    Law(
        name="mass",
        components=(None,),
        unit="kg/s/m",
        density=lambda s: _column(s.density),
        source=lambda s: _field(s, "mass_source"),
        tolerance_percent=0.5,
        summary="what flows in flows out, or is stored",
    )
)


def _pressure_force(s: State, n: Array) -> Array:
    return _column(s.pressure) * n


def _viscous_force(s: State, n: Array) -> Array | None:
    return None if s.stress is None else -np.einsum("qij,qj->qi", s.stress, n)


momentum = register(
    Law(
        name="momentum",
        components=("x", "y"),
        unit="N/m",
        density=lambda s: _column(s.density) * s.velocity[:, :2],
        fluxes={"pressure": _pressure_force, "viscous": _viscous_force},
        source=lambda s: s.body_force,
        level=lambda s, n: s.datum.pressure * n,
        summary="forces equal the net outflow of momentum",
    )
)


def _pressure_work(s: State, n: Array) -> Array:
    return _column(s.gauge_pressure * np.einsum("qi,qi->q", s.velocity[:, :2], n))


def _viscous_work(s: State, n: Array) -> Array | None:
    power = s.traction_power(n)
    return None if power is None else _column(-power)


def _force_power(s: State) -> Array | None:
    force = s.body_force
    return None if force is None else _column(np.einsum("qi,qi->q", force, s.velocity[:, :2]))


def _mechanical_source(s: State) -> Array | None:
    expansion = _column(s.gauge_pressure * s.divergence)
    lost = None if s.dissipation is None else _column(-s.dissipation)
    return _total(_force_power(s), expansion, lost)


kinetic_energy = register(
    Law(
        name="kinetic-energy",
        components=(None,),
        unit="W/m",
        density=lambda s: _column(0.5 * s.density * s.speed2),
        fluxes={"pressure": _pressure_work, "viscous": _viscous_work},
        source=_mechanical_source,
        summary="mechanical power in equals dissipation and what leaves",
    )
)


def _conduction(s: State, n: Array) -> Array | None:
    if s.conductivity is None:
        return None
    return _column(-s.conductivity * np.einsum("qi,qi->q", s.temperature_gradient, n))


def _heat_content(s: State) -> Array:
    if s.fluid.ideal_gas:
        raise SetupError(
            "the heat law is for fluids of constant density",
            mend="Use the total-energy law for an ideal gas.",
        )
    return _column(s.density * s.specific_heat * (s.temperature - s.datum.temperature))


def _heat_source(s: State) -> Array | None:
    heating = _column(s.dissipation) if s.fluid.viscous_heating and s.dissipation is not None else None
    return _total(_field(s, "heat_source"), heating)


heat = register(
    Law(
        name="heat",
        components=(None,),
        unit="W/m",
        density=_heat_content,
        fluxes={"conductive": _conduction},
        source=_heat_source,
        summary="heat in equals heat out, or is stored",
    )
)


def _gas_energy(s: State) -> Array:
    if not s.fluid.ideal_gas:
        raise MissingData("ideal gas", "Give --gamma (and --gas-constant) for the total-energy law.")
    return _column(s.total_energy)


def _full_pressure_work(s: State, n: Array) -> Array:
    return _column(s.pressure * np.einsum("qi,qi->q", s.velocity[:, :2], n))


total_energy = register(
    Law(
        name="total-energy",
        components=(None,),
        unit="W/m",
        density=_gas_energy,
        fluxes={"pressure": _full_pressure_work, "viscous": _viscous_work, "conductive": _conduction},
        source=lambda s: _total(_force_power(s), _field(s, "heat_source")),
        summary="internal and kinetic energy of an ideal gas, work and heat included",
    )
)
