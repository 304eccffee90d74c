"""A flow sampled on one control volume: states on its border and inside, and what each law makes of them."""

from __future__ import annotations

import copy
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any
from weakref import WeakKeyDictionary

import numpy as np

from fvcheck.errors import SurfaceError
from fvcheck.flow import Flow
from fvcheck.inside import bare_state, varies_inside
from fvcheck.interior import interior_of, keep_averages, sum_groups
from fvcheck.laws import Law, MissingData, State
from fvcheck.laws.law import throughflow
from fvcheck.laws.state import Datum
from fvcheck.overlay.pieces import DRAWN, Overlay
from fvcheck.sampling.inner import InnerCells, sample_inner
from fvcheck.sampling.known import known_values, pin_walls
from fvcheck.sampling.probe import Probe, Samples, compile_probe
from fvcheck.sampling.quadrature import PER_PIECE, along
from fvcheck.sampling.sampled import Sampled
from fvcheck.sampling.sampler import CROSS, DEGREES
from fvcheck.surfaces import ControlSurface
from fvcheck.walls import wall_velocity

Array = np.ndarray

# In place of a degree: the one that the data support, cell by cell.
BEST = 0

# Whole cells beyond which they are integrated by one pass over them (`sampling.inner`)
# in place of the fits of the border: then an interior costs more than the border does.
MANY_CELLS = 20_000

# Samples with a shaken last digit: eight give the spread to a quarter of itself.
_SHAKES = 8


@dataclass(frozen=True, eq=False)
class Contributions:
    """Integrated terms of one law by one degree.

    parts : name -> (q, c) flux through each line quadrature point
    level : (q, c) flux of the uniform state, left out of the scale
    source, storage : (k, c) per area piece, None where there is none
    """

    parts: dict[str, Array]
    level: Array | float
    source: Array | None
    storage: Array | None

    @cached_property
    def total(self) -> Array:
        return sum(self.parts.values())  # type: ignore[return-value]


