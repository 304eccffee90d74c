"""All fields of a flow, sampled together."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from fvcheck.errors import FieldError
from fvcheck.fields import Field, Location
from fvcheck.flow import Flow
from fvcheck.sampling.conserved import with_conserved_averages
from fvcheck.sampling.sampled import Sampled
from fvcheck.sampling.sampler import CROSS, DEGREES, Known, Sampler, compile_sampler
from fvcheck.walls import wall_velocity

Array = np.ndarray
Raw = tuple[tuple[Array, Array, Array], ...]

# A jump shows where the three polynomials of a triangle disagree by more than
# DISAGREE of the range of the data two rings around, and the value leaves that
# range by more than EXCESS of it. Smooth fields down to eight cells a wave
# hardly ever do both, fits across a captured shock do so in each passage. Beside
# the domain boundary a straight profile through cell centres leaves the range.
DISAGREE, EXCESS, EXCESS_RIM = 0.15, 0.01, 0.25

# Around a jump even this excess is an overshoot, and a value on which the polynomials
# disagree by more than APART of the range is none.
_OVERSHOOT, _APART = 0.005, 0.5

# Fits reach farther than the rings that ranges are taken from. Beside a jump data may
# be uniform there; then a value off by this share of the whole range has felt the jump.
_FELT = 0.05

# Share of the whole surface's range below which a local range is noise.
LEAST_EXTENT = 1e-3

# Rings of cells about a jump in which fits may feel it.
_REACH = 2


@dataclass(frozen=True, eq=False)
class _Group:
    """Fields that share one sampler.

    columns : of each role in ``data`` (n, f), the rows that the sampler uses
    fields : of each role, with the columns that are sampled
    """

    sampler: Sampler
    roles: tuple[str, ...]
    columns: tuple[slice, ...]
    fields: tuple[Field, ...]
    data: Array
    known: Array | None
    places: Known | None


@dataclass(frozen=True, eq=False)
class Samples:
    """What one set of places sees.

    by_degree : degree -> role -> `Sampled`
    best : role -> `Sampled`, by the degree that the data support
    supported : (cells,) that degree
    near_jump : (cells,) bool, cells whose fits may feel a jump
    """

    by_degree: dict[int, dict[str, Sampled]]
    best: dict[str, Sampled]
    supported: Array
    near_jump: Array


@dataclass(frozen=True, eq=False)
class Probe:
    """Compiled sampling of every field of a flow around chosen mesh points."""

    groups: tuple[_Group, ...]
    vectors: frozenset[str]
    _coefficients: dict[tuple[int, int], Array] = field(default_factory=dict)
    _ranges: dict[int, tuple[Array, Array]] = field(default_factory=dict)

    def raw(self, degree: int, triangle: Array, places: Array) -> Raw:
        """Values (q, f), gradients (q, f, 2), disagreement (q, f) of each group of fields by one degree."""
        out = []
        for number, group in enumerate(self.groups):
            key = (number, degree)
            if key not in self._coefficients:
                self._coefficients[key] = group.sampler.apply_local(degree, group.data, group.known)
            out.append(group.sampler.evaluate(degree, self._coefficients[key], triangle, places))
        return tuple(out)

    def crosswise(self, third: Raw, triangle: Array, places: Array) -> Raw:
        """`raw` of `CROSS`, from that of degree 3."""
        out = []
        for number, (group, (value, gradient, apart)) in enumerate(zip(self.groups, third)):
            fit = self._coefficients[number, DEGREES[-1]]
            out.append((*group.sampler.crosswise(fit, (value, gradient), triangle, places), apart))
        return tuple(out)

    def by_role(self, raw: Raw) -> dict[str, Sampled]:
        """Role -> values and gradients, from what `raw` gives."""
        out: dict[str, Sampled] = {}
        for group, (values, gradients, _) in zip(self.groups, raw):
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

    def samples(self, triangle: Array, places: Array, cell: Array, *, cross: bool = False) -> Samples:
        """All degrees at places (q, 2) in mesh triangles (q, 3), and the degree the data support.

        cell : (q,) which cell each place lies in, numbered from 0; a cell has one degree
        cross : `CROSS` too
        """
        raw = {degree: self.raw(degree, triangle, places) for degree in DEGREES}
        if cross:
            raw[CROSS] = self.crosswise(raw[DEGREES[-1]], triangle, places)
        supported, near_jump = self._supported(raw[DEGREES[-1]], triangle, cell)
        by_degree = {degree: self.by_role(part) for degree, part in raw.items()}
        best = by_degree[DEGREES[-1]]
        if np.any(supported < DEGREES[-1]):
            fell = supported[cell] < DEGREES[-1]
            chosen = tuple(
                (
                    np.where(fell[:, None], np.clip(plain, *limits), third),
                    np.where(fell[:, None, None], slope, third_slope),
                    apart,
                )
                for (plain, slope, _), (third, third_slope, apart), limits in zip(
                    raw[1], raw[DEGREES[-1]], self._limits(triangle)
                )
            )
            best = self.by_role(chosen)
        return Samples(by_degree, best, supported, near_jump)

    def _limits(self, triangle: Array) -> list[tuple[Array, Array]]:
        """Per group: smallest and largest datum (q, f) around the corners of each triangle."""
        from fvcheck.kernels.neighbours import corner_range

        out = []
        for number, group in enumerate(self.groups):
            if number not in self._ranges:
                self._ranges[number] = group.sampler.ranges(group.data, group.known)
            out.append(corner_range(*self._ranges[number], group.sampler.centre_of, triangle))
        return out

    def _supported(self, raw: Raw, triangle: Array, cell: Array) -> tuple[Array, Array]:
        """(cells,) the highest degree that the data support, 3, or 1 at a jump; (cells,) which are near one.

        raw : of degree 3. Every field counts; differences small against the
        whole surface do not.
        """
        seeds, overshoots = np.zeros(len(cell), bool), np.zeros(len(cell), bool)
        for group, (values, _, apart), (low, high) in zip(self.groups, raw, self._limits(triangle)):
            extent = high - low
            whole = high.max(axis=0, initial=0.0) - low.min(axis=0, initial=0.0)
            matters = extent > LEAST_EXTENT * whole
            excess = np.maximum(values - high, low - values)
            rim = group.sampler.rim[group.sampler.centres][group.sampler.centre_of[triangle]].any(axis=1)
            allowed = np.where(rim, EXCESS_RIM, EXCESS)[:, None] * extent
            seeds |= (matters & (excess > allowed) & (apart > DISAGREE * extent)).any(axis=1)
            seeds |= (~matters & (excess > _FELT * whole) & (apart > _FELT * whole)).any(axis=1)
            astray = (excess > _OVERSHOOT * extent) | (apart > _APART * extent)
            overshoots |= (matters & astray).any(axis=1)
        supported = np.full(int(cell.max(initial=-1)) + 1, DEGREES[-1])
        near_jump = np.zeros(len(supported), bool)
        if seeds.any():
            near = self.groups[0].sampler.within(np.unique(triangle[seeds]), _REACH)
            around = near[triangle].any(axis=1)
            near_jump[cell[around]] = True
            supported[cell[seeds | (overshoots & around)]] = DEGREES[0]
        return supported, near_jump

    def shaken(self, seed: int) -> Probe:
        """The same probe on data whose last stored digit is off at random.

        Each value moves by up to the precision it is stored with (`stored_precision`).
        """
        groups = []
        for number, group in enumerate(self.groups):
            by = np.array(self._precisions[number]) * _at_random(seed, number, group)
            groups.append(replace(group, data=group.data * (1.0 + by)))
        return Probe(tuple(groups), self.vectors)

    def refilled(self, flow: Flow) -> Probe | None:
        """The same fits on the data of another flow over the same mesh; None where they do not serve it."""
        flow = with_conserved_averages(flow)
        split = _split(flow, tuple(flow.fields))
        if list(split.values()) != [list(group.roles) for group in self.groups]:
            return None
        groups = []
        for ((location, own), names), old in zip(split.items(), self.groups):
            known = known_values(flow, own) if own else None
            places = None if known is None else known[0]
            if old.sampler.location != location or not _same_places(places, old.places):
                return None
            groups.append(_fill(flow, old.sampler, names, known))
        return Probe(tuple(groups), _vectors(flow, tuple(flow.fields)))

    @property
    def precision(self) -> float:
        """The coarsest relative precision among the fields."""
        return max(precision for group in self._precisions for precision in group)

    @cached_property
    def _precisions(self) -> list[list[float]]:
        """Of each column of each group."""
        return [[stored_precision(column) for column in group.data.T] for group in self.groups]


def compile_probe(flow: Flow, centres: Array, roles: tuple[str, ...] | None = None) -> Probe:
    """Sampling of ``roles`` (default: all fields) of a flow about mesh points ``centres``.

    Cell-centred fields lean on what is known on the boundary (`known_values`).
    FieldError where a field is not finite around the surface; ValueError where
    it was read for other fits (`fvcheck.laterflow`).
    """
    if any(field.rows is not None for field in flow.fields.values()):
        raise ValueError("new fits need whole fields")
    flow = with_conserved_averages(flow)
    wanted = tuple(flow.fields) if roles is None else roles
    groups = []
    for (location, own), names in _split(flow, wanted).items():
        known = known_values(flow, own) if own else None
        sampler = compile_sampler(
            flow.mesh,
            centres,
            location,
            averages=flow.case.cell_values == "average",
            axis=flow.case.axis,
            known=known[0] if known else None,
        )
        groups.append(_fill(flow, sampler, names, known))
    return Probe(tuple(groups), _vectors(flow, wanted))


def _vectors(flow: Flow, roles: tuple[str, ...]) -> frozenset[str]:
    return frozenset(role for role in roles if flow.fields[role].values.ndim == 2)


def _split(flow: Flow, roles: tuple[str, ...]) -> dict[tuple[Location, str], list[str]]:
    """Roles by what their fits need: (location, role with known values of its own or "")."""
    split: dict[tuple[Location, str], list[str]] = {}
    for role in roles:
        own = role if known_values(flow, role) is not None else ""
        split.setdefault((flow.fields[role].location, own), []).append(role)
    return split


def _fill(flow: Flow, sampler: Sampler, names: list[str], known: tuple[Known, Array] | None) -> _Group:
    """A group of fields with the data of a flow; FieldError where they are not finite."""
    parts, whole, columns, at = [], [], [], 0
    for role in names:
        field = flow.fields[role]
        field = replace(field, values=_columns(flow, field.values))
        parts.append(np.ascontiguousarray(field.at(sampler.sources), float))
        _check_finite(flow, role, parts[-1], sampler)
        whole.append(field)
        columns.append(slice(at, at + field.values.shape[1]))
        at += field.values.shape[1]
    places, value = (known[0], _columns(flow, known[1])) if known else (None, None)
    return _Group(sampler, tuple(names), tuple(columns), tuple(whole), np.hstack(parts), value, places)


def _same_places(one: Known | None, other: Known | None) -> bool:
    if one is None or other is None:
        return one is other
    return all(np.array_equal(a, b) for a, b in zip(one, other))


def _columns(flow: Flow, values: Array) -> Array:
    """(n, f) columns that are sampled: a velocity out of the plane only where there is one."""
    if values.ndim == 1:
        return values[:, None]
    return values if flow.out_of_plane else values[:, :2]


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


def _check_finite(flow: Flow, role: str, local: Array, sampler: Sampler) -> None:
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


def _at_random(seed: int, number: int, group: _Group) -> Array:
    """Numbers from -1 to 1 in the shape of a group's data (SplitMix64, Steele, Lea & Flood 2014).

    They depend on the datum, not on which others are with it: a surface taken
    together with others has the rounding band that it has alone.
    """
    column = np.arange(group.data.shape[1], dtype=np.uint64)
    stream = np.uint64((seed * 0x9E3779B97F4A7C15 + (number << 56)) % 2**64)
    x = (group.sampler.sources.astype(np.uint64)[:, None] << np.uint64(6)) + column + stream
    x = x * np.uint64(0x9E3779B97F4A7C15)
    x = (x ^ (x >> np.uint64(30))) * np.uint64(0xBF58476D1CE4E5B9)
    x = (x ^ (x >> np.uint64(27))) * np.uint64(0x94D049BB133111EB)
    return (x ^ (x >> np.uint64(31))) / 2.0**63 - 1.0


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
