"""The state of the flow at a set of places: all that a law may ask for."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cached_property

import numpy as np

from fvcheck.errors import FieldError
from fvcheck.fluid import Fluid
from fvcheck.sampling.sampled import Sampled

Array = np.ndarray


class MissingData(FieldError):
    """The export and the fluid do not hold what a law needs."""

    def __init__(self, what: str, mend: str) -> None:
        super().__init__(f"no {what}", mend=mend)


@dataclass(frozen=True, eq=False)
class Datum:
    """Levels that cannot matter to a closed balance: mean pressure and mean temperature on its border."""

    pressure: float = 0.0
    temperature: float = 0.0


@dataclass(frozen=True, eq=False)
class State:
    """Fields at q places, with what follows from them.

    fluid : properties; ``fields`` : role -> `Sampled`; ``x`` : (q, 2) places.
    Velocities have three components; the third is out of the plane and has no
    gradient along its own axis. All quantities are SI or any consistent units.
    Everything is computed when asked for; MissingData says what would be needed.
    """

    fluid: Fluid
    fields: Mapping[str, Sampled]
    x: Array
    datum: Datum = field(default_factory=Datum)

    def _constant(self, value: float) -> Array:
        return np.full(len(self.x), value)

    def _property(self, role: str) -> Array | None:
        told = getattr(self.fluid, role)
        if isinstance(told, int | float):
            return self._constant(float(told))
        return self.fields[role].value if role in self.fields else None

    @cached_property
    def density(self) -> Array:
        """(q,) ρ [kg/m³]: told, of a field, or p/(RT) of an ideal gas."""
        known = self._property("density")
        if known is not None:
            return known
        if (
            self.fluid.ideal_gas
            and self.fluid.gas_constant
            and {"pressure", "temperature"} <= set(self.fields)
        ):
            return self.pressure / (self.fluid.gas_constant * self.fields["temperature"].value)
        raise MissingData("density", "Give --density, or name the array with --field density=NAME.")

    @cached_property
    def density_gradient(self) -> Array:
        """(q, 2) ∇ρ; zero where the density is a number."""
        if isinstance(self.fluid.density, int | float):
            return np.zeros((len(self.x), 2))
        if "density" in self.fields:
            return self.fields["density"].gradient
        p, t = self.fields["pressure"], self.fields["temperature"]
        return self.density[:, None] * (p.gradient / p.value[:, None] - t.gradient / t.value[:, None])

    @cached_property
    def velocity(self) -> Array:
        """(q, 3) u, v in the plane and w out of it [m/s]."""
        if "velocity" in self.fields:
            return self.fields["velocity"].value
        if "momentum" in self.fields:
            return self.fields["momentum"].value / self.density[:, None]
        raise MissingData("velocity", "Name its array with --field velocity=NAME (or velocity=VX,VY).")

    @cached_property
    def velocity_gradient(self) -> Array:
        """(q, 3, 2) ∂u_i/∂x_j [1/s]."""
        if "velocity" in self.fields:
            return self.fields["velocity"].gradient
        slope = (
            self.fields["momentum"].gradient - self.velocity[:, :, None] * self.density_gradient[:, None, :]
        )
        return slope / self.density[:, None, None]

    @cached_property
    def divergence(self) -> Array:
        """(q,) ∇·u [1/s]."""
        return self.velocity_gradient[:, 0, 0] + self.velocity_gradient[:, 1, 1]

    @cached_property
    def speed2(self) -> Array:
        """(q,) |u|², all three components."""
        return np.sum(self.velocity**2, axis=1)

    @cached_property
    def pressure(self) -> Array:
        """(q,) static pressure [Pa], from whatever kind the export holds."""
        if "pressure" in self.fields:
            p = self.fields["pressure"].value
            if self.fluid.pressure_kind == "kinematic":
                return p * self.density
            if self.fluid.pressure_kind == "reduced":
                return p + self.density * (self.x @ np.asarray(self.fluid.gravity))
            return p
        if "total_energy" in self.fields and self.fluid.gamma:
            inner = self.fields["total_energy"].value - 0.5 * self.density * self.speed2
            return (self.fluid.gamma - 1.0) * inner
        if self.fluid.ideal_gas and self.fluid.gas_constant and "temperature" in self.fields:
            return self.density * self.fluid.gas_constant * self.fields["temperature"].value
        raise MissingData("pressure", "Name its array with --field pressure=NAME.")

    @property
    def gauge_pressure(self) -> Array:
        """(q,) pressure above the datum."""
        return self.pressure - self.datum.pressure

    @cached_property
    def temperature(self) -> Array:
        """(q,) T [K]: of a field, or p/(ρR) of an ideal gas."""
        if "temperature" in self.fields:
            return self.fields["temperature"].value
        if self.fluid.ideal_gas and self.fluid.gas_constant:
            return self.pressure / (self.density * self.fluid.gas_constant)
        raise MissingData("temperature", "Name its array with --field temperature=NAME.")

    @cached_property
    def temperature_gradient(self) -> Array:
        """(q, 2) ∇T [K/m]."""
        if "temperature" in self.fields:
            return self.fields["temperature"].gradient
        p = self.fields.get("pressure")
        if p is None:
            raise MissingData("temperature", "Name its array with --field temperature=NAME.")
        return self.temperature[:, None] * (
            p.gradient / p.value[:, None] - self.density_gradient / self.density[:, None]
        )

    @cached_property
    def total_energy(self) -> Array:
        """(q,) ρE = ρ(e + ½|u|²) [J/m³] of an ideal gas."""
        if "total_energy" in self.fields:
            return self.fields["total_energy"].value
        if not self.fluid.gamma:
            raise MissingData("ratio of specific heats", "Give --gamma (1.4 for air).")
        return self.pressure / (self.fluid.gamma - 1.0) + 0.5 * self.density * self.speed2

    @cached_property
    def viscosity(self) -> Array | None:
        """(q,) effective dynamic viscosity μ + μ_t [Pa s]; None when none is known: inviscid."""
        known = self._property("viscosity")
        if "eddy_viscosity" in self.fields:
            eddy = self.fields["eddy_viscosity"].value
            return eddy if known is None else known + eddy
        return known

    @cached_property
    def conductivity(self) -> Array | None:
        """(q,) k [W/(m K)]; None when none is known."""
        return self._property("conductivity")

    @cached_property
    def specific_heat(self) -> float:
        """c (c_p) [J/(kg K)]: told, or γR/(γ−1) of an ideal gas."""
        if self.fluid.specific_heat:
            return self.fluid.specific_heat
        if self.fluid.gamma and self.fluid.gas_constant:
            return self.fluid.gamma * self.fluid.gas_constant / (self.fluid.gamma - 1.0)
        raise MissingData("specific heat", "Give --specific-heat.")

    @cached_property
    def stress(self) -> Array | None:
        """(q, 2, 2) in-plane τ = μ(∇u + ∇uᵀ − ⅔(∇·u)1) − ⅔ρk 1 [Pa]; None when inviscid."""
        if self.viscosity is None and "turbulence_energy" not in self.fields:
            return None
        tau = np.zeros((len(self.x), 2, 2), dtype=self.velocity.dtype)
        if self.viscosity is not None:
            g = self.velocity_gradient[:, :2]
            tau += self.viscosity[:, None, None] * (g + np.swapaxes(g, 1, 2))
        tau[:, 0, 0] += self._isotropic_stress
        tau[:, 1, 1] += self._isotropic_stress
        return tau

    @cached_property
    def _isotropic_stress(self) -> Array:
        out = np.zeros(len(self.x))
        if self.viscosity is not None:
            out = out - 2.0 / 3.0 * self.viscosity * self.divergence
        if "turbulence_energy" in self.fields:
            out = out - 2.0 / 3.0 * self.density * self.fields["turbulence_energy"].value
        return out

    def traction_power(self, n: Array) -> Array | None:
        """(q,) u·τ·n, the part of an out-of-plane velocity included; None when inviscid."""
        if self.stress is None:
            return None
        power = np.einsum("qi,qij,qj->q", self.velocity[:, :2], self.stress, n)
        if self.viscosity is not None:
            shear = self.viscosity * np.einsum("qj,qj->q", self.velocity_gradient[:, 2], n)
            power = power + self.velocity[:, 2] * shear
        return power

    @cached_property
    def dissipation(self) -> Array | None:
        """(q,) τ:∇u [W/m³], the shear of an out-of-plane velocity included; None when inviscid."""
        if self.stress is None:
            return None
        work = np.einsum("qij,qij->q", self.stress, self.velocity_gradient[:, :2])
        if self.viscosity is not None:
            work = work + self.viscosity * np.sum(self.velocity_gradient[:, 2] ** 2, axis=1)
        return work

    @cached_property
    def body_force(self) -> Array | None:
        """(q, 2) force per volume [N/m³]: weight, with Boussinesq buoyancy, and a field; None for none."""
        force = None
        g = np.asarray(self.fluid.gravity)
        if np.any(g != 0.0):
            weight = self.density
            if self.fluid.expansion:
                if self.fluid.reference_temperature is None:
                    raise MissingData(
                        "reference temperature for the buoyancy", "Give --reference-temperature."
                    )
                rise = self.temperature - self.fluid.reference_temperature
                weight = weight * (1.0 - self.fluid.expansion * rise)
            force = weight[:, None] * g
        if "body_force" in self.fields:
            told = self.fields["body_force"].value[:, :2]
            force = told if force is None else force + told
        return force
