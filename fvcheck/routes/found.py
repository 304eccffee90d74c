"""What is found of the forces on bodies."""

from __future__ import annotations

from dataclasses import asdict, dataclass, field
from typing import Any

from fvcheck.errors import SetupError
from fvcheck.hints import Hint
from fvcheck.ledger import SCHEMA
from fvcheck.notebook import html_hints, html_table
from fvcheck.routes.estimate import Estimate
from fvcheck.routes.sweep import Sweep
from fvcheck.version import __version__

NUMBERS = ("drag", "lift", "moment")


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

    @property
    def unit(self) -> str:
        """Of forces: of a whole body where the depth is known or the run is axisymmetric, else per metre."""
        whole = self.case["depth"] is not None or self.case["axis"] is not None
        return "N" if whole else "N/m"

    def unit_of(self, number: str) -> str:
        """Of one of `NUMBERS`."""
        return self.unit.replace("N", "N m", 1) if number == "moment" else self.unit

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
