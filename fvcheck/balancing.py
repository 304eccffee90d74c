"""The balance of a flow over control surfaces: overlay → samples → ledger."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from fvcheck import ports as port_room
from fvcheck.bands import bands
from fvcheck.errors import FieldError, FvcheckError, SetupError
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import Law, MissingData, State, find_law, law_names
from fvcheck.laws.law import convective
from fvcheck.laws.state import Datum
from fvcheck.ledger import Ledger, Result, Row, case_dict
from fvcheck.overlay.overlay import DRAWN, Overlay, lay_over
from fvcheck.sampling.probe import Probe, compile_probe, pin_walls
from fvcheck.sampling.quadrature import PER_PIECE, PER_TRIANGLE, along, within
from fvcheck.sampling.sampled import Sampled
from fvcheck.sampling.sampler import DEGREES
from fvcheck.sources import Source, share_inside
from fvcheck.surfaces import ControlSurface
from fvcheck.verdict import CLOSED, judge

Array = np.ndarray

# In place of a degree: the one that the data support, cell by cell.
BEST = 0

# Samples with a shaken last digit: eight give the spread to a quarter of
# itself, and three times it covers 99 in 100.
_SHAKES, _SHAKE_COVERAGE = 8, 3.0

# Rounding of our own sums, in units of the last place of the summed |flux|: fits on
# cells of aspect ratio 2,500 pass on some hundred.
_ROUNDINGS = 256.0

# A scale below this share of the fluxes' own magnitude is rounding, not flow.
_NOTHING = 1e-11


def balance(
    flow: Flow,
    surface: ControlSurface,
    laws: Iterable[str] | None = None,
    *,
    tolerance: Mapping[str, float] | None = None,
    scale: Mapping[str, float] | None = None,
    sources: Sequence[Source] = (),
) -> Ledger:
    """The ledger of one control surface.

    laws : names; by default every law that the data allow
    tolerance : law -> percent of its scale
    scale : law -> reference flux, in place of half the summed |flux|
    sources : what enters the volume otherwise

    Raises SurfaceError for a surface outside the domain, FieldError or
    SetupError for a law that was asked for and cannot be evaluated.
    """
    placed = surface.resolve(flow.mesh)
    overlay = lay_over(flow.mesh, placed)
    chosen, hints = _choose_laws(flow, laws)
    sampling = _Sampling(flow, placed, overlay, chosen)
    rows: list[Row] = []
    for law in chosen:
        try:
            rows += _rows(law, sampling, dict(tolerance or {}), dict(scale or {}), sources)
        except MissingData as missing:
            if laws is not None:
                raise FieldError(
                    f"the {law.name} law cannot be evaluated: {missing.what}", mend=missing.mend
                ) from None
            hints.append(Hint("law-left-out", f"{law.name}: {missing.what}. {missing.mend}"))
    if not rows:
        raise FieldError(
            "no law can be evaluated with these data",
            where="; ".join(hint.message for hint in hints if hint.code == "law-left-out"),
        )
    hints += sampling.hints(chosen)
    return Ledger(
        name=placed.name or placed.kind,
        kind=placed.kind,
        closed=overlay.closed,
        length=float(overlay.lengths.sum()),
        area=overlay.area(flow.mesh) if overlay.closed else None,
        degrees=sampling.degree_shares(),
        rows=tuple(rows),
        ports=port_room.ports(flow, placed, overlay, sampling.line_state(BEST)),
        hints=tuple(dict.fromkeys(hints)),
    )


def balance_all(
    flow: Flow,
    surfaces: Sequence[ControlSurface] | None = None,
    laws: Iterable[str] | None = None,
    *,
    tolerance: Mapping[str, float] | None = None,
    scale: Mapping[str, float] | None = None,
    sources: Sequence[Source] = (),
) -> Result:
    """Ledgers of several control surfaces; by default the whole domain and one around each body."""
    chosen = list(surfaces) if surfaces else default_surfaces(flow)
    names = list(laws) if laws is not None else None
    ledgers = [
        balance(flow, surface, names, tolerance=tolerance, scale=scale, sources=sources) for surface in chosen
    ]
    hints = dict.fromkeys([*flow.hints, *(hint for ledger in ledgers for hint in ledger.hints)])
    return Result(case_dict(flow), tuple(ledgers), tuple(hints))


def default_surfaces(flow: Flow) -> list[ControlSurface]:
    """The whole domain, and a surface around each body halfway to what is next to it."""
    from fvcheck.mesh.boundary import clearance

    out = [ControlSurface.domain(name="domain")]
    for body in flow.mesh.bodies:
        gap = 0.5 * clearance(flow.mesh, body)
        out.append(ControlSurface.around(body, gap, name=f"around-{body}"))
    return out


def _choose_laws(flow: Flow, names: Iterable[str] | None) -> tuple[list[Law], list[Hint]]:
    if names is not None:
        chosen = [find_law(name) for name in dict.fromkeys(names)]
        if not chosen:
            raise SetupError("no law is asked for", mend=f"Laws: {', '.join(law_names())}.")
        return chosen, []
    skip = {"heat", "kinetic-energy"} if flow.fluid.ideal_gas else {"total-energy"}
    if "temperature" not in flow.fields:
        skip.add("heat")
    return [find_law(name) for name in law_names() if name not in skip], []


@dataclass(frozen=True, eq=False)
class _Contributions:
    """Integrated terms of one law by one degree.

    parts : name -> (q, c) flux through each line quadrature point
    level : (q, c) flux of the uniform state, left out of the scale
    source, storage : (k, c) per area piece, None where there is none
    """

    parts: dict[str, Array]
    level: Array | float
    source: Array | None
    storage: Array | None

    @property
    def total(self) -> Array:
        return sum(self.parts.values())  # type: ignore[return-value]


class _Sampling:
    """Samples of a flow on one overlay, made when first asked for."""

    def __init__(self, flow: Flow, surface: ControlSurface, overlay: Overlay, laws: Sequence[Law]) -> None:
        self.flow, self.surface, self.overlay = flow, surface, overlay
        self.has_rates = any(role.startswith("rate:") for role in flow.fields)
        self.depth = flow.case.depth or 1.0
        self.places, weights = along(overlay.start, overlay.end)
        self.triangle = np.repeat(overlay.triangle, PER_PIECE, axis=0)
        self.normals = (overlay.normals[:, None, :] * weights[None, :, None]).reshape(-1, 2) * self.depth
        self.drawn = np.repeat(overlay.patch == DRAWN, PER_PIECE)
        self.patch = np.repeat(overlay.patch, PER_PIECE)
        # One group per cell; what lies on the domain boundary apart from what crosses the fluid.
        key = 2 * np.repeat(overlay.cell, PER_PIECE) + ~self.drawn
        groups, self.line_group = np.unique(key, return_inverse=True)
        self.reaching = (groups % 2 == 1) & (flow.location == "cell")
        self.surface_velocity = surface.motion.at(self.places) if surface.motion is not None else None
        self._set_up_area(overlay.closed and any(self._needs_area(law) for law in laws))
        centres = np.unique(self.triangle)
        if self.area_triangle is not None:
            centres = np.unique(np.concatenate([centres, self.area_triangle.ravel()]))
        self.probe = compile_probe(flow, centres)
        self.line = self.probe.samples(self.triangle, self.places, self.line_group)
        self.area = (
            None
            if self.area_triangle is None
            else self.probe.samples(self.area_triangle, self.area_places, self.area_group)
        )
        self.datum = Datum()
        if overlay.closed:
            self.datum = self._find_datum()
        self._states: dict[tuple[str, int], State] = {}
        self._shaken: list[State] | None = None

    def _needs_area(self, law: Law) -> bool:
        """Whether the law's volume terms vary over the volume, so that they must be sampled."""
        if self.has_rates:
            return True
        try:
            law.source(self._bare_state())
        except (MissingData, KeyError):
            return True
        return False

    def _bare_state(self) -> State:
        """One place, no fields: what can be had from it is the same everywhere."""
        known = {role: field for role, field in self.flow.fields.items() if role.endswith("_source")}
        if known or "body_force" in self.flow.fields:
            raise MissingData("constant sources", "")
        return State(self.flow.fluid, {}, np.full((1, 2), np.nan))

    def _set_up_area(self, needed: bool) -> None:
        self.area_triangle: Array | None = None
        if not needed:
            return
        from fvcheck.kernels.triangulate import triangulate_cells

        mesh, overlay = self.flow.mesh, self.overlay
        triangles, first = triangulate_cells(mesh.points, mesh.offsets, mesh.nodes, overlay.whole)
        corners = np.concatenate([mesh.points[triangles], overlay.corners])
        u, v = corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0]
        sizes = 0.5 * (u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0])
        sizes[len(triangles) :] *= overlay.corner_weight
        self.area_places, weights = within(corners)
        self.area_triangle = np.repeat(np.concatenate([triangles, overlay.corner_triangle]), PER_TRIANGLE, axis=0)
        self.area_weights = (sizes[:, None] * weights).ravel() * self.depth
        cells = np.concatenate([np.repeat(overlay.whole, np.diff(first)), overlay.corner_cell])
        self.area_cells, self.area_group = np.unique(np.repeat(cells, PER_TRIANGLE), return_inverse=True)

    def _find_datum(self) -> Datum:
        state = self._line_state_of(self.line.best)
        weights = np.hypot(*self.normals.T)
        levels = {}
        for name in ("pressure", "temperature"):
            try:
                levels[name] = float(np.average(getattr(state, name), weights=weights))
            except (MissingData, KeyError):
                continue
        return Datum(**levels)

    def _state(self, fields: Mapping[str, Sampled], places: Array) -> State:
        return State(self.flow.fluid, fields, places, self.datum)

    def line_state(self, degree: int) -> State:
        """State at the line quadrature points; degree `BEST` is what the data support."""
        if ("line", degree) not in self._states:
            fields = self.line.best if degree == BEST else self.line.by_degree[degree]
            self._states["line", degree] = self._line_state_of(fields)
        return self._states["line", degree]

    def _line_state_of(self, sampled: Mapping[str, Sampled]) -> State:
        names = self.flow.mesh.boundary.names
        on_wall = np.zeros(len(self.places), bool)
        velocity = np.zeros((len(self.places), 2))
        for name, wall in self.flow.walls.items():
            here = self.patch == names.index(name)
            on_wall |= here
            velocity[here] = wall
        return self._state(pin_walls(sampled, on_wall, velocity), self.places)

    def shaken_line_states(self) -> list[State]:
        """Line states from data with a shaken last digit; none where data are in double precision."""
        if self._shaken is None:
            coarse = self.probe.precision > 1e-13
            shaken = (self.probe.shaken(seed) for seed in range(_SHAKES * coarse))
            self._shaken = [
                self._line_state_of(p.by_role(p.raw(DEGREES[-1], self.triangle, self.places))) for p in shaken
            ]
        return self._shaken

    def area_state(self, degree: int) -> State:
        """State at the area quadrature points; degree `BEST` is what the data support."""
        if ("area", degree) not in self._states:
            assert self.area is not None
            fields = self.area.best if degree == BEST else self.area.by_degree[degree]
            self._states["area", degree] = self._state(fields, self.area_places)
        return self._states["area", degree]

    def fluxes(self, law: Law, state: State) -> dict[str, Array]:
        """Part -> (q, c) flux through each line quadrature point."""
        parts = {"convective": convective(law, state, self.normals, self.surface_velocity)}
        for name, flux in law.fluxes.items():
            value = flux(state, self.normals)
            if value is not None:
                parts[name] = value
        return parts

    def contributions(self, law: Law, degree: int) -> _Contributions:
        state = self.line_state(degree)
        level = law.level(state, self.normals) if law.level else 0.0
        parts = self.fluxes(law, state)
        if not self.overlay.closed:
            return _Contributions(parts, level, None, None)
        return _Contributions(parts, level, self._source(law, degree), self._storage(law, degree))

    def _source(self, law: Law, degree: int) -> Array | None:
        if self._needs_area(law):
            source = law.source(self.area_state(degree))
            return None if source is None else self._per_cell(source * self.area_weights[:, None])
        constant = law.source(self._bare_state())
        if constant is None:
            return None
        return constant * self.overlay.area(self.flow.mesh) * self.depth

    def _storage(self, law: Law, degree: int) -> Array | None:
        """∂b/∂t over the volume plus b w·n over its moving border, where rates are given.

        The rate of b follows from those of the fields by a complex step, exact
        to rounding for any law (Squire & Trapp 1998).
        """
        if not self.has_rates:
            return None
        state, step = self.area_state(degree), 1e-30
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
        rate = np.imag(law.density(self._state(moved, state.x))) / step
        storage = self._per_cell(rate * self.area_weights[:, None])
        if self.surface_velocity is not None:
            swept = np.einsum("qi,qi->q", self.surface_velocity, self.normals)
            border = law.density(self.line_state(degree)) * swept[:, None]
            storage = np.concatenate([storage, self.per_line_cell(border)])
        return storage

    def _per_cell(self, values: Array) -> Array:
        return _sum_groups(self.area_group, len(self.area_cells), values)

    def per_line_cell(self, values: Array) -> Array:
        """(q, c) summed per mesh cell."""
        return _sum_groups(self.line_group, len(self.reaching), values)

    @property
    def falls(self) -> bool:
        """Whether the data support less than the highest degree anywhere."""
        parts = [self.line] if self.area is None else [self.line, self.area]
        return any(bool(np.any(part.supported < DEGREES[-1])) for part in parts)

    def degree_shares(self) -> dict[str, float]:
        """Share of the length of the surface that each degree was used on."""
        length = np.hypot(*self.normals.T)
        used = self.line.supported[self.line_group]
        return {str(degree): float(length[used == degree].sum() / length.sum()) for degree in DEGREES}

    def hints(self, laws: Sequence[Law]) -> list[Hint]:
        """Remarks on what the laws left out."""
        out = []
        state = self.line_state(BEST)
        if state.viscosity is None and any("viscous" in law.fluxes for law in laws):
            out.append(Hint("inviscid", "no viscosity is known: momentum and energy are taken as inviscid"))
        conducting = any("conductive" in law.fluxes for law in laws)
        if conducting and state.conductivity is None and "temperature" in state.fields:
            out.append(Hint("no-conduction", "no conductivity is known: heat is carried by the flow only"))
        if self.surface_velocity is not None and not self.has_rates and self.overlay.closed:
            out.append(
                Hint(
                    "steady-in-moving-frame",
                    f"{self.surface.name}: the content of the moving surface is taken as constant",
                )
            )
        return out


