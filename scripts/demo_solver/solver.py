"""Steady laminar flow of constant density, with heat, by SIMPLE on collocated cells.

Every equation is advanced by defect correction: the residual is the sum of the
second-order face fluxes, and a simpler matrix turns it into a change. What the
matrix leaves out costs iterations, never accuracy; at convergence the same face
fluxes that ``sums`` reports add up to zero in every cell.

Patankar & Spalding 1972 (SIMPLE), Rhie & Chow 1983 (face fluxes).
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np
from scipy.sparse import csr_array, diags_array
from scipy.sparse.linalg import bicgstab, cg

from .mesh import Mesh
from .operators import Unknown, dot, times

Array = np.ndarray


@dataclass(frozen=True)
class Air:
    """A fluid of constant properties, SI units."""

    density: float = 1.2
    viscosity: float = 1.8e-5
    specific_heat: float = 1005.0
    conductivity: float = 0.026


@dataclass(frozen=True)
class Relaxation:
    """How far each iteration follows the equations; the converged state does not depend on it.

    The linear systems are solved to ``tolerance`` of their right-hand side only, as
    usual in such codes: a run stopped early violates mass as well as momentum.
    """

    velocity: float = 0.7
    pressure: float = 0.3
    temperature: float = 0.9
    tolerance: float = 0.1


@dataclass(frozen=True, eq=False)
class Boundary:
    """Conditions on the B boundary faces; where nothing is fixed the normal gradient is zero.

    velocity_fixed, pressure_fixed, temperature_fixed : (B,) bool
    velocity : (B, 2) float [m/s];  pressure, temperature : (B,) float [Pa], [K]
    volume_flux : (B,) float. ∫ u·n over the face [m²/s], positive outward, where velocity is fixed.
    """

    velocity_fixed: Array
    velocity: Array
    volume_flux: Array
    pressure_fixed: Array
    pressure: Array
    temperature_fixed: Array
    temperature: Array


@dataclass(frozen=True, eq=False)
class State:
    """velocity (N, 2), pressure (N,), temperature (N,), and the mass flux (F,) of every face [kg/(m s)]."""

    velocity: Array
    pressure: Array
    temperature: Array
    flux: Array


@dataclass(frozen=True, eq=False)
class FaceFluxes:
    """What passes each face, owner to neighbour or out of the domain, per metre of depth.

    mass (F,) [kg/(m s)]; pressure and viscous force (F, 2) that the owner exerts on
    what lies beyond [N/m]; momentum (F, 2), all of it [N/m]; convected heat (enthalpy
    above ``reference`` temperature) and conducted heat (F,) [W/m].
    """

    mass: Array
    pressure: Array
    viscous: Array
    momentum: Array
    convected_heat: Array
    conducted_heat: Array

    @property
    def heat(self) -> Array:
        return self.convected_heat + self.conducted_heat


class Solver:
    """One mesh, one fluid, one set of boundary conditions."""

    def __init__(
        self, mesh: Mesh, fluid: Air, boundary: Boundary, relaxation: Relaxation | None = None
    ) -> None:
        self.mesh = mesh
        self.fluid = fluid
        self.boundary = boundary
        self.relaxation = relaxation or Relaxation()
        self.velocity = Unknown(mesh, boundary.velocity_fixed, boundary.velocity)
        self.pressure = Unknown(mesh, boundary.pressure_fixed, boundary.pressure, extrapolated=True)
        # A pressure correction vanishes where the pressure is fixed.
        self.correction = Unknown(mesh, boundary.pressure_fixed, 0 * boundary.pressure, extrapolated=True)
        self.temperature = Unknown(mesh, boundary.temperature_fixed, boundary.temperature)

    def fluxes(self, state: State, reference: float = 0.0) -> FaceFluxes:
        """All second-order face fluxes of a state; heat counts from the ``reference`` temperature [K]."""
        fluid, mass = self.fluid, state.flux
        slope = self.velocity.gradient(state.velocity)
        viscous = -fluid.viscosity * self.velocity.normal_gradient(state.velocity, slope)
        convected = times(mass, self.velocity.convected(state.velocity, slope, mass))
        face_pressure = self.pressure.at_faces(state.pressure, self.pressure.gradient(state.pressure))
        pressure = times(face_pressure, self.mesh.area)
        slope = self.temperature.gradient(state.temperature)
        carried = self.temperature.convected(state.temperature, slope, mass) - reference
        return FaceFluxes(
            mass=mass,
            pressure=pressure,
            viscous=viscous,
            momentum=convected + pressure + viscous,
            convected_heat=fluid.specific_heat * mass * carried,
            conducted_heat=-fluid.conductivity * self.temperature.normal_gradient(state.temperature, slope),
        )

    def start(self, velocity: Array, pressure: Array, temperature: Array) -> State:
        """A first state from cell values, its face fluxes interpolated."""
        flux = self.fluid.density * dot(self._face_velocity(velocity), self.mesh.area)
        return State(velocity, pressure, temperature, self._with_known_flux(flux))

    def march(self, state: State) -> Iterator[State]:
        """The states after 1, 2, 3, … iterations, without end."""
        while True:
            state = self.iterate(state)
            yield state

    def iterate(self, state: State) -> State:
        """One SIMPLE iteration: momentum, mass, then heat."""
        mesh, fluid, relax = self.mesh, self.fluid, self.relaxation
        now = self.fluxes(state)
        unbalanced = mesh.divergence @ now.mass

        # Momentum. What mass a cell still gains or loses carries the cell's own velocity (see ``implicit``).
        matrix = self.velocity.implicit(now.mass, fluid.viscosity)
        residual = times(unbalanced, state.velocity) - mesh.divergence @ now.momentum
        velocity = state.velocity + self._relaxed(matrix, residual, relax.velocity)

        # Mass. Fluxes between collocated cells after Rhie & Chow; the mobility is that of the matrix without
        # relaxation, which therefore leaves no trace in the converged state.
        mobility = mesh.volume / matrix.diagonal()
        flux = self._rhie_chow(velocity, state.pressure, mobility)
        change = self._pressure_change(flux, relax.velocity * mobility)
        flux = flux - fluid.density * self._drive(change, relax.velocity * mobility)
        velocity = velocity - times(relax.velocity * mobility, self.correction.gradient(change))
        pressure = state.pressure + relax.pressure * change

        # Heat.
        matrix = self.temperature.implicit(fluid.specific_heat * flux, fluid.conductivity)
        state = State(velocity, pressure, state.temperature, flux)
        carried = fluid.specific_heat * (mesh.divergence @ flux)
        residual = carried * state.temperature - mesh.divergence @ self.fluxes(state).heat
        return replace(
            state, temperature=state.temperature + self._relaxed(matrix, residual, relax.temperature)
        )

    def _face_velocity(self, velocity: Array) -> Array:
        return self.velocity.at_faces(velocity, self.velocity.gradient(velocity))

    def _with_known_flux(self, flux: Array) -> Array:
        known = self.boundary.velocity_fixed
        flux[self.mesh.n_inner :][known] = self.fluid.density * self.boundary.volume_flux[known]
        return flux

    def _face_mobility(self, mobility: Array) -> Array:
        """(F,) mobility times |S|²/d·S; no flow is driven where the velocity is fixed."""
        mesh = self.mesh
        outer = np.where(self.boundary.velocity_fixed, 0.0, mobility[mesh.owner[mesh.n_inner :]])
        return np.concatenate([self.pressure.between(mobility), outer]) * self.pressure.stretch

    def _drive(self, change: Array, mobility: Array) -> Array:
        """(F,) volume flux along ``delta`` that a pressure change drives backward."""
        across = self.correction.at_neighbour(change) - change[self.mesh.owner]
        return self._face_mobility(mobility) * across

    def _rhie_chow(self, velocity: Array, pressure: Array, mobility: Array) -> Array:
        """Interpolated mass fluxes, less what the third difference of the pressure drives."""
        mesh = self.mesh
        gradient = self.pressure.gradient(pressure)
        smooth = np.concatenate([self.pressure.between(gradient), gradient[mesh.owner[mesh.n_inner :]]])
        across = self.pressure.at_neighbour(pressure) - pressure[mesh.owner]
        rough = self._face_mobility(mobility) * (across - dot(smooth, mesh.delta))
        flux = self.fluid.density * (dot(self._face_velocity(velocity), mesh.area) - rough)
        return self._with_known_flux(flux)

    def _pressure_change(self, flux: Array, mobility: Array) -> Array:
        """Change of pressure whose gradient, acting on ``mobility``, removes the imbalance of ``flux``."""
        mesh, fixed = self.mesh, self.boundary.pressure_fixed
        strength = self.fluid.density * self._face_mobility(mobility)
        strength[mesh.n_inner :] *= fixed
        matrix = (mesh.divergence * strength) @ mesh.divergence.T
        imbalance = mesh.divergence @ flux
        change = _roughly(cg, matrix, -imbalance, self.relaxation.tolerance)
        return change if fixed.any() else change - change.mean()

    def _relaxed(self, matrix: csr_array, residual: Array, factor: float) -> Array:
        """Approximate solution of the equations with their diagonal divided by ``factor``."""
        diagonal = matrix.diagonal()
        matrix = matrix + diags_array(diagonal * (1 / factor - 1))
        columns = residual.reshape(residual.shape[0], -1).T
        solved = [_roughly(bicgstab, matrix, column, self.relaxation.tolerance) for column in columns]
        return np.array(solved).T.reshape(residual.shape)


def _roughly(method: Callable, matrix: csr_array, right: Array, tolerance: float) -> Array:
    """Solution up to a share ``tolerance`` of the right-hand side, with Jacobi preconditioning."""
    size = float(np.linalg.norm(right))
    if size == 0:
        return np.zeros_like(right)
    # Of unit size, since the methods take small right-hand sides for a breakdown.
    jacobi = diags_array(1 / matrix.diagonal())
    return size * method(matrix, right / size, rtol=tolerance, maxiter=500, M=jacobi)[0]
