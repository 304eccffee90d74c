"""What the snapshots of a run say together."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

import numpy as np

from fvcheck.errors import SetupError
from fvcheck.evolution import Total
from fvcheck.hints import Hint
from fvcheck.ledger import SCHEMA, Result, ledger_dict
from fvcheck.notebook import html_line, html_table
from fvcheck.routes.found import NUMBERS, Forces
from fvcheck.trends import Trend
from fvcheck.version import __version__

Array = np.ndarray


@dataclass(frozen=True)
class Entry:
    """One snapshot: its number (of the step or iteration), time where it has one, and ledgers."""

    file: str
    step: int
    time: float | None
    number: int
    result: Result


@dataclass(frozen=True)
class History:
    """The ledgers of a run, snapshot after snapshot.

    unsteady : whether the snapshots have times, so that storage counts
    trends : of every judged row's imbalance in percent of the largest scale of
        the run, of fluxes, and of the force on what a surface encloses
    forces : on the bodies that were asked about, one `Forces` per snapshot; their trends are named
        such as "drag, band", with the body in place of the surface
    totals : surface -> the balance between first and last snapshot, row by row
    hints : those of all snapshots, and what was noticed between them
    ended : why watching a run that still writes came to its end, else ""
    """

    entries: tuple[Entry, ...]
    unsteady: bool
    trends: tuple[Trend, ...]
    totals: dict[str, tuple[Total, ...]]
    hints: tuple[Hint, ...] = ()
    ended: str = ""
    forces: tuple[Forces, ...] = ()

    @property
    def verdict(self) -> str | None:
        """That of the last snapshot."""
        return self.entries[-1].result.verdict

    @property
    def settled(self) -> bool:
        """Whether every quantity has settled."""
        return bool(self.trends) and all(trend.settled for trend in self.trends)

    @property
    def counted(self) -> str:
        """How many there are, such as "6 iterations"."""
        count, kind = len(self.entries), "time" if self.unsteady else "iteration"
        return f"{count} {kind}" if count == 1 else f"{count} {kind}s"

    @property
    def steps(self) -> Array:
        """(n,) times, or numbers of iterations."""
        return np.array([e.time if self.unsteady else e.number for e in self.entries], float)

    def values(self, surface: str, label: str, what: str = "imbalance") -> Array:
        """(n,) of one attribute of one row, NaN where there is no number.

        ``values("box", "momentum-x", "sampling_band")``; SetupError for a surface or row that is not there.
        """
        rows = [entry.result[surface][label] for entry in self.entries]
        return np.array([np.nan if getattr(r, what) is None else getattr(r, what) for r in rows], float)

    def force_values(self, body: str, route: str, name: str) -> tuple[Array, Array]:
        """(n,) drag, lift or moment of a body by a route, and its sampling band; NaN where there is none."""
        values = np.full((2, len(self.entries)), np.nan)
        for k, found in enumerate(self.forces):
            for estimate in found.estimates:
                if (estimate.body, estimate.label) == (body, route) and getattr(estimate, name) is not None:
                    half = estimate.band(name)
                    values[:, k] = getattr(estimate, name), half if np.isfinite(half) else np.nan
        return values[0], values[1]

    def routes_of(self, body: str) -> tuple[str, ...]:
        """Labels of the routes that tell a force on a body at some snapshot."""
        all_of = (e for found in self.forces for e in found.estimates)
        return tuple(dict.fromkeys(e.label for e in all_of if e.body == body and not e.refused))

    @property
    def bodies(self) -> tuple[str, ...]:
        """Those whose forces are told."""
        return tuple(dict.fromkeys(e.body for found in self.forces for e in found.estimates))

    def trend(self, surface: str, name: str) -> Trend:
        """One trend, such as ``trend("box", "mass imbalance")``; SetupError where there is none."""
        for trend in self.trends:
            if (trend.surface, trend.name) == (surface, name):
                return trend
        have = ", ".join(f"{t.surface}: {t.name}" for t in self.trends)
        raise SetupError(f"there is no trend {name!r} of {surface!r}", mend=f"Trends: {have}.")

    def to_dict(self) -> dict[str, Any]:
        """The result file: the last snapshot, and all of them under ``history``."""
        last = self.entries[-1].result
        return {
            "schema": SCHEMA,
            "version": __version__,
            "case": last.case,
            "verdict": self.verdict,
            "surfaces": last.to_dict()["surfaces"],
            "history": [
                {
                    "file": entry.file,
                    "step": entry.step,
                    "time": entry.time,
                    "number": entry.number,
                    "verdict": entry.result.verdict,
                    "surfaces": [ledger_dict(ledger) for ledger in entry.result.ledgers],
                    "forces": [asdict(e) for found in self.forces[k : k + 1] for e in found.estimates],
                }
                for k, entry in enumerate(self.entries)
            ],
            "forces": [asdict(e) for found in self.forces[-1:] for e in found.estimates],
            "unsteady": self.unsteady,
            "settled": self.settled,
            "trends": [asdict(trend) for trend in self.trends],
            "totals": {name: [asdict(total) for total in rows] for name, rows in self.totals.items()},
            "ended": self.ended,
            "hints": [asdict(hint) for hint in self.hints],
        }

    def to_csv(self) -> str:
        """One line per snapshot and row, with all of its numbers, for a spreadsheet.

        Forces follow, with the body in place of the surface and the route in place of the law.
        """
        import csv
        import io

        out = io.StringIO()
        writer = csv.writer(out, lineterminator="\n")
        names = [
            *("flux", "boundary", "storage", "source", "imbalance", "scale", "imbalance_percent"),
            *(
                "sampling_band",
                "resolution_band",
                "rounding_band",
                "time_band",
                "tolerance_percent",
                "verdict",
            ),
        ]
        writer.writerow(
            ["file", "step", "number", "time", "surface", "law", "component", "unit", *names, "force"]
        )
        for entry in self.entries:
            for ledger in entry.result.ledgers:
                for row in ledger.rows:
                    place = [entry.file, entry.step, entry.number, entry.time, ledger.name]
                    numbers = [getattr(row, name) for name in names]
                    writer.writerow([*place, row.law, row.component, row.unit, *numbers, None])
        for entry, found in zip(self.entries, self.forces):
            for estimate in found.estimates:
                for name in NUMBERS:
                    place = [entry.file, entry.step, entry.number, entry.time, estimate.body]
                    bands = {f"{kind}_band": half for kind, half in estimate.bands.get(name, {}).items()}
                    numbers = [bands.get(column) for column in names]
                    unit, force = found.unit_of(name), getattr(estimate, name)
                    writer.writerow([*place, estimate.label, name, unit, *numbers, force])
        return out.getvalue()

    def _repr_html_(self) -> str:
        head = html_line(self.counted, "settled" if self.settled else "not settled")
        titles = ("surface", "quantity", "unit", "level", "drift", "mean", "±95 %", "amplitude", "period", "")
        rows = [
            (
                *(t.surface, t.name, t.unit, t.level, t.drift, t.mean, t.mean_band, t.amplitude, t.period),
                "settled" if t.settled else "not settled",
            )
            for t in self.trends
        ]
        trends = html_table(titles, rows, "over the steps") if rows else ""
        return head + trends + html_line("the last") + self.entries[-1].result._repr_html_()