def _sum_groups(group: Array, count: int, values: Array) -> Array:
    return np.column_stack([np.bincount(group, column, count) for column in values.T])


def _rows(
    law: Law,
    sampling: _Sampling,
    tolerance: Mapping[str, float],
    scale: Mapping[str, float],
    sources: Sequence[Source],
) -> list[Row]:
    degrees = [sampling.contributions(law, degree) for degree in DEGREES]
    best = sampling.contributions(law, BEST) if sampling.falls else degrees[-1]
    closed = sampling.overlay.closed
    raw = np.abs(best.total).sum()
    felt = best.total - best.level
    size = scale.get(law.name, 0.5 * float(np.hypot.reduce(felt, axis=1).sum())) if closed else None
    told = [
        (share_inside(source, sampling.surface, sampling.flow.mesh), source)
        for source in sources
        if source.law == law.name and closed
    ]
    shaken = [sampling.fluxes(law, state) for state in sampling.shaken_line_states()]
    rows = []
    for c, component in enumerate(law.components):
        pieces = [_pieces(sampling, terms, c) for terms in degrees]
        spread = [sum(part[:, c].sum() for part in parts.values()) for parts in shaken]
        rounding = _SHAKE_COVERAGE * float(np.std(spread)) if spread else 0.0
        rounding += _ROUNDINGS * np.finfo(float).eps * float(raw)
        chosen = _pieces(sampling, best, c) if sampling.falls else None
        band = bands(*pieces, rounding, chosen, sampling.reaching)
        told_here = sum(share * source.along(component) for share, source in told)
        row = _row(law, component, sampling, best, c, told_here)
        if closed:
            linear = float(pieces[0].sum()) - told_here
            row = _close(law, row, band, size, linear, tolerance, _NOTHING * float(raw))
        rows.append(
            replace(
                row,
                sampling_band=band.sampling,
                resolution_band=band.resolution,
                rounding_band=band.rounding,
            )
        )
    return rows


