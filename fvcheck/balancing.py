"""The balance of a flow over control surfaces: overlay → samples → ledger."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence

import numpy as np

from fvcheck import ports as port_room
from fvcheck.entries import rows_of
from fvcheck.errors import FieldError, SetupError
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import Law, MissingData, find_law, law_names
from fvcheck.ledger import Ledger, Result, Row, case_dict
from fvcheck.overlay.overlay import lay_over
from fvcheck.sources import Source
from fvcheck.surfaces import ControlSurface
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray


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
    volume = SampledVolume(flow, placed, overlay, chosen)
    rows: list[Row] = []
    for law in chosen:
        try:
            rows += rows_of(law, volume, dict(tolerance or {}), dict(scale or {}), sources)
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
    hints += volume.hints(chosen)
    return Ledger(
        name=placed.name or placed.kind,
        kind=placed.kind,
        closed=overlay.closed,
        length=float(overlay.lengths.sum()),
        area=overlay.area(flow.mesh) if overlay.closed else None,
        degrees=volume.degree_shares(),
        rows=tuple(rows),
        ports=port_room.ports(flow, placed, overlay, volume.line_state(BEST)),
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


def check_tolerance(tolerance: Mapping[str, float]) -> None:
    """SetupError for a tolerance of an unknown law, or one that is not positive."""
    for name, value in tolerance.items():
        find_law(name)
        if not value > 0:
            raise SetupError(f"the tolerance of {name} is {value}", mend="Give a positive percentage.")
