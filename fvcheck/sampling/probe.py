"""All fields of a flow, sampled together."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

import numpy as np

from fvcheck.errors import FieldError
from fvcheck.flow import Flow
from fvcheck.sampling.sampled import Sampled
from fvcheck.sampling.sampler import Sampler, compile_sampler

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class _Group:
    """Fields that share one sampler: columns of one data matrix."""

    sampler: Sampler
    roles: tuple[str, ...]
    columns: tuple[slice, ...]
    data: Array
    known: Array | None


@dataclass(frozen=True, eq=False)
class Probe:
    """Compiled sampling of every field of a flow around chosen mesh points."""

    groups: tuple[_Group, ...]
    vectors: frozenset[str]
    _coefficients: dict[tuple[int, int], Array] = field(default_factory=dict)

    def at(self, degree: int, triangle: Array, places: Array) -> dict[str, Sampled]:
        """Role -> values and gradients at places (q, 2) in mesh triangles (q, 3)."""
        out: dict[str, Sampled] = {}
        for number, group in enumerate(self.groups):
            key = (number, degree)
            if key not in self._coefficients:
                self._coefficients[key] = group.sampler.apply(degree, group.data, group.known)
            values, gradients = group.sampler.evaluate(degree, self._coefficients[key], triangle, places)
            for role, columns in zip(group.roles, group.columns):
                value, gradient = values[:, columns], gradients[:, columns]
                if role not in self.vectors:
                    out[role] = Sampled(value[:, 0], gradient[:, 0])
                elif value.shape[1] == 3:
                    out[role] = Sampled(value, gradient)
                else:
                    zero = np.zeros((len(value), 1))
                    out[role] = Sampled(
                        np.concatenate([value, zero], axis=1),
                        np.concatenate([gradient, zero[:, :, None].repeat(2, axis=2)], axis=1),
                    )
        return out

    def shaken(self, seed: int) -> Probe:
        """The same probe on data whose last stored digit is off at random.

        Each value moves by up to the precision it is stored with (`stored_precision`).
        """
        rng = np.random.default_rng(seed)
        groups = []
        for group in self.groups:
            precision = np.array([stored_precision(column) for column in group.data.T])
            noise = rng.uniform(-1.0, 1.0, group.data.shape) * precision
            groups.append(replace(group, data=group.data * (1.0 + noise)))
        return Probe(tuple(groups), self.vectors)

    @property
    def precision(self) -> float:
        """The coarsest relative precision among the fields."""
        return max(stored_precision(c) for group in self.groups for c in group.data.T)


def compile_probe(flow: Flow, centres: Array, roles: tuple[str, ...] | None = None) -> Probe:
    """Sampling of ``roles`` (default: all fields) of a flow about mesh points ``centres``.

    Cell-centred velocities take the walls' velocities as known values at the
    walls' points. FieldError where a field is not finite around the surface.
    """
    mesh = flow.mesh
    wanted = tuple(flow.fields) if roles is None else roles
    walls = _wall_points(flow)
    vectors = {role for role in wanted if flow.fields[role].values.ndim == 2}
    split: dict[tuple[str, bool], list[str]] = {}
    for role in wanted:
        location = flow.fields[role].location
        with_walls = location == "cell" and role == "velocity" and len(walls[0]) > 0
        split.setdefault((location, with_walls), []).append(role)
    groups = []
    for (location, with_walls), names in split.items():
        sampler = compile_sampler(
            mesh,
            centres,
            location,
            averages=flow.case.cell_values == "average",
            known=walls[0] if with_walls else None,
        )
        parts, columns, at = [], [], 0
        for role in names:
            values = flow.fields[role].values
            if role in vectors:
                values = values if flow.out_of_plane else values[:, :2]
            else:
                values = values[:, None]
            _check_finite(flow, role, values, sampler)
            parts.append(values)
            columns.append(slice(at, at + values.shape[1]))
            at += values.shape[1]
        known = None
        if with_walls:
            known = np.zeros((mesh.n_points, at))
            known[walls[0], :2] = walls[1]
        groups.append(_Group(sampler, tuple(names), tuple(columns), np.hstack(parts), known))
    return Probe(tuple(groups), frozenset(vectors))


def _wall_points(flow: Flow) -> tuple[Array, Array]:
    """Mesh points on no-slip walls and their velocities; corners of unlike walls are left out."""
    velocity: dict[int, tuple[float, float]] = {}
    clash: set[int] = set()
    for name, wall in flow.walls.items():
        for point in np.unique(flow.mesh.patch_edges(name)).tolist():
            if velocity.setdefault(point, wall) != wall:
                clash.add(point)
    points = np.array(sorted(set(velocity) - clash), np.int64)
    return points, np.array([velocity[p] for p in points.tolist()]).reshape(-1, 2)


def _check_finite(flow: Flow, role: str, values: Array, sampler: Sampler) -> None:
    local = values[sampler.sources]
    bad = ~np.isfinite(local).all(axis=1)
    if not bad.any():
        return
    source = sampler.sources[np.flatnonzero(bad)[0]]
    if sampler.location == "point":
        place = flow.mesh.points[source]
    else:
        first, last = flow.mesh.offsets[source], flow.mesh.offsets[source + 1]
        place = flow.mesh.points[flow.mesh.nodes[first:last]].mean(axis=0)
    raise FieldError(
        f"{role} (array {flow.fields[role].name!r}) has {int(bad.sum())} values near the control surface "
        "that are no numbers",
        where=f"the first at x {place[0]:.6g}, y {place[1]:.6g}",
        mend="Keep the surface away from them, or export the field again.",
    )


def stored_precision(values: Array) -> float:
    """Relative precision [–] that numbers are stored with, judged by the numbers themselves.

    Half a unit of the last decimal digit when a sample needs 6 to 12
    significant digits (text files; numbers of fewer digits are taken as meant
    exactly), 2⁻²⁴ when all are exact in single precision, else 2⁻⁵³.
    """
    sample = values[:: max(1, len(values) // 512)].astype(float)
    sample = sample[np.isfinite(sample) & (sample != 0.0)]
    if len(sample) == 0 or np.all(sample == sample[0]):
        return 2.0**-53
    for digits in range(5, 13):
        unit = 10.0 ** (np.floor(np.log10(np.abs(sample))) - (digits - 1))
        if np.all(np.abs(np.round(sample / unit) * unit - sample) <= 4e-16 * np.abs(sample)):
            return 0.5 * 10.0 ** (1 - digits) if digits > 5 else 2.0**-53
    return 2.0**-24 if np.array_equal(sample.astype(np.float32).astype(float), sample) else 2.0**-53


def pin_walls(sampled: Mapping[str, Sampled], on_wall: Array, velocity: Array) -> dict[str, Sampled]:
    """The samples with the velocity at no-slip walls set to the wall's own.

    on_wall (q,) bool, velocity (q, 2). Gradients stay those of the fits.
    """
    out = dict(sampled)
    if on_wall.any() and "velocity" in out:
        value = out["velocity"].value.copy()
        value[on_wall, :2] = velocity[on_wall]
        value[on_wall, 2] = 0.0
        out["velocity"] = Sampled(value, out["velocity"].gradient)
    return out