def _pieces(sampling: _Sampling, terms: _Contributions, c: int) -> Array:
    """Contributions to the imbalance, one per cell and kind: what the bands are made of."""
    out = [sampling.per_line_cell(terms.total)[:, c]]
    if terms.source is not None:
        out.append(-terms.source[:, c])
    if terms.storage is not None:
        out.append(terms.storage[:, c])
    return np.concatenate(out)


def _row(
    law: Law, component: str | None, sampling: _Sampling, terms: _Contributions, c: int, told: float
) -> Row:
    drawn, closed = sampling.drawn, sampling.overlay.closed
    if not closed:
        # A patch taken as a surface has no drawn pieces: all of it counts.
        drawn = np.ones_like(drawn)
    total = terms.total[:, c]
    names = sampling.flow.mesh.boundary.names
    enclosed = np.unique(sampling.patch[~drawn])
    patches = {names[k]: float(total[sampling.patch == k].sum()) for k in enclosed.tolist()}
    parts = {name: float(value[drawn, c].sum()) for name, value in terms.parts.items()}
    flux, boundary = float(total[drawn].sum()), float(total[~drawn].sum())
    source = told + (0.0 if terms.source is None else float(terms.source[:, c].sum()))
    storage = 0.0 if terms.storage is None else float(terms.storage[:, c].sum())
    datum = {"heat": sampling.datum.temperature, "kinetic-energy": sampling.datum.pressure}.get(law.name)
    return Row(
        law=law.name,
        component=component,
        unit=law.unit if sampling.flow.case.depth is None else law.unit.removesuffix("/m"),
        parts=parts,
        inflow=float(-np.minimum(total[drawn], 0.0).sum()),
        outflow=float(np.maximum(total[drawn], 0.0).sum()),
        flux=flux,
        boundary=boundary if closed else None,
        patches=patches if closed else {},
        storage=storage if closed else None,
        source=source if closed else None,
        imbalance=storage + flux + boundary - source if closed else None,
        scale=None,
        imbalance_percent=None,
        sampling_band=0.0,
        resolution_band=0.0,
        rounding_band=0.0,
        linear_imbalance=None,
        tolerance_percent=None,
        verdict=None,
        datum=datum if closed else None,
    )


def _close(
    law: Law,
    row: Row,
    band: Any,
    size: float | None,
    linear: float,
    tolerance: Mapping[str, float],
    floor: float,
) -> Row:
    """The row with scale, percent and verdict."""
    assert row.imbalance is not None and size is not None
    percent = tolerance.get(law.name, law.tolerance_percent)
    nothing = size <= floor
    if nothing and abs(row.imbalance) <= floor + band.rounding:
        verdict = CLOSED
    else:
        verdict = judge(row.imbalance, band.sampling, band.resolution, 0.01 * percent * size)
    return replace(
        row,
        scale=size,
        imbalance_percent=None if nothing else 100.0 * row.imbalance / size,
        linear_imbalance=linear,
        tolerance_percent=percent,
        verdict=verdict,
    )


def check_tolerance(tolerance: Mapping[str, float]) -> None:
    """SetupError for a tolerance of an unknown law, or one that is not positive."""
    for name, value in tolerance.items():
        find_law(name)
        if not value > 0:
            raise SetupError(f"the tolerance of {name} is {value}", mend="Give a positive percentage.")


__all__ = ["FvcheckError", "balance", "balance_all", "check_tolerance", "default_surfaces"]
