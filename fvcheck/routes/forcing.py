"""Forces on bodies: every route, and whether they agree."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import asdict, dataclass, field
from typing import Any

from fvcheck.errors import FieldError, MeshError, SetupError, SurfaceError, nearest
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import MissingData
from fvcheck.ledger import SCHEMA, case_dict
from fvcheck.mesh.boundary import clearance
from fvcheck.notebook import html_hints, html_table
from fvcheck.plausible import field_hints
from fvcheck.routes.band import band
from fvcheck.routes.circulation import circulation
from fvcheck.routes.contour import body_surface, control_surface
from fvcheck.routes.estimate import Estimate, Reference
from fvcheck.routes.reach import default_band, default_distances, default_range, is_closed
from fvcheck.routes.sweep import Sweep
from fvcheck.routes.terms import View
from fvcheck.routes.wake import FORMULAS, wake
from fvcheck.surfaces import ControlSurface
from fvcheck.surfaces.family import Family
from fvcheck.version import __version__

METHODS = ("body-surface", "control-surface", "band", "wake", "circulation")

DIRECT = ("body-surface", "control-surface", "band")
"""Routes that need nothing but the flow."""


@dataclass(frozen=True)
class Forces:
    """What was found of the forces on one or several bodies."""

    case: dict[str, Any]
    estimates: tuple[Estimate, ...]
    hints: tuple[Hint, ...] = ()
    sweeps: tuple[Sweep, ...] = field(default=())

    def __getitem__(self, key: str | tuple[str, str]) -> Estimate:
        """``found["band"]`` or, of several bodies, ``found["pier", "band"]``: the first such estimate."""
        body, method = (None, key) if isinstance(key, str) else key
        for estimate in self.estimates:
            if estimate.method == method and body in (None, estimate.body):
                return estimate
        have = ", ".join(dict.fromkeys(f"{e.body} {e.method}" for e in self.estimates)) or "none"
        raise SetupError(f"there is no force {key!r}", mend=f"There are: {have}.")

    def of(self, method: str) -> tuple[Estimate, ...]:
        """All estimates of a route, such as control surfaces at several distances."""
        return tuple(e for e in self.estimates if e.method == method)

    def to_dict(self) -> dict[str, Any]:
        """The result file: plain types, strict JSON."""
        return {
            "schema": SCHEMA,
            "version": __version__,
            "case": self.case,
            "verdict": None,
            "surfaces": [],
            "forces": [asdict(estimate) for estimate in self.estimates],
            "sweeps": [sweep.to_dict() for sweep in self.sweeps],
            "hints": [asdict(hint) for hint in self.hints],
        }

    def _repr_html_(self) -> str:
        titles = ("body", "route", "drag", "±data", "±mesh", "lift", "±data", "±mesh", "moment", "±data", "")
        rows = [
            (
                *(e.body, e.label),
                *(e.drag, *_halves(e, "drag"), e.lift, *_halves(e, "lift")),
                *(e.moment, _halves(e, "moment")[0], e.refused),
            )
            for e in self.estimates
        ]
        return html_table(titles, rows, "force of the fluid") + html_hints(self.hints)


def _halves(e: Estimate, name: str) -> tuple[float | None, float | None]:
    """Sampling and resolution band of a number, None where unknown."""
    known = e.bands.get(name, {})
    return known.get("sampling"), known.get("resolution")


def forces(
    flow: Flow,
    body: str | Sequence[str] | None = None,
    *,
    methods: Iterable[str] | None = None,
    distances: Sequence[float] | None = None,
    surfaces: Sequence[ControlSurface] | None = None,
    band_between: tuple[float, float] | None = None,
    wake_line: ControlSurface | None = None,
    wake_formula: str = "momentum",
    sweep: Family | None = None,
    about: tuple[float, float] = (0.0, 0.0),
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
    wake_line : an open line across the wake
    sweep : a family of surfaces around the body, or of lines across its wake:
        force against position, and where it is level (`fvcheck.routes.sweep`)
    wake_formula : "momentum", "betz" or "jones" (see `fvcheck.routes.wake.wake`)
    about : point of the moment, which counts counter-clockwise
    direction : of the stream, by default x, or the axis of an axisymmetric run; the lift is
        90° counter-clockwise from it
    reference : velocity, length, density for coefficients, of all bodies; or body -> such a reference

    A route that cannot be had gives an entry without numbers and a hint.
    Raises SetupError for an unknown body or route, FieldError where velocity,
    pressure or density are missing.
    """
    wanted = _methods(methods, wake_line, reference)
    if wake_formula not in FORMULAS:
        raise SetupError(f"unknown formula {wake_formula!r}", mend=f"Known: {', '.join(FORMULAS)}.")
    along = _unit(direction or ((0.0, 1.0) if flow.case.axis == 1 else (1.0, 0.0)))
    for value in distances or ():
        if not (math.isfinite(value) and value > 0):
            raise SetupError(f"a distance is {value:g}", mend="Distances from a body are above zero.")
    estimates: list[Estimate] = []
    hints: list[Hint] = [*flow.hints, *field_hints(flow)]
    sweeps: list[Sweep] = []
    for name in _bodies(flow, body):
        told = _reference(reference, name)
        view = View(name, about, along, flow.case.axis)
        job = _Job(flow, view, told, distances, surfaces, band_between, wake_line, wake_formula)
        found = [e for method in wanted for e in job.run(method, asked=methods is not None)]
        estimates += [e.with_coefficients(told, _area(flow, told)) for e in found]
        hints += job.hints(found)
        if sweep is not None:
            swept = job.sweep(sweep)
            sweeps.append(swept)
            hints += swept.hints()
        if told is None:
            hints.append(Hint("no-reference", f"{name}: no reference is told, so there are no coefficients"))
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
            near, far = self.band_between or default_band(flow, view.body)
            return [self._tried(method, lambda: band(flow, view, near, far), distance=(near, far))]
        if self.distances:
            chosen = tuple(self.distances)
        else:
            chosen = default_distances(*(self.band_between or default_range(flow, view.body)))
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

    def hints(self, found: Sequence[Estimate]) -> list[Hint]:
        body, flow = self.view.body, self.flow
        out = [Hint("route-refused", f"{e.body}, {e.label}: {e.refused}") for e in found if e.refused]
        direct = [e for e in found if e.method in DIRECT and not e.refused]
        if direct and not any("viscous" in e.parts for e in direct):
            out.append(Hint("inviscid", f"{body}: no viscosity is known: the force is without friction"))
        low = {e.label: 1.0 - e.degrees["3"] for e in found if e.degrees.get("3", 1.0) < 1.0}
        if low:
            shares = ", ".join(f"{100 * share:.2g} % of {label}" for label, share in low.items())
            message = f"{body}: on {shares} the data jump, and plain linear sampling is used there"
            out.append(Hint("degree-fell", message))
        velocity = flow.fields.get("velocity") or flow.fields.get("momentum")
        cells = velocity is not None and velocity.location == "cell" and velocity.rim is None
        if cells and body not in flow.walls and any(e.method == "body-surface" for e in found):
            message = f"{body} is not told to be a wall: velocities on it are extrapolated from the cells"
            out.append(Hint("body-no-wall", message))
        if not is_closed(flow.mesh, body):
            message = f"{body} does not close around a body: its force holds the level of the pressure"
            out.append(Hint("open-body", message))
        out += _enclosed(flow, body, found)
        return out + disagreements(found)


