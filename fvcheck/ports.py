"""Inlets, outlets and open lines: what passes them, in the engineer's numbers."""

from __future__ import annotations

import numpy as np

from fvcheck.flow import Flow
from fvcheck.laws import MissingData, State
from fvcheck.ledger import Port
from fvcheck.overlay.pieces import Overlay
from fvcheck.sampling.quadrature import PER_PIECE
from fvcheck.surfaces import ControlSurface

Array = np.ndarray

# Throughflow of a patch against that of the busiest one, below which it is no port but a wall.
_LEAST_SHARE = 1e-3


def ports(flow: Flow, surface: ControlSurface, overlay: Overlay, state: State) -> tuple[Port, ...]:
    """Ports among the enclosed patches; for an open surface, the surface itself.

    state : at the line quadrature points of the overlay
    """
    n, weight = _unit(overlay)
    weight = weight * (flow.case.depth or 1.0 if state.axis is None else 2.0 * np.pi * state.radius)
    try:
        through = np.einsum("qi,qi->q", state.velocity[:, :2], n)
    except (MissingData, KeyError):
        return ()
    if not overlay.closed:
        name = surface.name or surface.kind
        everything = np.ones(len(weight), bool)
        patch = surface.target if surface.kind == "patch" else None
        return (_port(patch, None if patch else name, everything, state, through, weight),)
    names = flow.mesh.boundary.names
    patch_of = np.repeat(overlay.patch, PER_PIECE)
    flows = {
        k: np.abs((through * weight)[patch_of == k].sum())
        for k in np.unique(patch_of[patch_of >= 0]).tolist()
    }
    busiest = max([*flows.values(), np.abs((through * weight)[patch_of < 0]).sum() / 2.0], default=0.0)
    return tuple(
        _port(names[k], None, patch_of == k, state, through, weight)
        for k, flow_k in flows.items()
        if flow_k > _LEAST_SHARE * busiest and names[k] not in flow.walls
    )


def _unit(overlay: Overlay) -> tuple[Array, Array]:
    """Unit normals (q, 2) and weights [m] (q,) at the line quadrature points."""
    from fvcheck.sampling.quadrature import along

    _, weights = along(overlay.start, overlay.end)
    length = overlay.lengths
    n = overlay.normals / np.where(length > 0, length, 1.0)[:, None]
    return np.repeat(n, PER_PIECE, axis=0), (length[:, None] * weights).ravel()


def _port(
    patch: str | None, piece: str | None, here: Array, state: State, through: Array, weight: Array
) -> Port:
    u, w = through[here], weight[here]
    area = float(w.sum())
    mean = float((u * w).sum() / area) if area > 0 else None

    def weighted(name: str) -> float | None:
        try:
            carried = (state.density * through)[here] * w
            values = getattr(state, name)
            if name == "pressure":
                values = values + 0.5 * state.density * state.speed2
        except (MissingData, KeyError):
            return None
        net = carried.sum()
        # Without a net flow there is no flow-weighted mean.
        return (
            float((values[here] * carried).sum() / net) if abs(net) > 1e-9 * np.abs(carried).sum() else None
        )

    def factor(power: int) -> float | None:
        if mean is None or abs(mean) <= 1e-9 * np.abs(u).max(initial=0.0):
            return None
        return float((u**power * w).sum() / area / mean**power)

    try:
        mass_flow: float | None = float(((state.density * through)[here] * w).sum())
    except (MissingData, KeyError):
        mass_flow = None
    return Port(
        patch=patch,
        piece=piece,
        area=area,
        mass_flow=mass_flow,
        mean_velocity=mean,
        total_pressure=weighted("pressure"),
        temperature=weighted("temperature"),
        momentum_factor=factor(2),
        kinetic_energy_factor=factor(3),
    )
