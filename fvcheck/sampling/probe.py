"""All fields of a flow, sampled together."""

from __future__ import annotations

from dataclasses import dataclass, field, replace
from functools import cached_property

import numpy as np

from fvcheck.flow import Flow
from fvcheck.sampling import jumps
from fvcheck.sampling.compiling import compile_sampler
from fvcheck.sampling.conserved import with_conserved_averages
from fvcheck.sampling.groups import Group, filled, split_roles
from fvcheck.sampling.known import known_values, same_places
from fvcheck.sampling.precision import at_random, stored_precision
from fvcheck.sampling.sampled import Sampled
from fvcheck.sampling.sampler import CROSS, DEGREES

Array = np.ndarray
Raw = tuple[tuple[Array, Array, Array], ...]


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

    groups: tuple[Group, ...]
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

        raw : of degree 3. Every field counts
        """
        seeds, overshoots = np.zeros(len(cell), bool), np.zeros(len(cell), bool)
        for group, (values, _, apart), limits in zip(self.groups, raw, self._limits(triangle)):
            rim = group.sampler.rim[group.sampler.centres][group.sampler.centre_of[triangle]].any(axis=1)
            signs = jumps.signs(values, apart, *limits, rim)
            seeds |= signs[0]
            overshoots |= signs[1]
        supported = np.full(int(cell.max(initial=-1)) + 1, DEGREES[-1])
        near_jump = np.zeros(len(supported), bool)
        if seeds.any():
            near = self.groups[0].sampler.within(np.unique(triangle[seeds]), jumps.REACH)
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
            by = np.array(self._precisions[number]) * at_random(
                seed, number, group.sampler.sources, group.data.shape[1]
            )
            groups.append(replace(group, data=group.data * (1.0 + by)))
        return Probe(tuple(groups), self.vectors)

    def refilled(self, flow: Flow) -> Probe | None:
        """The same fits on the data of another flow over the same mesh; None where they do not serve it."""
        flow = with_conserved_averages(flow)
        split = split_roles(flow, tuple(flow.fields))
        if list(split.values()) != [list(group.roles) for group in self.groups]:
            return None
        groups = []
        for ((location, own), names), old in zip(split.items(), self.groups):
            known = known_values(flow, own) if own else None
            places = None if known is None else known[0]
            if old.sampler.location != location or not same_places(places, old.places):
                return None
            groups.append(filled(flow, old.sampler, names, known))
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
    for (location, own), names in split_roles(flow, wanted).items():
        known = known_values(flow, own) if own else None
        sampler = compile_sampler(
            flow.mesh,
            centres,
            location,
            averages=flow.case.cell_values == "average",
            axis=flow.case.axis,
            known=known[0] if known else None,
        )
        groups.append(filled(flow, sampler, names, known))
    return Probe(tuple(groups), _vectors(flow, wanted))


def _vectors(flow: Flow, roles: tuple[str, ...]) -> frozenset[str]:
    return frozenset(role for role in roles if flow.fields[role].values.ndim == 2)
