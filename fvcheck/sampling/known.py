"""What is known beside cell data: values on no-slip walls, and on patches with data of their own."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from fvcheck.flow import Flow
from fvcheck.sampling.sampled import Sampled
from fvcheck.sampling.sampler import Known
from fvcheck.walls import wall_velocity

Array = np.ndarray


def known_values(flow: Flow, role: str) -> tuple[Known, Array] | None:
    """Where a cell-centred field is known on the domain boundary, and its values (k,) or (k, 3).

    Spots are the middles of boundary edges: on no-slip walls for the velocity,
    and wherever the file gives a value of its own.
    """
    field = flow.fields[role]
    if field.location != "cell":
        return None
    boundary = flow.mesh.boundary
    shape = (len(boundary.edges), *field.values.shape[1:])
    values = np.full(shape, np.nan) if field.rim is None else np.array(field.rim, float)
    if role in ("velocity", "momentum"):
        for name, wall in flow.walls.items():
            if role == "momentum" and any(wall):
                continue  # the density there is not known
            here = boundary.patch == boundary.names.index(name)
            middles = flow.mesh.points[boundary.edges[here]].mean(axis=1)
            values[here] = wall_velocity(wall, middles, flow.case.axis)
    own = np.isfinite(values.reshape(len(values), -1)).all(axis=1)
    if not own.any():
        return None
    middles = flow.mesh.points[boundary.edges[own]].mean(axis=1)
    return Known(boundary.cells[own], middles), values[own]


def same_places(one: Known | None, other: Known | None) -> bool:
    if one is None or other is None:
        return one is other
    return all(np.array_equal(a, b) for a, b in zip(one, other))


def pin_walls(sampled: Mapping[str, Sampled], on_wall: Array, velocity: Array) -> dict[str, Sampled]:
    """The samples with the velocity at no-slip walls set to the wall's own.

    on_wall (q,) bool, velocity (q, 3). Gradients stay those of the fits.
    """
    out = dict(sampled)
    factors = {"velocity": np.ones(len(on_wall))}
    if "density" in out:
        factors["momentum"] = out["density"].value
    for role, factor in factors.items():
        if on_wall.any() and role in out:
            value = out[role].value.copy()
            value[on_wall] = velocity[on_wall] * factor[on_wall, None]
            out[role] = Sampled(value, out[role].gradient)
    return out
