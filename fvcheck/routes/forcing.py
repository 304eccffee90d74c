"""Forces on bodies: every route, and whether they agree."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from fvcheck.errors import FieldError, MeshError, SetupError, SurfaceError
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import MissingData
from fvcheck.ledger import case_dict
from fvcheck.plausible import field_hints
from fvcheck.routes.asked import (
    area_of,
    bodies_of,
    default_methods,
    methods_asked,
    point_of,
    reference_of,
    unit_vector,
)
from fvcheck.routes.band import band
from fvcheck.routes.circulation import circulation
from fvcheck.routes.contour import body_surface, control_surface
from fvcheck.routes.estimate import Estimate, Reference
from fvcheck.routes.found import Forces
from fvcheck.routes.reach import band_range, default_distances, surface_range
from fvcheck.routes.remarks import reference_remarks, remarks
from fvcheck.routes.sweep import Sweep
from fvcheck.routes.terms import View
from fvcheck.routes.wake import FORMULAS, wake
from fvcheck.surfaces import ControlSurface
from fvcheck.surfaces.family import Family


def forces(
    flow: Flow,
    body: str | Sequence[str] | None = None,
    *,
    methods: Iterable[str] | None = None,
    distances: Sequence[float] | None = None,
    surfaces: Sequence[ControlSurface] | None = None,
    band_between: tuple[float, float] | None = None,
    wake_line: ControlSurface | Mapping[str, ControlSurface] | None = None,
    wake_formula: str = "momentum",
    sweep: Family | None = None,
    about: tuple[float, float] | Mapping[str, tuple[float, float]] = (0.0, 0.0),
    direction: tuple[float, float] | None = None,
    reference: Reference | Mapping[str, Any] | None = None,
) -> Forces:
    """Forces that the fluid exerts on bodies, by independent routes.

    body : a patch or several; by default every body of the mesh
    methods : of "body-surface", "control-surface", "band", "wake",
        "circulation". By default the first three, "wake" where a line is given,
        "circulation" where a reference is given and the body stands free
    distances : of control surfaces from the body; by default three, from the
        gap to the nearest other boundary and the size of the cells
    surfaces : control surfaces of one's own, in place of those at distances
    band_between : two distances; by default the range of the default ones
    wake_line : an open line across the wake, or body -> such a line
    sweep : a family of surfaces around the body, or of lines across its wake:
        force against position, and where it is level (`fvcheck.routes.sweep`)
    wake_formula : "momentum", "betz" or "jones" (see `fvcheck.routes.wake.wake`)
    about : point of the moment, which counts counter-clockwise; or body -> such a point
    direction : of the stream, by default x, or the axis of an axisymmetric run; the lift is
        90° counter-clockwise from it
    reference : velocity, length, density for coefficients, of all bodies; or body -> such a reference

    A route that cannot be had gives an entry without numbers and a hint.
    Raises SetupError for an unknown body or route, FieldError where velocity,
    pressure or density are missing.
    """
    asked = None if methods is None else methods_asked(methods)
    if wake_formula not in FORMULAS:
        raise SetupError(f"unknown formula {wake_formula!r}", mend=f"Known: {', '.join(FORMULAS)}.")
    along = unit_vector(direction or ((0.0, 1.0) if flow.case.axis == 1 else (1.0, 0.0)))
    for value in distances or ():
        if not (math.isfinite(value) and value > 0):
            raise SetupError(f"a distance is {value:g}", mend="Distances from a body are above zero.")
    estimates: list[Estimate] = []
    hints: list[Hint] = [*flow.hints, *field_hints(flow)]
    sweeps: list[Sweep] = []
    for name in bodies_of(flow, body):
        told = reference_of(reference, name)
        view = View(name, point_of(about, name), along, flow.case.axis)
        line = wake_line.get(name) if isinstance(wake_line, Mapping) else wake_line
        job = _Job(flow, view, told, distances, surfaces, band_between, line, wake_formula)
        wanted = default_methods(line, reference) if asked is None else asked
        found = [e for method in wanted for e in job.run(method, asked=asked is not None)]
        estimates += [e.with_coefficients(told, area_of(flow, told)) for e in found]
        hints += remarks(flow, name, found)
        if sweep is not None:
            swept = job.sweep(sweep)
            sweeps.append(swept)
            hints += swept.hints()
        hints += reference_remarks(flow, name, told)
    return Forces(case_dict(flow), tuple(estimates), tuple(dict.fromkeys(hints)), tuple(sweeps))


@dataclass(frozen=True)
class _Job:
    """What is asked about one body."""

    flow: Flow
    view: View
    reference: Reference | None
    distances: Sequence[float] | None
    surfaces: Sequence[ControlSurface] | None
    band_between: tuple[float, float] | None
    wake_line: ControlSurface | None
    wake_formula: str

    def run(self, method: str, asked: bool) -> list[Estimate]:
        flow, view = self.flow, self.view
        if method == "body-surface":
            return [self._tried(method, lambda: body_surface(flow, view))]
        if method == "band":
            near, far = self.band_between or band_range(flow, view.body)
            return [self._tried(method, lambda: band(flow, view, near, far), distance=(near, far))]
        if self.distances:
            chosen = tuple(self.distances)
        else:
            chosen = default_distances(*(self.band_between or surface_range(flow, view.body)))
        if method == "control-surface" and self.surfaces:
            return [
                self._tried(
                    method, lambda s=s: control_surface(flow, view, s, None), surface=s.name or s.text
                )
                for s in self.surfaces
            ]
        if method == "control-surface":
            return [
                self._tried(
                    method,
                    lambda d=d: control_surface(flow, view, ControlSurface.around(view.body, d), d),
                    distance=d,
                )
                for d in chosen
            ]
        if method == "wake":
            return [
                self._tried(
                    method,
                    lambda: wake(flow, view, self.wake_line, self.reference, self.wake_formula),
                    formula=self.wake_formula,
                )
            ]
        found = self._tried(
            method, lambda: circulation(flow, view, chosen, self.reference), distance=chosen[-1]
        )
        return [found] if asked or not found.refused else []

    def sweep(self, family: Family) -> Sweep:
        """The route that suits the family's members, at each of them."""
        flow, view, formula = self.flow, self.view, self.wake_formula
        found = []
        for position, surface in zip(family.positions, family.surfaces):
            if surface.closed:
                found.append(
                    self._tried(
                        "control-surface",
                        lambda s=surface, x=position: control_surface(flow, view, s, x),
                        distance=position,
                    )
                )
            else:
                found.append(
                    self._tried(
                        "wake",
                        lambda s=surface: wake(flow, view, s, self.reference, formula),
                        formula=formula,
                    )
                )
        return Sweep(view.body, family.text, family.positions, tuple(found))

    def _tried(self, method: str, route: Any, **more: Any) -> Estimate:
        """The route's estimate; one without numbers where the route cannot be gone."""
        try:
            return route()
        except MissingData:
            raise
        except (SurfaceError, MeshError, SetupError, FieldError) as error:
            return Estimate(
                self.view.body,
                method,
                moment_about=self.view.about,
                direction=self.view.direction,
                refused=str(error),
                **more,
            )
