"""What the solver itself says about conservation: exact sums over its own faces.

Per metre of depth, positive out of the fluid (out of the cells in question):
mass in kg/(m s), momentum and forces in N/m, heat in W/m. Heat carried by the
stream counts from the inlet temperature.
"""

from __future__ import annotations

from typing import Any

import numpy as np

from .case import Case
from .mesh import Mesh
from .solver import FaceFluxes, Solver, State

Array = np.ndarray


def scales(case: Case) -> dict[str, float]:
    """Throughflow of mass [kg/(m s)], momentum [N/m] and heat [W/m] that residuals are divided by."""
    mass = case.fluid.density * case.mean_speed * case.duct.height
    warming = case.bar_temperature - case.inlet_temperature
    return {
        "mass": mass,
        "momentum": mass * case.mean_speed,
        "heat": mass * case.fluid.specific_heat * warming,
    }


def residuals(case: Case, mesh: Mesh, fluxes: FaceFluxes) -> dict[str, float]:
    """Sum over the cells of what does not balance in each, over ``scales``."""
    return {
        law: float(np.abs(mesh.divergence @ getattr(fluxes, law)).sum() / scale)
        for law, scale in scales(case).items()
    }


def closure(mesh: Mesh, fluxes: FaceFluxes) -> dict[str, float]:
    """Net flux through the whole boundary over half the sum of its parts, patch by patch."""
    result = {}
    for law in ("mass", "momentum", "heat"):
        patches = np.array([_sum(getattr(fluxes, law), mesh, name) for name in mesh.names])
        result[law] = float(np.linalg.norm(patches.sum(axis=0)) / (0.5 * np.abs(patches).sum()))
    return result


def report(case: Case, solver: Solver, state: State) -> dict[str, Any]:
    """Everything about one state, ready for JSON."""
    mesh = solver.mesh
    fluxes = solver.fluxes(state, reference=case.inlet_temperature)
    corners = np.diff(mesh.offsets)
    imbalance = mesh.divergence @ fluxes.mass / scales(case)["mass"]
    return {
        "cells": mesh.n_cells,
        "triangles": int((corners == 3).sum()),
        "quadrangles": int((corners == 4).sum()),
        "faces": mesh.n_faces,
        "area": float(mesh.volume.sum()),
        "residuals": residuals(case, mesh, fluxes),
        "largest_mass_imbalance_of_a_cell": float(np.abs(imbalance).max()),
        "closure": closure(mesh, fluxes),
        "patches": {name: _patch(mesh, fluxes, name) for name in mesh.names},
        "bar": _bar(case, mesh, fluxes),
        "slabs": [_slab(mesh, fluxes, *limits) for limits in SLABS],
    }


SLABS = ((0.0121, 0.0203), (0.0081, 0.0302), (0.0302, 0.0451))
"""Stretches of the channel [m] whose cells form a control volume: two around the bar, one behind it."""


def _sum(values: Array, mesh: Mesh, patch: str) -> Array:
    return values[mesh.n_inner :][mesh.on(patch)].sum(axis=0)


def _patch(mesh: Mesh, fluxes: FaceFluxes, name: str) -> dict[str, Any]:
    return {
        "faces": int(mesh.on(name).sum()),
        "length": float(_sum(np.linalg.norm(mesh.area, axis=1), mesh, name)),
        "mass_flow": float(_sum(fluxes.mass, mesh, name)),
        "momentum_flux": _sum(fluxes.momentum, mesh, name).tolist(),
        "convected_momentum": _sum(fluxes.momentum - fluxes.pressure - fluxes.viscous, mesh, name).tolist(),
        "pressure_force": _sum(fluxes.pressure, mesh, name).tolist(),
        "viscous_force": _sum(fluxes.viscous, mesh, name).tolist(),
        "heat_flow": float(_sum(fluxes.heat, mesh, name)),
        "convected_heat": float(_sum(fluxes.convected_heat, mesh, name)),
        "conducted_heat": float(_sum(fluxes.conducted_heat, mesh, name)),
    }


def _bar(case: Case, mesh: Mesh, fluxes: FaceFluxes) -> dict[str, Any]:
    """Force of the air on the bar, which closes the momentum balance, and the heat that the bar gives."""
    force = _sum(fluxes.momentum, mesh, "bar")
    dynamic = 0.5 * case.fluid.density * case.mean_speed**2 * case.duct.bar.length
    return {
        "force": force.tolist(),
        "pressure": _sum(fluxes.pressure, mesh, "bar").tolist(),
        "viscous": _sum(fluxes.viscous, mesh, "bar").tolist(),
        "drag_coefficient": float(force[0] / dynamic),
        "lift_coefficient": float(force[1] / dynamic),
        "heat_rate": float(-_sum(fluxes.heat, mesh, "bar")),
    }


def _slab(mesh: Mesh, fluxes: FaceFluxes, x0: float, x1: float) -> dict[str, Any]:
    """Fluxes out of all cells whose centroid lies between two stations.

    ``drawn`` is what passes interior faces, ``boundary`` what passes wall and bar;
    ``imbalance`` is their sum.
    """
    inside = (mesh.centre[:, 0] > x0) & (mesh.centre[:, 0] < x1)
    sign = inside[mesh.owner].astype(float)
    sign[: mesh.n_inner] -= inside[mesh.neighbour]
    drawn = sign * (np.arange(mesh.n_faces) < mesh.n_inner)
    sides = {"drawn": drawn, "boundary": sign - drawn, "imbalance": sign}
    laws = {"mass": fluxes.mass, "momentum": fluxes.momentum, "heat": fluxes.heat}
    return {
        "criterion": f"{x0} < x of the cell's centroid < {x1}",
        "cells": int(inside.sum()),
        **{side: {law: (sign @ flux).tolist() for law, flux in laws.items()} for side, sign in sides.items()},
    }
