"""Energies, heat and entropy."""

from __future__ import annotations

import numpy as np

from fvcheck.errors import SetupError
from fvcheck.laws.law import Law, register
from fvcheck.laws.parts import column, field_source, total
from fvcheck.laws.state import MissingData, State

Array = np.ndarray


def _pressure_work(s: State, n: Array) -> Array:
    return column(s.gauge_pressure * np.einsum("qi,qi->q", s.velocity[:, :2], n))


def _viscous_work(s: State, n: Array) -> Array | None:
    power = s.traction_power(n)
    return None if power is None else column(-power)


def _force_power(s: State) -> Array | None:
    return None if s.force_power is None else column(s.force_power)


def _mechanical_source(s: State) -> Array | None:
    expansion = column(s.gauge_pressure * s.divergence)
    lost = None if s.dissipation is None else column(-s.dissipation)
    return total(_force_power(s), expansion, lost)


kinetic_energy = register(
    Law(
        name="kinetic-energy",
        components=(None,),
        unit="W/m",
        density=lambda s: column(0.5 * s.density * s.speed2),
        fluxes={"pressure": _pressure_work, "viscous": _viscous_work},
        source=_mechanical_source,
        datum="pressure",
        summary="mechanical power in equals dissipation and what leaves",
    )
)


def _conduction(s: State, n: Array) -> Array | None:
    if s.conductivity is None:
        return None
    return column(-s.conductivity * np.einsum("qi,qi->q", s.temperature_gradient, n))


def _heat_content(s: State) -> Array:
    if s.fluid.ideal_gas:
        raise SetupError(
            "the heat law is for fluids of constant density",
            mend="Use the total-energy law for an ideal gas.",
        )
    return column(s.density * s.specific_heat * (s.temperature - s.datum.temperature))


def _heat_source(s: State) -> Array | None:
    heating = column(s.dissipation) if s.fluid.viscous_heating and s.dissipation is not None else None
    return total(field_source(s, "heat_source"), heating)


heat = register(
    Law(
        name="heat",
        components=(None,),
        unit="W/m",
        density=_heat_content,
        fluxes={"conductive": _conduction},
        source=_heat_source,
        datum="temperature",
        summary="heat in equals heat out, or is stored",
    )
)


def _gas_energy(s: State) -> Array:
    if not s.fluid.ideal_gas:
        raise MissingData("ideal gas", "Give --gamma (and --gas-constant) for the total-energy law.")
    return column(s.total_energy)


def _full_pressure_work(s: State, n: Array) -> Array:
    return column(s.pressure * np.einsum("qi,qi->q", s.velocity[:, :2], n))


total_energy = register(
    Law(
        name="total-energy",
        components=(None,),
        unit="W/m",
        density=_gas_energy,
        fluxes={"pressure": _full_pressure_work, "viscous": _viscous_work, "conductive": _conduction},
        source=lambda s: total(_force_power(s), field_source(s, "heat_source")),
        summary="internal and kinetic energy of an ideal gas, work and heat included",
    )
)


def _entropy_conduction(s: State, n: Array) -> Array | None:
    heat = _conduction(s, n) if s.fluid.gas_constant else None
    return None if heat is None else heat / column(s.temperature)


def _entropy_source(s: State) -> Array | None:
    heat = field_source(s, "heat_source")
    return None if heat is None else heat / column(s.temperature)


entropy = register(
    Law(
        name="entropy",
        components=(None,),
        unit="W/K/m",
        density=lambda s: column(s.density * s.entropy),
        fluxes={"conductive": _entropy_conduction},
        source=_entropy_source,
        datum="entropy",
        inequality=True,
        on_request=True,
        summary="an ideal gas makes entropy and never destroys it",
    )
)