def _enclosed(flow: Flow, body: str, found: Sequence[Estimate]) -> list[Hint]:
    names = set(flow.mesh.boundary.names) - {body}
    others = sorted({name for e in found for name in e.parts if name in names})
    if not others:
        return []
    gap = clearance(flow.mesh, body)
    message = f"control surfaces around {body} also hold parts of {', '.join(others)} (gap {gap:.4g}): " + (
        "what acts on them is taken off, by an integral along the wall"
    )
    return [Hint("other-patch-inside", message)]


def disagreements(found: Sequence[Estimate]) -> list[Hint]:
    """Routes whose bands do not meet, per number the pair that is widest apart.

    Beyond the resolution bands something is wrong; within them but beyond the
    sampling bands the routes show what the mesh is worth: one hint for all numbers.
    """
    told: dict[str, list[str]] = {"routes-disagree": [], "routes-differ": []}
    for number in ("drag", "lift", "moment"):
        for code, kind in (("routes-disagree", "resolution"), ("routes-differ", "sampling")):
            text = _widest_apart(found, number, kind)
            if text:
                told[code].append(text)
                break
    return [Hint(code, f"{found[0].body}: {'; '.join(texts)}") for code, texts in told.items() if texts]


def _widest_apart(found: Sequence[Estimate], number: str, kind: str) -> str:
    """The two estimates of a number that are most of their bands apart; empty where all bands meet."""
    known = [(e, float(v)) for e in found if (v := getattr(e, number)) is not None and e.bands]
    most, text = 1.0, ""
    for k, (e, a) in enumerate(known):
        for f, b in known[k + 1 :]:
            apart = abs(a - b) / max(e.band(number, kind) + f.band(number, kind), 1e-300)
            if apart > most:
                most = apart
                text = f"{number} {a:.5g} by {e.label}, {b:.5g} by {f.label}, {apart:.3g} times their bands"
    return text and f"{text} apart"


