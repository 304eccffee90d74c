"""Natural convection of air in a square cavity, solved at high order, exported coarsely.

De Vahl Davis (1983): hot wall x = 0 at T = 1, cold wall x = 1 at T = 0, the others
adiabatic, Pr = 0.71. In units of the side, the heat diffusivity and the temperature
difference: ρ = c = k = 1, μ = Pr, buoyancy Ra Pr (T − ½) upwards. Later reference values
of the mean Nusselt number: 2.24475, 4.52164 (Hortmann et al. 1990), 8.82513
(Le Quéré 1991) at Ra 1e4, 1e5, 1e6.

Run ``python scripts/reference_cavity.py`` (needs ngsolve, in the ``test`` extra) to write
tests/data/cavity_1e4.vtu and so on: 40 × 40 irregular quadrilaterals, a little finer at
the walls, with point values ``velocity, pressure, temperature`` and the exact averages
over the cells ``cell_velocity, cell_pressure, cell_temperature``; beside them one JSON
file of reference values and of what the solutions themselves gave.
"""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import NamedTuple

import numpy as np
from trial_meshes import Cells, cell_averages, mapped, point_values, quads
from write_case import write_case

PRANDTL = 0.71
NUSSELT = {"1e4": 2.24475, "1e5": 4.52164, "1e6": 8.82513}
DATA = Path(__file__).parents[1] / "tests" / "data"


class Solution(NamedTuple):
    """Values at (x, y) by ``velocity``, ``pressure``, ``temperature``, and the case's numbers."""

    velocity: object
    pressure: object
    temperature: object
    nusselt: float
    u_max: float
    v_max: float
    unknowns: int


def solver_mesh(cells: int):
    """Squares, finer at the walls: cos-spaced, as plain Netgen structure."""
    from ngsolve.meshes import MakeStructured2DMesh

    def place(x, y):
        return 0.5 - 0.5 * np.cos(np.pi * x), 0.5 - 0.5 * np.cos(np.pi * y)

    return MakeStructured2DMesh(quads=True, nx=cells, ny=cells, mapping=place)


def solve(rayleigh: float, order: int = 6, cells: int = 12) -> Solution:
    """Newton's method on Taylor-Hood elements, Ra raised step by step from 1e3.

    The Nusselt number comes from the residual tested with a function that is 1 on the hot wall.
    """
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # small fronts: threads cost ten times more
    import ngsolve as ng

    mesh = solver_mesh(cells)
    space = (
        ng.VectorH1(mesh, order=order, dirichlet=".*")
        * ng.H1(mesh, order=order - 1)
        * ng.H1(mesh, order=order, dirichlet="left|right")
    )
    (u, p, t), (w, q, s) = space.TnT()
    free = space.FreeDofs()
    free.Clear(space.Range(1).start)  # the pressure's level: one corner keeps zero
    ra = ng.Parameter(1e3)
    form = ng.BilinearForm(space)
    form += (
        PRANDTL * ng.InnerProduct(ng.Grad(u), ng.Grad(w))
        + (ng.Grad(u) * u) * w
        - ng.div(w) * p
        - ng.div(u) * q
        - ra * PRANDTL * (t - 0.5) * w[1]
        + ng.grad(t) * ng.grad(s)
        + (u * ng.grad(t)) * s
    ) * ng.dx
    state = ng.GridFunction(space)
    state.components[2].Set(1 - ng.x)
    residual, change = state.vec.CreateVector(), state.vec.CreateVector()
    steps = np.geomspace(1e3, rayleigh, 1 + 2 * round(np.log10(rayleigh / 1e3)))
    for value in steps:
        ra.Set(float(value))
        for _ in range(20):
            form.Apply(state.vec, residual)
            form.AssembleLinearization(state.vec)
            change.data = form.mat.Inverse(free, inverse="umfpack") * residual
            state.vec.data -= change
            if change.Norm() < 1e-9 * state.vec.Norm():
                break
        else:
            raise ArithmeticError(f"Newton's method did not converge at Ra {value:g}")
    form.Apply(state.vec, residual)
    hot = ng.GridFunction(space)
    hot.components[2].Set(1, definedon=mesh.Boundaries("left"))
    nusselt = float(ng.InnerProduct(residual, hot.vec))

    def at(function):
        return lambda x, y: np.squeeze(function(mesh(np.asarray(x, float), np.asarray(y, float))))

    velocity, pressure, temperature = (at(state.components[i]) for i in range(3))
    line, middle = np.linspace(0, 1, 4001), np.full(4001, 0.5)
    return Solution(
        velocity,
        pressure,
        temperature,
        nusselt,
        float(velocity(middle, line)[:, 0].max()),
        float(velocity(line, middle)[:, 1].max()),
        space.ndof,
    )


def coarse_mesh(n: int = 40) -> Cells:
    """n × n quadrilaterals, inner points moved by up to a fifth, wall cells 0.4 of the mean."""

    def pull(points):
        return points - 0.1 * np.sin(2 * np.pi * points)

    cells = mapped(quads((0, 0, 1, 1), 1 / n, seed=83, jitter=0.2), pull)
    return Cells(np.clip(cells.points, 0.0, 1.0), cells.offsets, cells.nodes)


def main() -> None:
    cells = coarse_mesh()
    DATA.mkdir(exist_ok=True)
    facts = {
        "case": "natural convection in a square cavity, Pr 0.71",
        "source": "de Vahl Davis 1983; Hortmann et al. 1990; Le Quéré 1991",
        "cells": len(cells.sizes),
        "points": len(cells.points),
        "walls": {"hot": "x = 0, T = 1", "cold": "x = 1, T = 0", "adiabatic": "y = 0 and y = 1"},
    }
    for name, nusselt in NUSSELT.items():
        rayleigh = float(name)
        solution = solve(rayleigh)
        roles = ("velocity", "pressure", "temperature")
        points = {role: point_values(getattr(solution, role), cells) for role in roles}
        x, y = cells.points.T
        points["velocity"][(x == 0) | (x == 1) | (y == 0) | (y == 1)] = 0.0
        averages = {f"cell_{role}": cell_averages(getattr(solution, role), cells, 7) for role in roles}
        write_case(DATA / f"cavity_{name}.vtu", cells, points, averages, compressed=True)
        facts[name] = {
            "fluid": {
                "density": 1.0,
                "viscosity": PRANDTL,
                "specific_heat": 1.0,
                "conductivity": 1.0,
                "gravity": [0.0, -1.0],
                "expansion": rayleigh * PRANDTL,
                "reference_temperature": 0.5,
                "pressure_kind": "reduced",
            },
            "reference": {"nusselt": nusselt},
            "solution": {
                "nusselt": solution.nusselt,
                "u_max": solution.u_max,
                "v_max": solution.v_max,
                "unknowns": solution.unknowns,
            },
        }
        print(name, facts[name]["solution"], flush=True)
    text = json.dumps(facts, indent=1, ensure_ascii=False)
    (DATA / "cavity.json").write_text(text + "\n", encoding="utf-8")


if __name__ == "__main__":
    main()