class SampledVolume:
    """Samples of a flow on one overlay, made when first asked for.

    passes : whether many whole cells may go by `sampling.inner`; then `area_state`
        is of the cut cells only
    """

    passes = True

    def __init__(
        self,
        flow: Flow,
        surface: ControlSurface,
        overlay: Overlay,
        laws: Sequence[Law],
        *,
        unsteady: bool = False,
        point_velocity: Array | None = None,
        about: tuple[float, float] = (0.0, 0.0),
        sampled: bool = True,
    ) -> None:
        """``unsteady``: contents are wanted, and what is not drawn moves with the mesh.

        point_velocity : (n, 2) of the mesh's points, None for a mesh at rest
        about : the point that angular momentum counts from
        sampled : else `sample` is to be called with fits about all of ``centres``
        """
        self.flow, self.surface, self.overlay, self.about = flow, surface, overlay, about
        self.axis = flow.case.axis
        self._levels = {law.datum for law in laws}
        _check_motion(surface, self.axis)
        self.unsteady = unsteady and overlay.closed
        self.has_rates = flow.has_rates
        self.depth = flow.case.depth or 1.0
        self.places, weights = along(overlay.start, overlay.end)
        self.triangle = np.repeat(overlay.triangle, PER_PIECE, axis=0)
        self.normals = (overlay.normals[:, None, :] * weights[None, :, None]).reshape(-1, 2)
        self.normals *= self._extent(self.places)[:, None]
        self.drawn = np.repeat(overlay.patch == DRAWN, PER_PIECE)
        self.patch = np.repeat(overlay.patch, PER_PIECE)
        # One group per cell; what lies on the domain boundary apart from what crosses the fluid.
        self._groups, of_piece = np.unique(2 * overlay.cell + (overlay.patch != DRAWN), return_inverse=True)
        self.line_group = np.repeat(of_piece, PER_PIECE)
        self.surface_velocity = self._border_velocity(unsteady, point_velocity)
        self._set_up_area(overlay.closed and any(self.needs_area(law) for law in laws))
        centres = np.unique(overlay.triangle)
        if self.area_triangle is not None:
            centres = np.unique(np.concatenate([centres, self.area_triangle.ravel()]))
        self.centres = centres
        self._needed: dict[str, Array | None] | None = None
        if sampled:
            self.sample(flow, compile_probe(flow, centres))

    def with_flow(self, flow: Flow) -> SampledVolume:
        """The same volume and fits with the data of another flow over the same mesh."""
        if flow.mesh is not self.flow.mesh:
            raise ValueError("the flow is on another mesh")
        other = copy.copy(self)
        other.sample(flow, self.probe.refilled(flow) or compile_probe(flow, self.centres))
        return other

    def needed(self) -> dict[str, Array | None]:
        """Location -> the points or cells whose data the volume takes from a flow; None for all."""
        if self._needed is not None:
            return self._needed
        out: dict[str, Array | None] = {}
        for group in self.probe.groups:
            rows: Array | None = group.sampler.sources
            if self._inner_cells is not None:
                rows = None
            elif group.sampler.location == "cell" and self.area is not None:
                rows = np.union1d(group.sampler.sources, self.area_cells)
            known = out.get(group.sampler.location, np.empty(0, np.int64))
            out[group.sampler.location] = None if rows is None or known is None else np.union1d(known, rows)
        self._needed = out
        return out

    def _border_velocity(self, unsteady: bool, point_velocity: Array | None) -> Array | None:
        """(q, 2) of the border at the line places; None where all of it is at rest."""
        motion = self.surface.motion
        if not unsteady:
            return None if motion is None else motion.at(self.places)
        if motion is None and point_velocity is None:
            return None
        out = np.zeros_like(self.places) if motion is None else motion.at(self.places)
        out[~self.drawn] = 0.0
        if point_velocity is not None:
            corners = self.triangle[~self.drawn]
            share = _barycentric(self.flow.mesh.points[corners], self.places[~self.drawn])
            out[~self.drawn] = np.einsum("qk,qki->qi", share, point_velocity[corners])
        return out

    def sample(self, flow: Flow, probe: Probe) -> None:
        """Sample a flow by fits about ``centres`` and others."""
        self.flow, self.probe = flow, probe
        self.line = self.probe.samples(self.triangle, self.places, self.line_group, cross=True)
        self.area: Samples | None = None
        if self.area_triangle is not None:
            self.area = probe.samples(self.area_triangle, self.area_places, self.area_group)
            if flow.case.cell_values == "average":
                # A cut cell may have a part of no area; only whole ones are shifted.
                whole = ~np.isin(self.area_cells, self.overlay.corner_cell)
                self.area = keep_averages(
                    self.area, probe, self.area_cells, self.area_group, self.area_weights, whole
                )
        self.datum = Datum()
        if self.overlay.closed:
            self.datum = self._find_datum()
        self.inner = (
            None if self._inner_cells is None else sample_inner(flow.mesh, self._inner_cells, self.probe)
        )
        self._states: dict[tuple[str, int], State] = {}
        self._inner_sums: dict[tuple[Any, ...], dict[int, Array]] = {}
        self._shaken: list[State] | None = None
        # The same for all laws.
        self._through: WeakKeyDictionary[State, Array] = WeakKeyDictionary()

    def needs_area(self, law: Law) -> bool:
        """Whether the law's volume terms vary over the volume, so that they must be sampled."""
        return varies_inside(self.flow, law, unsteady=self.unsteady, about=self.about)

    def _bare_state(self) -> State:
        return bare_state(self.flow, self.about)

    def _extent(self, places: Array) -> Array:
        """(q,) out-of-plane extent at places: the depth, or once around the axis."""
        if self.axis is None:
            return np.full(len(places), self.depth)
        return 2.0 * np.pi * np.maximum(places[:, 1 - self.axis], 0.0)

    def _set_up_area(self, needed: bool) -> None:
        self.area_triangle: Array | None = None
        self._inner_cells: InnerCells | None = None
        if not needed:
            return
        mesh, overlay = self.flow.mesh, self.overlay
        if mesh.hollow:
            raise SurfaceError(
                "the cells inside control surface "
                f"{self.surface.name or self.surface.kind!r} were not kept, over which a law integrates",
                mend="Open the flow for these laws.",
            )
        at_points = all(field.location == "point" for field in self.flow.fields.values())
        by_pass = self.passes and at_points and len(overlay.whole) > MANY_CELLS
        inside = interior_of(mesh, overlay, self._extent, by_pass=by_pass)
        self._inner_cells = inside.inner
        self.area_triangle, self.area_places = inside.triangle, inside.places
        self.area_weights, self.area_cells, self.area_group = inside.weights, inside.cells, inside.group

    def _find_datum(self) -> Datum:
        state = self._line_state_of(self.line.best)
        weights = np.hypot(*self.normals.T)
        levels: dict[str, float] = {}
        for name in ("pressure", "temperature", *(["entropy"] if "entropy" in self._levels else [])):
            try:
                levels[name] = float(np.average(getattr(state, name), weights=weights))
            except (MissingData, KeyError):
                continue
        scalars = {
            role.removeprefix("scalar:"): float(np.average(sampled.value, weights=weights))
            for role, sampled in state.fields.items()
            if role.startswith("scalar:")
        }
        return Datum(**levels, scalars=scalars)

    def level(self, law: Law) -> float | None:
        """What the law counts from on this border; None for a law that counts from zero."""
        if law.datum is None:
            return None
        _, scalar, name = law.datum.partition("scalar:")
        return self.datum.scalars.get(name) if scalar else float(getattr(self.datum, law.datum))

    def _state(self, fields: Mapping[str, Sampled], places: Array, datum: Datum | None = None) -> State:
        datum = self.datum if datum is None else datum
        return State(self.flow.fluid, fields, places, datum, self.about, self.axis)

    def line_state(self, degree: int) -> State:
        """State at the line quadrature points; degree `BEST` is what the data support."""
        if degree == BEST and self.line.best is self.line.by_degree[DEGREES[-1]]:
            degree = DEGREES[-1]
        if ("line", degree) not in self._states:
            fields = self.line.best if degree == BEST else self.line.by_degree[degree]
            self._states["line", degree] = self._line_state_of(fields)
        return self._states["line", degree]

    def _line_state_of(self, sampled: Mapping[str, Sampled]) -> State:
        names = self.flow.mesh.boundary.names
        on_wall = np.zeros(len(self.places), bool)
        velocity = np.zeros((len(self.places), 3))
        for name, wall in self.flow.walls.items():
            here = self.patch == names.index(name)
            on_wall |= here
            velocity[here] = wall_velocity(wall, self.places[here], self.axis)
        return self._state(pin_walls(sampled, on_wall, velocity), self.places)

    def shaken_line_states(self) -> list[State]:
        """Line states from data with a shaken last digit; none where data are in double precision."""
        if self._shaken is None:
            coarse = self.probe.precision > 1e-13
            self._shaken = [self.shaken_state(seed) for seed in range(_SHAKES * coarse)]
        return self._shaken

    def shaken_state(self, seed: int) -> State:
        """Line state from data whose last stored digit is off at random."""
        shaken = self.probe.shaken(seed)
        return self._line_state_of(shaken.by_role(shaken.raw(DEGREES[-1], self.triangle, self.places)))

    def area_state(self, degree: int) -> State:
        """State at the area quadrature points; degree `BEST` is what the data support."""
        if ("area", degree) not in self._states:
            assert self.area is not None
            fields = self.area.best if degree == BEST else self.area.by_degree[degree]
            self._states["area", degree] = self._state(fields, self.area_places)
        return self._states["area", degree]

    def fluxes(self, law: Law, state: State) -> dict[str, Array]:
        """Part -> (q, c) flux through each line quadrature point."""
        through = self._through.get(state)
        if through is None:
            through = self._through[state] = throughflow(state, self.normals, self.surface_velocity)
        parts = {"convective": law.density(state) * through[:, None]}
        for name, flux in law.fluxes.items():
            value = flux(state, self.normals)
            if value is not None:
                parts[name] = value
        return parts

    def crosswise(self, law: Law) -> Array:
        """(groups, c) fluxes summed per cell as `per_line_cell` does, by `CROSS`."""
        return self.per_line_cell(sum(self.fluxes(law, self.line_state(CROSS)).values()))  # type: ignore[arg-type]

    def contributions(self, law: Law, degree: int) -> Contributions:
        state = self.line_state(degree)
        level = law.level(state, self.normals) if law.level else 0.0
        parts = self.fluxes(law, state)
        if not self.overlay.closed:
            return Contributions(parts, level, None, None)
        return Contributions(parts, level, self._source(law, degree), self._storage(law, degree))

    def _source(self, law: Law, degree: int) -> Array | None:
        if self.needs_area(law):
            return self._over_area(("source", law), law.source, degree)
        constant = law.source(self._bare_state())
        if constant is None:
            return None
        return constant * self.overlay.area * self.depth

    def _storage(self, law: Law, degree: int) -> Array | None:
        """∂b/∂t over the volume plus b w·n over its moving border, where rates are given.

        The rate of b follows from those of the fields by a complex step, exact
        to rounding for any law (Squire & Trapp 1998).
        """
        if not self.has_rates:
            return None

        def rate(state: State) -> Array:
            step = 1e-30
            moved = {
                role: Sampled(
                    sampled.value + 1j * step * state.fields[f"rate:{role}"].value,
                    sampled.gradient + 1j * step * state.fields[f"rate:{role}"].gradient,
                )
                if f"rate:{role}" in state.fields
                else sampled
                for role, sampled in state.fields.items()
                if not role.startswith("rate:")
            }
            return np.imag(law.density(self._state(moved, state.x))) / step

        storage = self._over_area(("rate", law), rate, degree)
        assert storage is not None
        if self.surface_velocity is not None:
            swept = np.einsum("qi,qi->q", self.surface_velocity, self.normals)
            border = law.density(self.line_state(degree)) * swept[:, None]
            storage = np.concatenate([storage, self.per_line_cell(border)])
        return storage

    def content(self, law: Law, degree: int, datum: Datum) -> tuple[Array, Array]:
        """Mesh cells (k,) and what the law stores in the part of them inside, (k, c), from a given datum."""
        if self.needs_area(law):
            held = self._over_area(("content", law, datum), law.density, degree, datum)
            assert held is not None
            return self.volume_cells, held
        area = self.overlay.area * self.depth
        return np.full(1, -1), law.density(self._bare_state()) * area

    def _over_area(
        self,
        key: tuple[Any, ...],
        made: Callable[[State], Array | None],
        degree: int,
        datum: Datum | None = None,
    ) -> Array | None:
        """(k, c) integral over the part inside of each of `volume_cells`; None where there is nothing."""
        state = self._state(self.area_state(degree).fields, self.area_places, datum)
        values = made(state)
        if values is None:
            return None
        cut = self._per_cell(values * self.area_weights[:, None])
        if self.inner is None:
            return cut
        if key not in self._inner_sums:
            self._inner_sums[key] = self.inner.integrate(
                lambda fields, places: made(self._state(fields, places, datum)), self._extent
            )
        sums = self._inner_sums[key]
        per_cell = sums[degree or DEGREES[-1]]
        if degree == BEST and self.inner.fell.any():
            per_cell = np.where(self.inner.fell[:, None], sums[DEGREES[0]], per_cell)
        return np.concatenate([cut, per_cell])

    @property
    def volume_cells(self) -> Array:
        """(k,) mesh cells of the rows of volume integrals."""
        if self._inner_cells is None:
            return self.area_cells
        return np.concatenate([self.area_cells, self._inner_cells.cells])

    def _per_cell(self, values: Array) -> Array:
        """(q, c) at the area places, summed per cell of ``area_cells``."""
        return sum_groups(self.area_group, len(self.area_cells), values)

    def per_line_cell(self, values: Array) -> Array:
        """(q, c) summed per mesh cell."""
        return sum_groups(self.line_group, len(self._groups), values)

    @property
    def falls(self) -> bool:
        """Whether the data support less than the highest degree anywhere."""
        parts = [self.line] if self.area is None else [self.line, self.area]
        inner = self.inner is not None and bool(self.inner.fell.any())
        return inner or any(bool(np.any(part.supported < DEGREES[-1])) for part in parts)

    def reaching(self, law: Law) -> Array:
        """(groups,) bool: where errors have one sign and add up.

        Boundary pieces where a field the law leans on must be extrapolated from
        cells, and pieces near a jump.
        """
        roles = ["velocity", *(["temperature"] if "conductive" in law.fluxes else []), str(law.datum)]
        out = np.zeros(len(self._groups), bool)
        for role in roles:
            field = self.flow.fields.get(role)
            if field is not None and field.location == "cell":
                known = known_values(self.flow, role)
                cells = np.empty(0, np.int64) if known is None else known[0].cells
                out |= self.on_boundary & ~np.isin(self.line_cells, cells)
        return out | self.line.near_jump

    @property
    def line_cells(self) -> Array:
        """(groups,) mesh cell of each row of `per_line_cell`."""
        return self._groups // 2

    @property
    def on_boundary(self) -> Array:
        """(groups,) bool: the row is of pieces on the domain boundary, not of drawn ones."""
        return self._groups % 2 == 1

    @cached_property
    def beside(self) -> Array:
        """(groups,) bool: the row is of a cell that the domain boundary touches."""
        mesh = self.flow.mesh
        rim = np.zeros(mesh.n_points, bool)
        rim[mesh.boundary.edges] = True
        begin, end = mesh.offsets[self.line_cells], mesh.offsets[self.line_cells + 1]
        first = np.cumsum(end - begin) - (end - begin)
        nodes = mesh.nodes[np.repeat(begin - first, end - begin) + np.arange((end - begin).sum())]
        return np.logical_or.reduceat(rim[nodes], first)

    def degree_shares(self) -> dict[str, float]:
        """Share of the length of the surface that each degree was used on."""
        length = np.hypot(*self.normals.T)
        used = self.line.supported[self.line_group]
        return {str(degree): float(length[used == degree].sum() / length.sum()) for degree in DEGREES}


def _check_motion(surface: ControlSurface, axis: int | None) -> None:
    """SurfaceError for a motion that an axisymmetric surface cannot make."""
    motion = surface.motion
    if axis is not None and motion is not None and (motion.omega or motion.velocity[1 - axis]):
        raise SurfaceError(
            "a surface in an axisymmetric run can move along the axis only",
            where=surface.text,
            mend="Leave the spin and the radial velocity out.",
        )


def _barycentric(corners: Array, places: Array) -> Array:
    """(q, 3) weights of the corners (q, 3, 2) of triangles at places (q, 2)."""
    a, b, c = corners[:, 0], corners[:, 1], corners[:, 2]

    def cross(u: Array, v: Array) -> Array:
        return u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]

    twice = cross(b - a, c - a)
    second, third = cross(places - a, c - a) / twice, cross(b - a, places - a) / twice
    return np.column_stack([1.0 - second - third, second, third])
