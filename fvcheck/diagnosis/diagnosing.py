"""Where an imbalance sits, and which set-up error would close the ledger."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import replace

import numpy as np

from fvcheck.diagnosis.cause import Cause, Setting
from fvcheck.diagnosis.causes import causes_of, storage_cause
from fvcheck.diagnosis.cells import CellLedgers, Column, cell_ledgers
from fvcheck.diagnosis.columns import terms_of
from fvcheck.diagnosis.fitting import Ledgers
from fvcheck.diagnosis.naming import Why, explain
from fvcheck.diagnosis.part import cells_in, part_of
from fvcheck.diagnosis.result import Diagnosis
from fvcheck.diagnosis.tiling import Tiling
from fvcheck.diagnosis.volumes import random_blocks
from fvcheck.diagnosis.where import where
from fvcheck.errors import FieldError, FvcheckError, SetupError
from fvcheck.fields import Field
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import Law, MissingData, find_law
from fvcheck.ledger import case_dict
from fvcheck.overlay.overlay import lay_over
from fvcheck.sources import Source
from fvcheck.surfaces import ControlSurface

Array = np.ndarray

LAWS = ("mass", "momentum", "heat", "total-energy")
"""Laws that are diagnosed."""

# More cells take minutes: what comes with another answer leaves them to `diagnose`.
_MANY_CELLS = 200_000

# Blocks that causes are fitted to; more say little more, since they overlap.
_VOLUMES, _SEED = 60, 1


def diagnose_open(
    flow: Flow, laws: Iterable[str], sources: Sequence[Source] = ()
) -> tuple[Diagnosis | None, str]:
    """What `diagnose` says of laws whose rows are open, or None and why; "" where it knows none of them."""
    chosen = [law for law in dict.fromkeys(laws) if law in LAWS]
    if not chosen:
        return None, ""
    if flow.mesh.n_cells > _MANY_CELLS:
        return None, f"{flow.mesh.n_cells} cells would take minutes; fvcheck diagnose makes it."
    try:
        return diagnose(flow, chosen, sources=sources), ""
    except FvcheckError as error:
        return None, str(error)


def diagnose(
    flow: Flow,
    laws: Iterable[str] | None = None,
    *,
    sources: Sequence[Source] = (),
    previous: Flow | None = None,
    volumes: int = _VOLUMES,
    region: ControlSurface | None = None,
) -> Diagnosis:
    """Where the imbalances of a flow sit, and which set-up errors would explain them.

    laws : of `LAWS`; by default all that the data allow
    sources : what enters the domain otherwise
    previous : the stored state before, by which missing storage can be told
    volumes : blocks of cells that causes are fitted to
    region : a closed surface; only the cells within are looked at

    Nothing is changed: `try_cause` shows what a proposal would do. Raises FieldError
    or SetupError for a law that was asked for and cannot be evaluated,
    SurfaceError for a region without cells.
    """
    hints: list[Hint] = []
    chosen = _chosen(flow, laws, hints)
    names = tuple(law.name for law in chosen)
    inside = None if region is None else cells_in(flow.mesh, region)
    ledgers = cell_ledgers(flow, chosen, terms_of(flow, names), inside)
    ledgers = _with_sources(ledgers, sources)
    stored = _storage(flow, previous, chosen, ledgers)
    if inside is not None:
        ledgers, part = part_of(ledgers, inside)
        stored = {law: part(column) for law, column in stored.items()}
    blocks = random_blocks(ledgers, volumes, _SEED)
    tiling = Tiling.of(ledgers)
    known = _known(ledgers)
    why, places = [], []
    for law in chosen:
        places += where(ledgers, law.name, law.components, tiling)
        if len(blocks.size) == 0:
            hints.append(
                Hint("too-few-cells", f"{len(ledgers.cells)} cells are too few to tell causes apart")
            )
            why.append(Why(law.name, 0.0, 0.0, (), ()))
            continue
        columns = {**ledgers.parts[law.name], **ledgers.terms}
        causes: list[Cause] = []
        if law.name in stored:
            columns["storage"] = stored[law.name]
            causes.append(storage_cause())
        columns = {name: c for name, c in columns.items() if c.edge.shape[2] == len(law.components)}
        causes += causes_of(law.name, known, set(columns))
        data = Ledgers.of(
            blocks, ledgers.columns[law.name], columns, ledgers.outside, ledgers.shaken.get(law.name)
        )
        why.append(explain(law.name, data, causes))
    found = Diagnosis(case_dict(flow), tuple(why), tuple(places), (), ledgers)
    if not stored and not flow.has_rates and any(found.state(one) == "unexplained" for one in why):
        hints.append(
            Hint("storage-unknown", "one state alone: what the volumes store over time cannot be told")
        )
    return replace(found, hints=(*flow.hints, *dict.fromkeys(hints)))


def _chosen(flow: Flow, names: Iterable[str] | None, hints: list[Hint]) -> list[Law]:
    """Laws that can be evaluated; an error for one that was asked for."""
    asked = None if names is None else list(dict.fromkeys(names))
    skip = {"heat"} if flow.fluid.ideal_gas or "temperature" not in flow.fields else set()
    if not flow.fluid.ideal_gas:
        skip.add("total-energy")
    out = []
    for name in LAWS if asked is None else asked:
        if asked is None and name in skip:
            continue
        law = find_law(name)
        if name not in LAWS:
            raise SetupError(f"{name} is not diagnosed", mend=f"Laws: {', '.join(LAWS)}.")
        try:
            _probe(flow, law)
        except MissingData as missing:
            if asked is not None:
                raise FieldError(
                    f"the {name} law cannot be evaluated: {missing.what}", mend=missing.mend
                ) from None
            hints.append(Hint("law-left-out", f"{name}: {missing.what}. {missing.mend}"))
            continue
        out.append(law)
    if not out:
        raise FieldError(
            "no law can be evaluated with these data",
            where="; ".join(hint.message for hint in hints if hint.code == "law-left-out"),
        )
    return out


def _probe(flow: Flow, law: Law) -> None:
    """MissingData where the law lacks data, found out before the whole mesh is sampled."""
    from fvcheck.laws.state import State
    from fvcheck.sampling.sampled import Sampled

    fields = {}
    for role, f in flow.fields.items():
        one = np.asarray(f.values[:1], float)
        fields[role] = Sampled(one, np.zeros((*one.shape, 2)))
    state = State(flow.fluid, fields, np.ones((1, 2)), axis=flow.case.axis)
    law.density(state)
    for flux in law.fluxes.values():
        flux(state, np.ones((1, 2)))
    law.source(state)


def _known(ledgers: CellLedgers) -> Setting:
    flow = ledgers.flow
    told, field = flow.fluid.density, flow.fields.get("density")
    density = float(told) if isinstance(told, int | float) else None
    if density is None:
        density = 1.0 if field is None else float(np.nanmean(field.values))
    return Setting(flow, density, ledgers.datum.temperature)


def _storage(
    flow: Flow, previous: Flow | None, laws: Sequence[Law], ledgers: CellLedgers
) -> dict[str, Column]:
    """Law -> what it stores by the difference of two states."""
    if previous is None or flow.case.time is None or previous.case.time is None:
        return {}
    step = flow.case.time - previous.case.time
    if step == 0.0 or flow.has_rates:
        return {}
    rates: dict[str, Field] = {}
    for role in ("velocity", "momentum", "temperature", "density", "pressure", "total_energy"):
        here, there = flow.fields.get(role), previous.fields.get(role)
        if here is None or there is None or here.values.shape != there.values.shape:
            continue
        rate = (np.asarray(here.values, float) - np.asarray(there.values, float)) / step
        rates[f"rate:{role}"] = replace(here, values=rate, rim=None)
    if not rates:
        return {}
    moving = replace(flow, fields={**flow.fields, **rates})
    with_rates = cell_ledgers(moving, laws, {})
    return {law.name: with_rates.columns[law.name] + ledgers.columns[law.name] * -1.0 for law in laws}


def _with_sources(ledgers: CellLedgers, sources: Sequence[Source]) -> CellLedgers:
    """The ledgers less what the user says enters, spread over the cells under its shape."""
    columns = dict(ledgers.columns)
    mesh, axis = ledgers.flow.mesh, ledgers.flow.case.axis
    for source in sources:
        if source.law not in columns:
            continue
        overlay = lay_over(mesh, source.shape.resolve(mesh))
        share = np.bincount(overlay.corner_cell, overlay.corner_areas, mesh.n_cells)
        share[overlay.whole] += mesh.areas[overlay.whole]
        if axis is not None:
            share = share * np.maximum(ledgers.centres[:, 1 - axis], 0.0)
        share = share / share.sum()
        rate = np.atleast_1d(np.asarray(source.rate, float))
        old = columns[source.law]
        made = np.zeros((len(old.edge), mesh.n_cells, old.edge.shape[2])) if old.cell is None else old.cell
        columns[source.law] = Column(old.edge, made - share[None, :, None] * rate)
    return replace(ledgers, columns=columns)
