"""The state of the flow at a set of places: all that a law may ask for."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property

import numpy as np

from fvcheck.laws.gas import Gas, MissingData
from fvcheck.laws.places import Datum
from fvcheck.sampling.sampled import Sampled

__all__ = ["Datum", "MissingData", "State"]

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class State(Gas):
    """Fields at q places, with what follows from them.

    Arguments are those of `Places`; thermodynamics stands in `Gas`. Velocities
    have three components; the third is out of the plane and has no gradient
    along its own axis. In an axisymmetric run it is the swirl, and divergence,
    stress and forces carry the terms of cylindrical coordinates (Batchelor, An
    Introduction to Fluid Dynamics, appendix 2). All quantities are SI or any
    consistent units. Everything is computed when asked for; MissingData says
    what would be needed.
    """

    @property
    def velocity(self) -> Array:
        """(q, 3) u, v in the plane and w out of it [m/s]."""
        return self.sampled_velocity.value

    @property
    def velocity_gradient(self) -> Array:
        """(q, 3, 2) ∂u_i/∂x_j [1/s]."""
        return self.sampled_velocity.gradient

    @cached_property
    def divergence(self) -> Array:
        """(q,) ∇·u [1/s], with u_r/r in an axisymmetric run."""
        plane = self.velocity_gradient[:, 0, 0] + self.velocity_gradient[:, 1, 1]
        return plane if self.axis is None else plane + self.hoop_rate

    @cached_property
    def hoop_rate(self) -> Array:
        """(q,) u_r/r [1/s], the stretching around the axis of an axisymmetric run."""
        assert self.axis is not None
        return self.velocity[:, 1 - self.axis] * self.per_radius

    @cached_property
    def speed2(self) -> Array:
        """(q,) |u|², all three components."""
        return np.sum(self.velocity**2, axis=1)

    @property
    def gauge_pressure(self) -> Array:
        """(q,) pressure above the datum."""
        return self.pressure - self.datum.pressure

    def _dynamic(self, role: str) -> Array | None:
        """A viscosity by its role, or ρ times the kinematic one."""
        known = self._property(role) if role == "viscosity" else self.fields.get(role)
        if known is not None:
            return known.value
        kinematic = self.fields.get(f"kinematic_{role}")
        return None if kinematic is None else self.density * kinematic.value

    @cached_property
    def eddy_viscosity(self) -> Array | None:
        """(q,) μ_t [Pa s], of a field of it or of ν_t; None when there is none."""
        return self._dynamic("eddy_viscosity")

    @cached_property
    def viscosity(self) -> Array | None:
        """(q,) effective dynamic viscosity μ + μ_t [Pa s]; None when none is known: inviscid."""
        known, eddy = self._dynamic("viscosity"), self.eddy_viscosity
        if known is None or eddy is None:
            return eddy if known is None else known
        return known + eddy

    @cached_property
    def conductivity(self) -> Array | None:
        """(q,) k + c_p μ_t/Pr_t [W/(m K)]; None when neither is known."""
        known = self._property("conductivity")
        k = None if known is None else known.value
        if self.eddy_viscosity is None or (k is None and not self._knows_heat):
            return k
        eddy = self.specific_heat * self.eddy_viscosity / self.fluid.turbulent_prandtl
        return eddy if k is None else k + eddy

    @property
    def _knows_heat(self) -> bool:
        return bool(self.fluid.specific_heat or (self.fluid.gamma and self.fluid.gas_constant))

    def scalar(self, name: str) -> Sampled:
        """The transported scalar of that name; MissingData where there is none."""
        if f"scalar:{name}" not in self.fields:
            raise MissingData(f"scalar {name}", f"Name its array with --field scalar:{name}=ARRAY.")
        return self.fields[f"scalar:{name}"]

    def mixing(self, name: str) -> Array | None:
        """(q,) Γ = ρD + μ_t/Sc_t of a scalar [kg/(m s)]; None when nothing mixes it."""
        told = self.fluid.diffusivity.get(name)
        gamma = None if told is None else told * self.density
        if self.eddy_viscosity is None:
            return gamma
        eddy = self.eddy_viscosity / self.fluid.turbulent_prandtl
        return eddy if gamma is None else gamma + eddy

    @cached_property
    def stress(self) -> Array | None:
        """(q, 2, 2) in-plane τ = μ(∇u + ∇uᵀ − ⅔(∇·u)1) − ⅔ρk 1 [Pa]; None when inviscid."""
        if self.viscosity is None and "turbulence_energy" not in self.fields:
            return None
        # Component by component along memory: whole volumes pass through here.
        tau = np.zeros((2, 2, len(self.x)), dtype=self.velocity.dtype).transpose(2, 0, 1)
        if self.viscosity is not None:
            g = self.velocity_gradient
            for i, j in ((0, 0), (0, 1), (1, 1)):
                tau[:, i, j] = self.viscosity * (g[:, i, j] + g[:, j, i])
            tau[:, 1, 0] = tau[:, 0, 1]
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

    @cached_property
    def hoop_stress(self) -> Array | None:
        """(q,) τ_θθ = 2μ u_r/r − ⅔μ∇·u − ⅔ρk [Pa] of an axisymmetric run; None when inviscid."""
        if self.stress is None:
            return None
        stretching = 0.0 if self.viscosity is None else 2.0 * self.viscosity * self.hoop_rate
        return self._isotropic_stress + stretching

    @cached_property
    def cross_shear(self) -> Array | None:
        """(q, 2) shear stress out of the plane on planes normal to x, y [Pa]: μ∇w, less μw/r along r."""
        if self.viscosity is None:
            return None
        slope = self.velocity_gradient[:, 2]
        if self.axis is not None:
            slope = slope + 0.0
            slope[:, 1 - self.axis] -= self.velocity[:, 2] * self.per_radius
        return self.viscosity[:, None] * slope

    @cached_property
    def _out_of_plane(self) -> bool:
        """Whether anything moves out of the plane."""
        return bool(np.any(self.velocity[:, 2]) or np.any(self.velocity_gradient[:, 2]))

    def traction_power(self, n: Array) -> Array | None:
        """(q,) u·τ·n, the part of an out-of-plane velocity included; None when inviscid."""
        if self.stress is None:
            return None
        power = np.einsum("qi,qij,qj->q", self.velocity[:, :2], self.stress, n)
        if self._out_of_plane and self.cross_shear is not None:
            power = power + self.velocity[:, 2] * np.einsum("qj,qj->q", self.cross_shear, n)
        return power

    @cached_property
    def dissipation(self) -> Array | None:
        """(q,) τ:∇u [W/m³], the shear of an out-of-plane velocity included; None when inviscid."""
        if self.stress is None:
            return None
        work = np.einsum("qij,qij->q", self.stress, self.velocity_gradient[:, :2])
        if self.viscosity is not None and self._out_of_plane and self.cross_shear is not None:
            safe = np.where(self.viscosity == 0.0, 1.0, self.viscosity)
            work = work + np.sum(self.cross_shear**2, axis=1) / safe
        if self.axis is not None and self.hoop_stress is not None:
            work = work + self.hoop_stress * self.hoop_rate
        return work

    @cached_property
    def body_force(self) -> Array | None:
        """(q, 2) force per volume [N/m³]; None for none.

        Weight, with Boussinesq buoyancy; in a rotating frame the Coriolis force
        −2ρ Ω×u and the centrifugal one ρΩ²(x − x₀) (Batchelor, section 3.2);
        and a field.
        """
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
        if self._frame_force is not None:
            inertia = self._frame_force[:, :2]
            force = inertia if force is None else force + inertia
        if "body_force" in self.fields:
            told = self.fields["body_force"].value[:, :2]
            force = told if force is None else force + told
        return force

    @cached_property
    def _frame_force(self) -> Array | None:
        """(q, 3) Coriolis and centrifugal force of a turning frame [N/m³]; None in one at rest.

        In an axisymmetric run the frame turns about the axis, right-handed.
        """
        rate = self.fluid.frame_rate
        if not rate:
            return None
        u = self.velocity
        out = np.zeros(u.shape, u.dtype)
        if self.axis is None:
            out[:, :2] = 2.0 * rate * np.column_stack([u[:, 1], -u[:, 0]])
            out[:, :2] += rate**2 * (self.x - np.asarray(self.fluid.frame_centre))
        else:
            across = 1 - self.axis
            out[:, across] = 2.0 * rate * self.turn * u[:, 2] + rate**2 * self.radius
            out[:, 2] = -2.0 * rate * self.turn * u[:, across]
        return self.density[:, None] * out

    @cached_property
    def force_across(self) -> Array | None:
        """(q,) body force out of the plane [N/m³]; None for none."""
        told = self.fields["body_force"].value[:, 2] if "body_force" in self.fields else None
        turning = self._frame_force[:, 2] if self._frame_force is not None and self.axis is not None else None
        if told is None or turning is None:
            return turning if told is None else told
        return told + turning

    @cached_property
    def force_power(self) -> Array | None:
        """(q,) work of the body force [W/m³]; None for none."""
        if self.body_force is None:
            return None
        power = np.einsum("qi,qi->q", self.body_force, self.velocity[:, :2])
        if self.force_across is not None:
            power = power + self.force_across * self.velocity[:, 2]
        return power

    @cached_property
    def hoop_force(self) -> Array | None:
        """(q,) what the curvature of the coordinates puts into the radial momentum of an
        axisymmetric run: (p − τ_θθ + ρu_θ²)/r [N/m³]; None in a plane one."""
        if self.axis is None:
            return None
        force = self.pressure + self.density * self.velocity[:, 2] ** 2
        if self.hoop_stress is not None:
            force = force - self.hoop_stress
        return force * self.per_radius
