"""Two routes along surfaces: p and τ on the body itself, and the momentum ledger of a surface around it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from fvcheck.bands import Crosswise
from fvcheck.errors import SurfaceError
from fvcheck.flow import Flow
from fvcheck.laws import State
from fvcheck.overlay.overlay import lay_over
from fvcheck.routes.chords import chord_rows
from fvcheck.routes.estimate import Estimate
from fvcheck.routes.terms import WIDTH, Terms, View, estimate, fluxes, laws, rows, volume_rows
from fvcheck.sampling.known import known_values
from fvcheck.sampling.sampler import CROSS, DEGREES
from fvcheck.surfaces import ControlSurface
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray

NAMES = {"convective": "momentum", "pressure": "pressure", "viscous": "viscous"}

# A surface holds the whole body when no more than this share of its length is missing.
_WHOLE = 1e-9


def sampled(flow: Flow, surface: ControlSurface, view: View) -> SampledVolume:
    """The flow sampled on a surface; SurfaceError for one outside the domain."""
    placed = surface.resolve(flow.mesh)
    return SampledVolume(flow, placed, lay_over(flow.mesh, placed), laws(), about=view.about)


def body_surface(flow: Flow, view: View) -> Estimate:
    """F = ∮ (p n − τ·n) dA over the body's own patch, n out of the fluid."""
    volume = sampled(flow, ControlSurface.patch(view.body), view)
    everywhere = np.ones(len(volume.places), bool)
    terms = line_terms(volume, 1.0, everywhere, carried=False)
    parts = fluxes(volume, volume.line_state(BEST), volume.normals, None)
    friction = parts.get("viscous", np.zeros((len(volume.places), 3)))
    terms = replace(terms, beyond=chord_rows(volume, view.body, friction))
    return estimate(terms, view, "body-surface", distance=0.0, degrees=volume.degree_shares())


def control_surface(flow: Flow, view: View, surface: ControlSurface, distance: float | None) -> Estimate:
    """F = ∫ s dV − d/dt ∫ ρu dV − ∮ (ρu (u − w)·n + p n − τ·n) dA, over all of the border but the body.

    What passes other enclosed patches is taken off, so a body may touch a
    wall. SurfaceError for a surface that does not hold the whole body.
    """
    volume = sampled(flow, surface, view)
    if not volume.overlay.closed:
        raise SurfaceError("the surface is open", where=volume.surface.text, mend="Draw a closed one.")
    names = flow.mesh.boundary.names
    mine = names.index(view.body)
    on_body = volume.overlay.patch == mine
    edges = flow.mesh.points[flow.mesh.patch_edges(view.body)]
    whole = float(np.hypot(*(edges[:, 1] - edges[:, 0]).T).sum())
    if volume.overlay.lengths[on_body].sum() < (1.0 - _WHOLE) * whole:
        raise SurfaceError(
            f"the surface does not hold the whole of {view.body}",
            where=volume.surface.text,
            mend="Draw it around the body; a surface that cuts it has only a part of the force.",
        )
    terms = line_terms(volume, -1.0, volume.patch != mine, carried=True)
    return estimate(
        terms,
        view,
        "control-surface",
        distance=distance,
        surface=surface.name or None,
        degrees=volume.degree_shares(),
    )


def line_terms(volume: SampledVolume, sign: float, counted: Array, carried: bool) -> Terms:
    """Rows of the border pieces that count ((q,) bool), and of what is inside; ``carried``: momentum too."""

    def border(state: State) -> dict[str, Array]:
        parts = fluxes(volume, state, volume.normals, volume.surface_velocity)
        if not carried:
            parts.pop("convective")
        return {name: value * counted[:, None] for name, value in parts.items()}

    def all_rows(degree: int) -> Array:
        line = volume.per_line_cell(rows(border(volume.line_state(degree)), sign))
        return np.concatenate([line, volume_rows(volume, degree)[0]]) if volume.overlay.closed else line

    first, second, third = (all_rows(degree) for degree in DEGREES)
    return Terms(
        by_degree=(first, second, third),
        best=all_rows(BEST) if volume.falls else None,
        shaken=shaken_sums(volume, lambda state: rows(border(state), sign)),
        reaching=reaching(volume),
        parts=_parts(volume, border(volume.line_state(BEST)), sign),
        cross=Crosswise(volume.per_line_cell(rows(border(volume.line_state(CROSS)), sign)), volume.beside),
    )


def shaken_sums(volume: SampledVolume, to_rows: Callable[[State], Array]) -> Array:
    """(s, 7) sums from data with a shaken last digit."""
    sums = [to_rows(state).sum(axis=0) for state in volume.shaken_line_states()]
    return np.array(sums).reshape(len(sums), WIDTH)


def reaching(volume: SampledVolume) -> Array:
    """(groups,) bool: where errors have one sign and add up.

    Near a jump; on the border where there is friction, since all slopes are
    one-sided there; and where velocity or pressure on it must be extrapolated.
    """
    viscosity = volume.line_state(BEST).viscosity
    if viscosity is not None and np.any(viscosity):
        return volume.on_boundary | volume.line.near_jump
    out = np.zeros(len(volume.line_cells), bool)
    for role in ("velocity", "momentum", "pressure"):
        field = volume.flow.fields.get(role)
        if field is not None and field.location == "cell":
            known = known_values(volume.flow, role)
            cells = np.empty(0, np.int64) if known is None else known[0].cells
            out |= volume.on_boundary & ~np.isin(volume.line_cells, cells)
    return out | volume.line.near_jump


def _parts(volume: SampledVolume, parts: dict[str, Array], sign: float) -> dict[str, tuple[float, float]]:
    """The terms by mechanism over drawn pieces, by patch over the others, and what is inside."""
    names = volume.flow.mesh.boundary.names
    drawn = volume.drawn if volume.overlay.closed else np.ones_like(volume.drawn)
    out = {NAMES[name]: pair(sign * value[drawn].sum(axis=0)) for name, value in parts.items()}
    total = sum(parts.values(), np.zeros((len(volume.patch), 3)))
    for k in np.unique(volume.patch[~drawn]).tolist():
        if np.any(value := sign * total[volume.patch == k].sum(axis=0)):
            out[names[k]] = pair(value)
    return out | (volume_rows(volume, BEST)[1] if volume.overlay.closed else {})


def pair(values: Array) -> tuple[float, float]:
    """The first two of some numbers."""
    return float(values[0]), float(values[1])
