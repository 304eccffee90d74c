"""The demo case: cooling air drawn past a heated bar in the channel of an electronics enclosure.

Air at 300 K enters with a parabolic profile of mean speed 0.12 m/s, passes a bar
held at 330 K, tilted and below mid-height, and leaves to ambient pressure. The
channel walls conduct no heat. The Reynolds number of the bar's length is 32: the
wake is closed and steady. Gravity is neglected.

``REFERENCE`` is what ``reference_demo.py`` found by finite elements of order 5 (of
order 4 all digits but the last of the lift are the same): drag and lift of the bar
[N/m] and the heat that it gives [W/m]. It also found the flow stable: a disturbance
shrinks by a factor of eight every 0.2 s.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np

from .duct import Duct
from .mesh import Mesh
from .solver import Air, Boundary, Relaxation, Solver, State

Array = np.ndarray
REFERENCE = {"drag": 1.227256e-4, "lift": 3.842357e-5, "heat_rate": 8.62404}


@dataclass(frozen=True)
class Case:
    """Everything that is given, SI units; the depth is one metre."""

    duct: Duct = field(default_factory=Duct)
    fluid: Air = field(default_factory=Air)
    mean_speed: float = 0.12
    inlet_temperature: float = 300.0
    bar_temperature: float = 330.0

    def profile(self, y: Array) -> Array:
        """Inflow velocity at heights ``y``: developed flow between plates."""
        s = y / self.duct.height
        return 6 * self.mean_speed * s * (1 - s)

    def profile_below(self, y: Array) -> Array:
        """∫ of the profile from the lower wall up to ``y`` [m²/s]."""
        s = y / self.duct.height
        return self.mean_speed * self.duct.height * s**2 * (3 - 2 * s)

    def solver(self, mesh: Mesh, relaxation: Relaxation | None = None) -> Solver:
        ends = mesh.points[mesh.face_nodes[mesh.n_inner :]]
        inlet, outlet = mesh.on("inlet"), mesh.on("outlet")
        # A face keeps the mean of the profile over its length, so that mass enters exactly.
        inflow = np.where(inlet, self.profile_below(ends[:, 0, 1]) - self.profile_below(ends[:, 1, 1]), 0)
        speed = inflow / np.linalg.norm(ends[:, 1] - ends[:, 0], axis=1)
        boundary = Boundary(
            velocity_fixed=~outlet,
            velocity=np.column_stack([speed, np.zeros_like(speed)]),
            volume_flux=-inflow,
            pressure_fixed=outlet,
            pressure=np.zeros(outlet.size),
            temperature_fixed=mesh.on("inlet", "bar"),
            temperature=np.where(inlet, self.inlet_temperature, self.bar_temperature),
        )
        return Solver(mesh, self.fluid, boundary, relaxation)

    def start(self, solver: Solver) -> State:
        """The undisturbed profile everywhere, as if there were no bar."""
        mesh = solver.mesh
        speed = self.profile(mesh.centre[:, 1])
        velocity = np.column_stack([speed, np.zeros_like(speed)])
        temperature = np.full(mesh.n_cells, self.inlet_temperature)
        return solver.start(velocity, np.zeros(mesh.n_cells), temperature)