def _methods(
    methods: Iterable[str] | None, line: ControlSurface | None, reference: object
) -> tuple[str, ...]:
    if methods is None:
        more = [*(["wake"] if line is not None else []), *(["circulation"] if reference else [])]
        return (*DIRECT, *more)
    chosen = tuple(dict.fromkeys([methods] if isinstance(methods, str) else methods))
    for method in chosen:
        if method not in METHODS:
            mend = nearest(method, METHODS) or f"Routes: {', '.join(METHODS)}."
            raise SetupError(f"there is no route {method!r}", mend=mend)
    if not chosen:
        raise SetupError("no route is asked for", mend=f"Routes: {', '.join(METHODS)}.")
    return chosen


def _bodies(flow: Flow, body: str | Sequence[str] | None) -> list[str]:
    names = flow.mesh.boundary.names
    chosen = flow.mesh.bodies if body is None else [body] if isinstance(body, str) else body
    for name in chosen:
        if name not in names:
            mend = nearest(name, names) or f"Patches: {', '.join(names)}."
            raise SetupError(f"there is no body {name!r}", mend=mend)
    if not chosen:
        raise SetupError("the domain holds no body", mend=f"Name a patch as the body: {', '.join(names)}.")
    return list(dict.fromkeys(chosen))


def _reference(told: Reference | Mapping[str, Any] | None, body: str) -> Reference | None:
    if told is None or isinstance(told, Reference):
        return told
    known = ("velocity", "length", "density")
    if body in told or not set(told) & set(known):
        return _reference(told.get(body), body)
    if set(told) != set(known):
        raise SetupError(f"the reference has {', '.join(told)}", mend=f"Give {', '.join(known)}.")
    return Reference(**{name: float(told[name]) for name in known})


def _area(flow: Flow, reference: Reference | None) -> float | None:
    """Reference area: length times depth; around an axis the disc of that diameter."""
    if reference is None:
        return None
    if flow.case.axis is not None:
        return 0.25 * math.pi * reference.length**2
    return reference.length * (flow.case.depth or 1.0)


def _unit(direction: tuple[float, float]) -> tuple[float, float]:
    size = math.hypot(*direction)
    if not (math.isfinite(size) and size > 0):
        raise SetupError(f"the direction of the stream is {direction}", mend="Give a vector, such as 1,0.")
    return direction[0] / size, direction[1] / size
