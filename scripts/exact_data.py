"""Exact flows put on trial meshes, by role, ready for arrays or files."""

from __future__ import annotations

import numpy as np
import trial_meshes as tm
from exact import ExactFlow
from trial_meshes import Cells

Array = np.ndarray

KINDS = ("triangles", "quads", "mixed", "polygons", "quadtree")


def mesh_for(flow: ExactFlow, kind: str, h: float, seed: int = 0) -> Cells:
    """A mesh of cells about h in size on the flow's domain, its hole left out.

    ``kind`` is one of ``KINDS``. Around a hole there are ``triangles`` and ``mixed``
    only. On the suction layer ``h`` is the size along the wall, the lowest cells are a
    sixth of the thickness high, and there are ``triangles``, ``quads`` and ``mixed``.
    """
    if kind not in KINDS:
        raise ValueError(f"mesh kind {kind!r}: expected one of {', '.join(KINDS)}")
    if flow.name == "suction-layer" and kind in ("triangles", "quads", "mixed"):
        return tm.boundary_layer(flow.domain, h, 6 * h / flow.feature, kind=kind, seed=seed)
    if flow.hole is not None:
        if kind not in ("triangles", "mixed"):
            raise ValueError(f"{flow.name} has a hole: mesh kind triangles or mixed")
        cells = tm.with_hole(flow.domain, flow.hole, h, min(h, flow.hole[2] / 2), seed=seed)
        return cells if kind == "triangles" else tm.merged(cells, seed=seed)
    if kind == "quadtree":
        return tm.quadtree(flow.domain, h)
    return getattr(tm, kind)(flow.domain, h, seed)


def flow_data(flow: ExactFlow, cells: Cells, where: str = "point", degree: int = 11) -> dict[str, Array]:
    """``velocity`` (n, 2), ``pressure``, and ``temperature``, ``density`` where they exist.

    where : ``point``, values at the points; ``centroid``, values at the cells' centres;
        ``average``, averages over the cells. Averages of a compressible flow are those of
        mass, momentum and total energy, turned into velocity, pressure and temperature as
        a finite-volume solver does.
    """
    if where == "average":
        return _averages(flow, cells, degree)
    at = {"point": cells.points, "centroid": cells.centroids}
    if where not in at:
        raise ValueError(f"where {where!r}: expected point, centroid or average")
    x, y = at[where].T
    data = {"velocity": flow.velocity(x, y), "pressure": flow.p(x, y)}
    if flow.w is not None:
        data["velocity"] = np.column_stack([data["velocity"], flow.w(x, y)])
    if flow.T is not None:
        data["temperature"] = flow.T(x, y)
    if flow.rho is not None:
        data["density"] = flow.rho(x, y)
    return data


def _averages(flow: ExactFlow, cells: Cells, degree: int) -> dict[str, Array]:
    def average(function):
        return tm.cell_averages(function, cells, degree, flow.jump)

    if flow.rho is None:
        data = {"velocity": average(flow.velocity), "pressure": average(flow.p)}
        if flow.T is not None:
            data["temperature"] = average(flow.T)
        return data
    rho = average(flow.rho)
    velocity = average(lambda x, y: flow.rho(x, y)[..., None] * flow.velocity(x, y)) / rho[:, None]
    energy = average(flow.total_energy)
    pressure = (flow.fluid["gamma"] - 1) * (energy - 0.5 * rho * np.sum(velocity**2, axis=1))
    temperature = pressure / (rho * flow.fluid["gas_constant"])
    return {"velocity": velocity, "pressure": pressure, "temperature": temperature, "density": rho}
