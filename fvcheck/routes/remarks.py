"""What is odd about forces on a body: routes that were refused, lack something, or disagree."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.mesh.boundary import clearance
from fvcheck.routes.asked import DIRECT
from fvcheck.routes.estimate import Estimate, Reference
from fvcheck.routes.reach import body_size, is_closed

# Forces by near and far surfaces agree to a percent in sound work (common practice, no source).
_PRACTICE = 0.01

# A reference off by more than this factor is more likely in other units than meant. Lengths of
# sections, spans and radii are within it.
_FAR_OFF = 50.0


def remarks(flow: Flow, body: str, found: Sequence[Estimate]) -> list[Hint]:
    """What is odd about the estimates of a body, and whether they agree."""
    out = [Hint("route-refused", f"{e.body}, {e.label}: {e.refused}") for e in found if e.refused]
    direct = [e for e in found if e.method in DIRECT and not e.refused]
    if direct and not any("viscous" in e.parts for e in direct):
        out.append(Hint("inviscid", f"{body}: no viscosity is known: the force is without friction"))
    low = {e.label: 1.0 - e.degrees["3"] for e in found if e.degrees.get("3", 1.0) < 1.0 - 1e-9}
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
    return out + disagreements(found, _arm(flow, found))


def reference_remarks(flow: Flow, body: str, told: Reference | None) -> list[Hint]:
    """No reference, or one far from the body's size, the fastest datum and the density told."""
    if told is None:
        return [Hint("no-reference", f"{body}: no reference is told, so there are no coefficients")]
    velocity, density = flow.fields.get("velocity"), flow.fluid.density
    found = {"length": body_size(flow.mesh, body)}
    if velocity is not None:
        found["velocity"] = float(np.sqrt(np.nanmax(np.sum(np.square(velocity.values, dtype=float), axis=1))))
    if isinstance(density, int | float):
        found["density"] = float(density)
    far = [
        f"{name} {getattr(told, name):g} against {size:.3g}"
        for name, size in found.items()
        if size > 0.0 and not 1.0 / _FAR_OFF < getattr(told, name) / size < _FAR_OFF
    ]
    if not far:
        return []
    against = "the body's size, the largest speed, the density of the fluid"
    return [Hint("reference-far-off", f"{body}: the reference is far from {against}: {', '.join(far)}")]


def _arm(flow: Flow, found: Sequence[Estimate]) -> float:
    """The longest arm of the body about the point of its moment; zero where it is a torque about an axis."""
    if not found or flow.case.axis is not None:
        return 0.0
    places = flow.mesh.points[flow.mesh.patch_edges(found[0].body)].reshape(-1, 2)
    return float(np.hypot(*(places - found[0].moment_about).T).max())


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


def disagreements(found: Sequence[Estimate], arm: float) -> list[Hint]:
    """Routes whose bands do not meet, per number the pair that is widest apart.

    Beyond the resolution bands something is wrong. Within them but beyond the
    sampling bands the routes show what the mesh is worth; that is told where they
    are apart by more than the percent that is common practice, of the force or of the force
    on its longest ``arm``. One hint for all numbers.
    """
    told: dict[str, list[str]] = {"routes-disagree": [], "routes-differ": []}
    for number in ("drag", "lift", "moment"):
        for code, kind, least in (
            ("routes-disagree", "resolution", 0.0),
            ("routes-differ", "sampling", _PRACTICE * _size(found, number, arm)),
        ):
            text = _widest_apart(found, number, kind, least)
            if text:
                told[code].append(text)
                break
    return [Hint(code, f"{found[0].body}: {'; '.join(texts)}") for code, texts in told.items() if texts]


def _size(found: Sequence[Estimate], number: str, arm: float) -> float:
    """Of the force, or of the moment: the median of the routes."""

    def median(*names: str) -> float:
        sizes = [np.hypot.reduce([getattr(e, name) or 0.0 for name in names]) for e in found if not e.refused]
        return float(np.median(sizes)) if sizes else 0.0

    force = median("drag", "lift")
    return force if number != "moment" else max(median("moment"), force * arm)


def _widest_apart(found: Sequence[Estimate], number: str, kind: str, least: float) -> str:
    """The two estimates, further apart than ``least``, that are most of their bands apart; or nothing."""
    known = [(e, float(v)) for e in found if (v := getattr(e, number)) is not None and e.bands]
    most, text = 1.0, ""
    for k, (e, a) in enumerate(known):
        for f, b in known[k + 1 :]:
            apart = abs(a - b) / max(e.band(number, kind) + f.band(number, kind), 1e-300)
            if apart > most and abs(a - b) > least:
                most = apart
                text = f"{number} {a:.5g} by {e.label}, {b:.5g} by {f.label}, {apart:.3g} times their bands"
    return text and f"{text} apart"
