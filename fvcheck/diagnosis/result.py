"""What a diagnosis says, in words, numbers and tables."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from fvcheck.diagnosis.cause import Told
from fvcheck.diagnosis.cells import CellLedgers
from fvcheck.diagnosis.naming import Candidate, Why
from fvcheck.diagnosis.where import Place
from fvcheck.hints import Hint
from fvcheck.ledger import SCHEMA
from fvcheck.notebook import html_hints, html_line, html_table
from fvcheck.version import __version__

Array = np.ndarray

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
