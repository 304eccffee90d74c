"""From sampled momentum fluxes to a force with its bands.

Every route is a sum over pieces of space (a cell's part of a surface, or a
cell). What each piece contributes, by polynomial degree, is a row of seven
numbers; the bands of any of them, or of drag and lift, follow from the rows.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from fvcheck.bands import Bands, Crosswise, bands, spread
from fvcheck.laws import State, find_law
from fvcheck.routes.estimate import Estimate
from fvcheck.sampling.sampler import CROSS, DEGREES
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray

WIDTH = 7
"""Columns of a row: force x, y; moment; pressure x, y; viscous x, y."""

LAWS = ("momentum", "angular-momentum")

# As in the ledger: three standard deviations under a shaken last digit, and
# rounding of our own sums.
_SHAKE_COVERAGE, _ROUNDINGS = 3.0, 256.0


@dataclass(frozen=True)
class View:
    """How forces of a body are told: the point that moments count from, and the unit vector of drag."""

    body: str
    about: tuple[float, float]
    direction: tuple[float, float]
    axis: int | None = None


@dataclass(frozen=True, eq=False)
class Terms:
    """Rows (k, 7) by degree 1, 2, 3 and of what the data support.

    shaken : (s, 7) sums from data with a shaken last digit
    reaching : (m,) bool, leading rows where values are extrapolated
    parts : name -> (x, y), the terms summed
    cross : a second opinion on leading rows, its values (n, 7)
    beyond : (m, 7) each, errors that no degree shows; both bands hold them too
    """

    by_degree: tuple[Array, Array, Array]
    best: Array | None
    shaken: Array
    reaching: Array | None
    parts: Mapping[str, Any]
    cross: Crosswise | None = None
    beyond: Sequence[Array] = ()


def laws() -> list[Any]:
    """The laws of linear and angular momentum."""
    return [find_law(name) for name in LAWS]


def fluxes(volume: SampledVolume, state: Any, normals: Array, moving: Array | None) -> dict[str, Array]:
    """Part -> (q, 3) flux of momentum x, y and of its moment through normals (q, 2)."""
    from fvcheck.laws.law import convective

    linear, angular = laws()
    out = {}
    for name in ("convective", *linear.fluxes):
        if name == "convective":
            force = convective(linear, state, normals, moving)
            arm: Array | None = convective(angular, state, normals, moving)
        else:
            force, arm = linear.fluxes[name](state, normals), angular.fluxes[name](state, normals)
        if force is not None:
            out[name] = np.column_stack([force, np.zeros(len(force)) if arm is None else arm])
    if volume.axis is not None:
        for values in out.values():
            # Once around the axis, forces across it cancel.
            values[:, 1 - volume.axis] = 0.0
    return out


def rows(parts: Mapping[str, Array], sign: float) -> Array:
    """(q, 7) rows of fluxes, each times ``sign``."""
    count = len(next(iter(parts.values())))
    none = np.zeros((count, 3))
    pressure, viscous = parts.get("pressure", none), parts.get("viscous", none)
    total = sum(parts.values(), none)
    return sign * np.column_stack([total, pressure[:, :2], viscous[:, :2]])


def volume_rows(volume: SampledVolume, degree: int) -> tuple[Array, dict[str, tuple[float, float]]]:
    """(k, 7) rows of sources less storage inside a volume, and the sums of both."""
    out, sums = [np.zeros((0, WIDTH))], {}
    for number, law in enumerate(laws()):
        terms = volume.contributions(law, degree)
        for name, values, sign in (("source", terms.source, 1.0), ("storage", terms.storage, -1.0)):
            if values is None:
                continue
            row = np.zeros((len(values), WIDTH))
            if number == 0:
                row[:, :2] = sign * values
                if volume.axis is not None:
                    row[:, 1 - volume.axis] = 0.0
                sums[name] = (float(row[:, 0].sum()), float(row[:, 1].sum()))
            else:
                row[:, 2] = sign * values[:, 0]
            out.append(row)
    return np.concatenate(out), sums


def directed(values: Array, view: View) -> Array:
    """(…, 9): rows with drag and lift behind them."""
    (cx, cy), x, y = view.direction, values[..., 0], values[..., 1]
    return np.concatenate([values, (cx * x + cy * y)[..., None], (cx * y - cy * x)[..., None]], axis=-1)


def estimate(terms: Terms, view: View, method: str, **told: Any) -> Estimate:
    """The force that the rows add up to, with bands of every number."""
    first, second, third = (directed(r, view) for r in terms.by_degree)
    best = third if terms.best is None else directed(terms.best, view)
    shaken = directed(terms.shaken, view)
    cross = terms.cross
    if cross is not None:
        cross = cross._replace(values=directed(cross.values, view))
    beyond = [directed(rows, view) for rows in terms.beyond]
    value = best.sum(axis=0)
    half: list[tuple[float, float]] = []
    for c in range(best.shape[1]):
        rounding = rounding_of(shaken[:, c], best[:, c])
        chosen = None if terms.best is None else best[:, c]
        other = None if cross is None else cross._replace(values=cross.values[:, c])
        band = bands(first[:, c], second[:, c], third[:, c], rounding, chosen, terms.reaching, other)
        more = sum(spread(rows[:, c]) for rows in beyond)
        sampling = band.sampling + more
        half.append((sampling, max(band.resolution, sampling)))

    def pair(at: int) -> tuple[float, float]:
        return float(value[at]), float(value[at + 1])

    def widths(columns: Sequence[int]) -> dict[str, Any]:
        found = [[half[c][kind] for c in columns] for kind in (0, 1)]
        if len(columns) == 1:
            found = [column[0] for column in found]  # type: ignore[misc]
        return {"sampling": found[0], "resolution": found[1]}

    return Estimate(
        body=view.body,
        method=method,
        force=pair(0),
        pressure=pair(3),
        viscous=pair(5),
        moment=float(value[2]),
        sampling_band=(half[0][0], half[1][0]),
        resolution_band=(half[0][1], half[1][1]),
        drag=float(value[7]),
        lift=float(value[8]),
        moment_about=view.about,
        direction=view.direction,
        parts=terms.parts,
        bands={
            "drag": widths([7]),
            "lift": widths([8]),
            "moment": widths([2]),
            "pressure": widths([3, 4]),
            "viscous": widths([5, 6]),
        },
        **told,
    )


def rounding_of(shaken: Array, terms: Array) -> float:
    """Half-width from the digits of the data: sums (s,) when the last ones are shaken; our own (k,) terms."""
    digits = _SHAKE_COVERAGE * float(np.std(shaken)) if len(shaken) else 0.0
    return digits + _ROUNDINGS * np.finfo(float).eps * float(np.abs(terms).sum())


def tally(volume: SampledVolume, number: Callable[[State], Array]) -> tuple[float, Bands]:
    """The sum of ``number`` (q,) over the line quadrature points, with its bands."""

    def rows(state: State) -> Array:
        return volume.per_line_cell(number(state)[:, None])[:, 0]

    first, second, third = (rows(volume.line_state(degree)) for degree in DEGREES)
    best = rows(volume.line_state(BEST)) if volume.falls else None
    chosen = third if best is None else best
    shaken = np.array([number(state).sum() for state in volume.shaken_line_states()])
    rounding = rounding_of(shaken, chosen)
    cross = Crosswise(rows(volume.line_state(CROSS)), volume.beside)
    band = bands(first, second, third, rounding, best, volume.line.near_jump, cross)
    return float(chosen.sum()), band
