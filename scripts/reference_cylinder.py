"""The published channel-cylinder benchmark at Re 20, solved at high order, exported coarsely.

Case 2D-1 of Schäfer & Turek (1996): a channel 2.2 by 0.41, a cylinder of diameter 0.1
at (0.2, 0.2), ρ = 1, ν = 0.001, parabolic inflow of mean speed 0.2. Reference values
(Nabh 1998): drag coefficient 5.57953523384, lift coefficient .010618948146, pressure
difference between front and rear .11752016697.

Run ``python scripts/reference_cylinder.py`` (needs ngsolve, in the ``test`` extra) to
write tests/data/cylinder_re20.vtu: velocity and pressure of a Taylor-Hood solution of
degree 6/5 at the vertices of an independent coarse triangulation whose vertices lie on
the true circle, and beside it a JSON file of the reference values and those that the
solution itself gave. The drag coefficient of the solution is right to 1e-8, so that what
the export loses is due to the export.
"""

from __future__ import annotations

import json
import os
from pathlib import Path
from typing import NamedTuple

import numpy as np
from trial_meshes import Cells, with_hole
from write_case import write_case

CHANNEL = (0.0, 0.0, 2.2, 0.41)
CYLINDER = (0.2, 0.2, 0.05)
VISCOSITY, MEAN_SPEED = 1e-3, 0.2
REFERENCE = {"cd": 5.57953523384, "cl": 0.010618948146, "pressure_difference": 0.11752016697}
DATA = Path(__file__).parents[1] / "tests" / "data"


class Solution(NamedTuple):
    """A solved flow: NGSolve's mesh and functions, and the numbers of the benchmark."""

    mesh: object
    velocity: object
    pressure: object
    cd: float
    cl: float
    pressure_difference: float
    unknowns: int


def solve(order: int = 6, h: float = 0.05, h_cylinder: float = 0.008) -> Solution:
    """Newton's method on Taylor-Hood elements of degree (order, order − 1), curved at the circle.

    Drag and lift come from the residual tested with a unit velocity on the cylinder,
    which converges twice as fast as integrating the stress.
    """
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")  # small fronts: threads cost ten times more
    import ngsolve as ng
    from netgen.occ import Circle, OCCGeometry, Rectangle, X

    x1, y1 = CHANNEL[2:]
    shape = Rectangle(x1, y1).Face()
    shape.edges.name = "wall"
    shape.edges.Min(X).name = "inlet"
    shape.edges.Max(X).name = "outlet"
    disc = Circle((CYLINDER[0], CYLINDER[1]), CYLINDER[2]).Face()
    disc.edges.name = "cylinder"
    disc.edges.maxh = h_cylinder
    mesh = ng.Mesh(OCCGeometry(shape - disc, dim=2).GenerateMesh(maxh=h, grading=0.25))
    mesh.Curve(order + 1)

    fixed = "wall|inlet|cylinder"
    space = ng.VectorH1(mesh, order=order, dirichlet=fixed) * ng.H1(mesh, order=order - 1)
    (u, p), (w, q) = space.TnT()
    nu = VISCOSITY
    stokes = nu * ng.InnerProduct(ng.Grad(u), ng.Grad(w)) - ng.div(w) * p - ng.div(u) * q
    form = ng.BilinearForm(space)
    form += (stokes + (ng.Grad(u) * u) * w) * ng.dx
    state = ng.GridFunction(space)
    velocity, pressure = state.components
    profile = 6 * MEAN_SPEED * ng.y * (y1 - ng.y) / y1**2
    velocity.Set(ng.CF((profile, 0)), definedon=mesh.Boundaries("inlet"))

    def correct(matrix, residual):
        change = matrix.Inverse(space.FreeDofs(), inverse="umfpack") * residual
        state.vec.data -= change
        return float(ng.sqrt(abs(ng.InnerProduct(change, residual))))

    start = ng.BilinearForm(stokes * ng.dx).Assemble()
    residual = state.vec.CreateVector()
    residual.data = start.mat * state.vec
    correct(start.mat, residual)
    for _ in range(12):
        form.Apply(state.vec, residual)
        form.AssembleLinearization(state.vec)
        if correct(form.mat, residual) < 1e-13:
            break
    else:
        raise ArithmeticError("Newton's method did not converge")

    form.Apply(state.vec, residual)
    force = []
    for direction in ((1, 0), (0, 1)):
        test = ng.GridFunction(space)
        test.components[0].Set(ng.CF(direction), definedon=mesh.Boundaries("cylinder"))
        force.append(-ng.InnerProduct(residual, test.vec))
    scale = 2 / (MEAN_SPEED**2 * 2 * CYLINDER[2])
    front, rear = (pressure(mesh(x, 0.2)) for x in (0.15, 0.25))
    return Solution(
        mesh, velocity, pressure, scale * force[0], scale * force[1], float(front - rear), space.ndof
    )


def sample(solution: Solution, points: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Velocity (n, 2) and pressure (n,) at points of the channel; no slip is put in exactly.

    On the circle the pressure is taken 1e-9 away from it, where the curved elements surely are.
    """
    cx, cy, radius = CYLINDER
    away = points - [cx, cy]
    distance = np.hypot(*away.T)
    on_circle = np.abs(distance - radius) < 1e-10
    at = np.where(on_circle[:, None], [cx, cy] + away * ((radius + 1e-9) / distance)[:, None], points)
    located = [solution.mesh(float(x), float(y)) for x, y in at]
    u = np.array([solution.velocity(m) for m in located])
    p = np.array([solution.pressure(m) for m in located])
    u[on_circle | (points[:, 1] == CHANNEL[1]) | (points[:, 1] == CHANNEL[3])] = 0.0
    return u, p


def coarse_mesh(h: float = 0.037, h_cylinder: float = 0.0065) -> Cells:
    """About 2,170 triangles, independent of the solver's mesh."""
    return with_hole(CHANNEL, CYLINDER, h, h_cylinder, growth=0.2, seed=20)


def main() -> None:
    solution = solve()
    cells = coarse_mesh()
    velocity, pressure = sample(solution, cells.points)
    DATA.mkdir(exist_ok=True)
    write_case(
        DATA / "cylinder_re20.vtu",
        cells,
        {"velocity": velocity, "pressure": pressure},
        compressed=True,
    )
    facts = {
        "case": "channel-cylinder benchmark 2D-1, Re 20, point values at vertices",
        "source": "Schäfer & Turek 1996; Nabh 1998",
        "reference": REFERENCE,
        "solution": {
            "cd": solution.cd,
            "cl": solution.cl,
            "pressure_difference": solution.pressure_difference,
            "unknowns": solution.unknowns,
        },
        "cells": len(cells.sizes),
        "points": len(cells.points),
        "fluid": {"density": 1.0, "viscosity": VISCOSITY},
        "mean_speed": MEAN_SPEED,
        "cylinder": {"centre": CYLINDER[:2], "radius": CYLINDER[2]},
        "channel": CHANNEL,
    }
    (DATA / "cylinder_re20.json").write_text(
        json.dumps(facts, indent=1, ensure_ascii=False) + "\n", encoding="utf-8"
    )
    print(json.dumps(facts, indent=1, ensure_ascii=False))


if __name__ == "__main__":
    main()
