"""Where an imbalance sits, and which set-up error would close the ledger."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from fvcheck.balancing import balance_all, default_surfaces
from fvcheck.diagnosis.cause import Cause, Setting, Told
from fvcheck.diagnosis.causes import causes_of, storage_cause
from fvcheck.diagnosis.cells import CellLedgers, Column, cell_ledgers
from fvcheck.diagnosis.columns import terms_of
from fvcheck.diagnosis.fitting import Ledgers
from fvcheck.diagnosis.naming import Candidate, Why, explain
from fvcheck.diagnosis.region import cells_in, part_of
from fvcheck.diagnosis.volumes import random_blocks
from fvcheck.diagnosis.where import Place, Tiling, where
from fvcheck.errors import FieldError, FvcheckError, SetupError, SurfaceError
from fvcheck.fields import Field
from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import Law, MissingData, find_law
from fvcheck.ledger import SCHEMA, Result, case_dict
from fvcheck.notebook import html_hints, html_line, html_table
from fvcheck.overlay.overlay import lay_over
from fvcheck.sources import Source
from fvcheck.surfaces import ControlSurface
from fvcheck.version import __version__

Array = np.ndarray

LAWS = ("mass", "momentum", "heat", "total-energy")
"""Laws that are diagnosed."""

# More cells take minutes: what comes with another answer leaves them to `diagnose`.
_MANY_CELLS = 200_000

# Blocks that causes are fitted to; more say little more, since they overlap.
_VOLUMES, _SEED = 60, 1

# Mean square of imbalances in resolution bands below which the mesh may explain them all.
_COARSE = 0.25

NONE_EXPLAINS = (
    "no single set-up error explains this: the run is unfinished, or the source is local (see where)"
)


@dataclass(frozen=True, eq=False)
class Diagnosis:
    """What the ledgers of many volumes say about one flow.

    why : per law; where : per law and component; cells : the ledgers of all cells
    """

    case: dict[str, Any]
    why: tuple[Why, ...]
    where: tuple[Place, ...]
    hints: tuple[Hint, ...]
    cells: CellLedgers

    @property
    def proposals(self) -> tuple[tuple[str, Candidate], ...]:
        """(law, cause) of all that are named, the best of each law first."""
        return tuple((why.law, candidate) for why in self.why for candidate in why.named)

    def state(self, why: Why) -> str:
        """ "nothing", "named", "mesh" (within what the mesh explains) or "unexplained"."""
        if why.named:
            return "named"
        out = any(place.law == why.law and place.kind != "nowhere" for place in self.where)
        if why.silent and not out:
            return "nothing"
        return "unexplained" if out or why.coarse > _COARSE else "mesh"

    @property
    def open(self) -> bool:
        """Whether anything is beyond what sampling and the mesh explain."""
        return any(self.state(why) in ("named", "unexplained") for why in self.why)

    def sentence(self, why: Why) -> str:
        """What one law's ledgers say, in words."""
        state = self.state(why)
        if state == "nothing":
            return "nothing to explain: the imbalances lie within their sampling bands"
        if state == "mesh":
            return "nothing to explain beyond what this mesh leaves: refine for less"
        if state == "unexplained":
            return NONE_EXPLAINS
        return ", or ".join(c.told.cause for c in why.named if c.told is not None)

    def _repr_html_(self) -> str:
        says = "".join(html_line(f"{why.law}:", self.sentence(why)) for why in self.why)
        titles = ("law", "component", "x", "y", "across", "amount", "±data", "share %", "along")
        rows = [
            (
                *(place.law, place.component or "", *r.centre, r.size, r.amount, r.band),
                *(100.0 * r.share, r.patch or ""),
            )
            for place in self.where
            for r in place.regions
        ]
        table = html_table(titles, rows, "where it sits") if rows else ""
        return says + table + html_hints(self.hints)

    def to_dict(self) -> dict[str, Any]:
        """The result file: plain types, strict JSON."""
        return {
            "schema": SCHEMA,
            "version": __version__,
            "case": self.case,
            "verdict": "open" if self.open else "closed",
            "surfaces": [],
            "diagnosis": {
                "where": [_region_dict(place, region) for place in self.where for region in place.regions],
                "why": [
                    _cause_dict(why, c, c.told) for why in self.why for c in why.named if c.told is not None
                ],
                "laws": [
                    {
                        "law": why.law,
                        "says": self.sentence(why),
                        "state": self.state(why),
                        "in_sampling_bands": float(np.sqrt(why.before)),
                        "in_resolution_bands": float(np.sqrt(why.coarse)),
                        "ranked": [{"cause": c.cause.name, "left": c.fit.left} for c in why.ranked[:8]],
                    }
                    for why in self.why
                ],
                "lies": [
                    {"law": p.law, "component": p.component, "kind": p.kind, "volumes": p.tested}
                    for p in self.where
                ],
            },
            "hints": [{"code": hint.code, "message": hint.message} for hint in self.hints],
        }


def _region_dict(place: Place, region: Any) -> dict[str, Any]:
    return {
        "law": place.law,
        "component": place.component,
        "centre": list(region.centre),
        "size": region.size,
        "amount": region.amount,
        "band": region.band,
        "share": region.share,
        "significance": region.significance,
        "patch": region.patch,
    }


def _cause_dict(why: Why, candidate: Candidate, told: Told) -> dict[str, Any]:
    return {
        "law": why.law,
        "cause": told.cause,
        "name": candidate.cause.name,
        "coefficient": told.coefficient,
        "interval": list(told.interval),
        "left": candidate.fit.left,
        "next_left": why.next_left,
        "setting": told.setting,
    }


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
    rates = any(role.startswith("rate:") for role in flow.fields)
    if not stored and not rates and any(found.state(one) == "unexplained" for one in why):
        hints.append(
            Hint("storage-unknown", "one state alone: what the volumes store over time cannot be told")
        )
    return replace(found, hints=(*flow.hints, *dict.fromkeys(hints)))


def try_cause(
    flow: Flow,
    told: Told,
    surfaces: Sequence[ControlSurface] | None = None,
    laws: Sequence[str] | None = None,
    **settings: Any,
) -> tuple[Result, Result]:
    """The ledgers before, and with the proposal applied; ``settings`` are those of `balance_all`.

    SetupError where no setting expresses the proposal.
    """
    if told.change is None:
        raise SetupError("the proposal cannot be tried", where=told.cause, mend=told.setting)
    surfaces = surfaces or [*default_surfaces(flow), *_quarters(flow)]
    before = balance_all(flow, surfaces, laws, **settings)
    return before, balance_all(told.change(flow), surfaces, laws, **settings)


def _quarters(flow: Flow) -> list[ControlSurface]:
    """The quarters of the domain: by symmetry, the whole may be balanced where its parts are not."""
    x0, y0, x1, y1 = flow.mesh.bounds
    x, y = 0.5 * (x0 + x1), 0.5 * (y0 + y1)
    boxes = {
        "lower-left": (x0, y0, x, y),
        "lower-right": (x, y0, x1, y),
        "upper-left": (x0, y, x, y1),
        "upper-right": (x, y, x1, y1),
    }
    out = []
    for name, box in boxes.items():
        surface = ControlSurface.box(*box, name=name)
        try:
            lay_over(flow.mesh, surface.resolve(flow.mesh))
        except SurfaceError:
            continue  # no fluid there
        out.append(surface)
    return out


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
    if step == 0.0 or any(role.startswith("rate:") for role in flow.fields):
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
