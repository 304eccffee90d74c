"""The balance of a flow over control surfaces: overlay → samples → ledger."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import replace

import numpy as np

from fvcheck import ports as port_room
from fvcheck.entries import rows_of
from fvcheck.errors import FieldError, SetupError
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import Law, MissingData, find_law, law_names
from fvcheck.ledger import Ledger, Result, Row, case_dict
from fvcheck.leftout import sampling_hints
from fvcheck.many import sampled_volumes
from fvcheck.plausible import change_hints, field_hints, force_hints, still_hints
from fvcheck.sources import Source
from fvcheck.surfaces import ControlSurface
from fvcheck.volume import BEST, SampledVolume

Array = np.ndarray


def balance(
    flow: Flow,
    surface: ControlSurface,
    laws: Iterable[str | Law] | None = None,
    *,
    tolerance: Mapping[str, float] | None = None,
    scale: Mapping[str, float] | None = None,
    sources: Sequence[Source] = (),
    about: tuple[float, float] = (0.0, 0.0),
) -> Ledger:
    """The ledger of one control surface.

    laws : names, or laws themselves; by default see `choose_laws`
    tolerance : law -> percent of its scale
    scale : law -> reference flux, in place of half the summed |flux|
    sources : what enters the volume otherwise
    about : the point that angular momentum of a plane run counts from

    Raises SurfaceError for a surface outside the domain, FieldError or
    SetupError for a law that was asked for and cannot be evaluated.
    """
    chosen = choose_laws(flow, laws)
    (volume,) = sampled_volumes(flow, [surface], chosen, about)
    ledger = ledger_of(volume, chosen, tolerance, scale, sources, strict=laws is not None)
    return replace(ledger, hints=(*ledger.hints, *change_hints(flow)))


def ledger_of(
    volume: SampledVolume,
    laws: Sequence[Law],
    tolerance: Mapping[str, float] | None = None,
    scale: Mapping[str, float] | None = None,
    sources: Sequence[Source] = (),
    *,
    strict: bool = True,
) -> Ledger:
    """The ledger of a sampled volume; ``strict``: a law that cannot be evaluated is an error, not a hint."""
    placed, overlay, flow = volume.surface, volume.overlay, volume.flow
    rows: list[Row] = []
    hints: list[Hint] = []
    for law in laws:
        try:
            rows += rows_of(law, volume, dict(tolerance or {}), dict(scale or {}), sources)
        except MissingData as missing:
            if strict:
                raise FieldError(
                    f"the {law.name} law cannot be evaluated: {missing.what}", mend=missing.mend
                ) from None
            hints.append(Hint("law-left-out", f"{law.name}: {missing.what}. {missing.mend}"))
    if not rows:
        raise FieldError(
            "no law can be evaluated with these data",
            where="; ".join(hint.message for hint in hints if hint.code == "law-left-out"),
        )
    hints += [*sampling_hints(volume, laws), *still_hints(volume), *force_hints(volume, rows)]
    return Ledger(
        name=placed.name or placed.kind,
        kind=placed.kind,
        closed=overlay.closed,
        length=float(overlay.lengths.sum()),
        area=overlay.area if overlay.closed else None,
        degrees=volume.degree_shares(),
        rows=tuple(rows),
        ports=port_room.ports(flow, placed, overlay, volume.line_state(BEST)),
        hints=tuple(dict.fromkeys(hints)),
    )


def balance_all(
    flow: Flow,
    surfaces: Sequence[ControlSurface] | None = None,
    laws: Iterable[str | Law] | None = None,
    *,
    tolerance: Mapping[str, float] | None = None,
    scale: Mapping[str, float] | None = None,
    sources: Sequence[Source] = (),
    about: tuple[float, float] = (0.0, 0.0),
) -> Result:
    """Ledgers of several control surfaces; by default the whole domain and one around each body."""
    chosen = list(surfaces) if surfaces else default_surfaces(flow)
    wanted = choose_laws(flow, laws)
    return result_of(
        flow,
        [
            ledger_of(volume, wanted, tolerance, scale, sources, strict=laws is not None)
            for volume in sampled_volumes(flow, chosen, wanted, about)
        ],
    )


def result_of(flow: Flow, ledgers: Sequence[Ledger]) -> Result:
    """Ledgers of a flow with all remarks on them and on it, each once."""
    found = (hint for ledger in ledgers for hint in ledger.hints)
    hints = dict.fromkeys([*flow.hints, *field_hints(flow), *found])
    return Result(case_dict(flow), tuple(ledgers), tuple(hints))


def default_surfaces(flow: Flow) -> list[ControlSurface]:
    """The whole domain, and a surface around each body halfway to what is next to it."""
    from fvcheck.mesh.boundary import clearance

    out = [ControlSurface.domain(name="domain")]
    for body in flow.mesh.bodies:
        gap = 0.5 * clearance(flow.mesh, body)
        out.append(ControlSurface.around(body, gap, name=f"around-{body}"))
    return out


def choose_laws(flow: Flow, names: Iterable[str | Law] | None) -> list[Law]:
    """Laws by their names; for None all that the kind of fluid and its fields suggest.

    That leaves out laws on request. Scalars that the user named are among them,
    and angular momentum where an axisymmetric run swirls: there no other law
    sees the swirl.
    """
    if names is not None:
        chosen = [find_law(law) if isinstance(law, str) else law for law in dict.fromkeys(names)]
        if not chosen:
            raise SetupError("no law is asked for", mend=f"Laws: {', '.join(law_names())}.")
        return chosen
    skip = {"heat", "kinetic-energy"} if flow.fluid.ideal_gas else {"total-energy"}
    if "temperature" not in flow.fields:
        skip.add("heat")
    swirls = flow.case.axis is not None and flow.out_of_plane
    wanted = {"angular-momentum"} if swirls else set()
    laws = [find_law(name) for name in law_names() if name not in skip]
    scalars = [find_law(role) for role in flow.fields if role.startswith("scalar:")]
    return [law for law in laws if not law.on_request or law.name in wanted] + scalars


def check_tolerance(tolerance: Mapping[str, float]) -> None:
    """SetupError for a tolerance of an unknown law, or one that is not positive."""
    for name, value in tolerance.items():
        find_law(name)
        if not value > 0:
            raise SetupError(f"the tolerance of {name} is {value}", mend="Give a positive percentage.")
