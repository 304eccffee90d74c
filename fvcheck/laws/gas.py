"""Density, pressure and temperature from whatever fields an export holds, gradients included.

An ideal gas obeys p = ρRT and ρE = p/(γ−1) + ½ρ|u|² (Anderson, Modern
Compressible Flow, chapter 1), so that p and T, p and ρ, ρ and T, ρ and ρE, or
T and ρE are all that is needed.
"""

from __future__ import annotations

from functools import cached_property

import numpy as np

from fvcheck.errors import FieldError
from fvcheck.laws.places import Places
from fvcheck.sampling.sampled import Sampled, uniform

Array = np.ndarray


class MissingData(FieldError):
    """The export and the fluid do not hold what a law needs."""

    def __init__(self, what: str, mend: str) -> None:
        super().__init__(f"no {what}", mend=mend)


class Gas(Places):
    """What thermodynamics gives at the places of a state."""

    def _property(self, role: str) -> Sampled | None:
        """A property told as a number, else its field, else None."""
        told = getattr(self.fluid, role)
        if isinstance(told, int | float):
            return uniform(float(told), len(self.x))
        return self.fields.get(role)

    @cached_property
    def sampled_density(self) -> Sampled:
        """ρ [kg/m³]: told, of a field, p/(RT), or ρE/(c_v T + ½|u|²)."""
        known = self._property("density")
        if known is not None:
            return known
        gas, there = self.fluid, self.fields
        if gas.ideal_gas and gas.gas_constant and "temperature" in there:
            temperature = there["temperature"]
            if "pressure" in there and gas.pressure_kind == "static":
                return there["pressure"].over(temperature.times(gas.gas_constant))
            if gas.gamma and {"total_energy", "velocity"} <= set(there):
                inner = temperature.times(gas.gas_constant / (gas.gamma - 1.0))
                return there["total_energy"].over(inner.plus(there["velocity"].squared(), 0.5))
        raise MissingData("density", "Give --density, or name the array with --field density=NAME.")

    @property
    def density(self) -> Array:
        """(q,) ρ [kg/m³]."""
        return self.sampled_density.value

    @property
    def density_gradient(self) -> Array:
        """(q, 2) ∇ρ; zero where the density is a number."""
        return self.sampled_density.gradient

    @cached_property
    def sampled_velocity(self) -> Sampled:
        """u [m/s]: of a field, or ρu/ρ; three components, the third out of the plane."""
        if "velocity" in self.fields:
            return self.fields["velocity"]
        if "momentum" in self.fields:
            return self.fields["momentum"].over(self.sampled_density)
        raise MissingData("velocity", "Name its array with --field velocity=NAME (or velocity=VX,VY).")

    @cached_property
    def sampled_pressure(self) -> Sampled:
        """Static p [Pa], from whatever kind the export holds, (γ−1)(ρE − ½ρ|u|²), or ρRT."""
        gas = self.fluid
        if "pressure" in self.fields:
            p = self.fields["pressure"]
            if gas.pressure_kind == "kinematic":
                return p.times(self.sampled_density)
            if gas.pressure_kind == "reduced":
                g = np.asarray(gas.gravity)
                height = Sampled(self.x @ g, np.broadcast_to(g, (len(self.x), 2)))
                return p.plus(height.times(self.sampled_density))
            return p
        if "total_energy" in self.fields and gas.gamma:
            kinetic = self.sampled_velocity.squared().times(self.sampled_density)
            return self.fields["total_energy"].plus(kinetic, -0.5).times(gas.gamma - 1.0)
        if gas.ideal_gas and gas.gas_constant and "temperature" in self.fields:
            return self.fields["temperature"].times(self.sampled_density).times(gas.gas_constant)
        raise MissingData("pressure", "Name its array with --field pressure=NAME.")

    @property
    def pressure(self) -> Array:
        """(q,) static pressure [Pa]."""
        return self.sampled_pressure.value

    @cached_property
    def sampled_temperature(self) -> Sampled:
        """T [K]: of a field, or p/(ρR) of an ideal gas."""
        if "temperature" in self.fields:
            return self.fields["temperature"]
        if self.fluid.ideal_gas and self.fluid.gas_constant:
            return self.sampled_pressure.over(self.sampled_density).times(1.0 / self.fluid.gas_constant)
        raise MissingData("temperature", "Name its array with --field temperature=NAME.")

    @property
    def temperature(self) -> Array:
        """(q,) T [K]."""
        return self.sampled_temperature.value

    @property
    def temperature_gradient(self) -> Array:
        """(q, 2) ∇T [K/m]."""
        return self.sampled_temperature.gradient

    @cached_property
    def total_energy(self) -> Array:
        """(q,) ρE = ρ(e + ½|u|²) [J/m³] of an ideal gas."""
        if "total_energy" in self.fields:
            return self.fields["total_energy"].value
        if not self.fluid.gamma:
            raise MissingData("ratio of specific heats", "Give --gamma (1.4 for air).")
        kinetic = 0.5 * self.density * np.sum(self.sampled_velocity.value**2, axis=1)
        return self.pressure / (self.fluid.gamma - 1.0) + kinetic

    @cached_property
    def entropy(self) -> Array:
        """(q,) s = c_v ln(p/ρ^γ) [J/(kg K)], above its level on the border (Anderson, section 1.4)."""
        gas = self.fluid
        if not (gas.ideal_gas and gas.gamma and gas.gas_constant):
            raise MissingData("ideal gas", "Give --gamma and --gas-constant for the entropy law.")
        specific_heat = gas.gas_constant / (gas.gamma - 1.0)
        p, rho = _above_zero(self.pressure), _above_zero(self.density)
        return specific_heat * (np.log(p) - gas.gamma * np.log(rho)) - self.datum.entropy

    @cached_property
    def specific_heat(self) -> float:
        """c (c_p) [J/(kg K)]: told, or γR/(γ−1) of an ideal gas."""
        gas = self.fluid
        if gas.specific_heat:
            return gas.specific_heat
        if gas.gamma and gas.gas_constant:
            return gas.gamma * gas.gas_constant / (gas.gamma - 1.0)
        raise MissingData("specific heat", "Give --specific-heat.")


def _above_zero(values: Array) -> Array:
    """The values, those below a thousandth of the typical one raised to it.

    High degrees overshoot across a shock, even below zero. Where they do, they
    are not used, but their logarithm must not spoil the sums.
    """
    least = 1e-3 * float(np.median(np.real(values))) if len(values) else 0.0
    return np.where(np.real(values) > least, values, max(least, np.finfo(float).tiny))
