"""The ledger: what crosses a control surface, what is left over, how sure that is."""

from __future__ import annotations

from dataclasses import asdict, dataclass
from typing import Any

from fvcheck.errors import SetupError
from fvcheck.flow import Case, Flow
from fvcheck.hints import Hint
from fvcheck.notebook import html_hints, html_line, html_table
from fvcheck.verdict import worst
from fvcheck.version import __version__

SCHEMA = "fvcheck-result/1"


@dataclass(frozen=True)
class Row:
    """One law, one component, one control surface. Outward positive; None where there is no such number.

    parts : of the drawn pieces by mechanism; they add up to ``flux``
    inflow, outflow : magnitudes over the drawn pieces
    boundary : net over the enclosed domain boundary; ``patches`` splits it
    imbalance : storage + flux + boundary − source
    scale : half the summed |flux| around the volume
    datum : level of pressure, temperature, … that fluxes are counted from, where one is
    linear_imbalance : what plain linear interpolation would have given
    inequality : the imbalance is a production; only one below zero can be open
    time_band : part of the sampling band that comes from the steps in time
    """

    law: str
    component: str | None
    unit: str
    parts: dict[str, float]
    inflow: float
    outflow: float
    flux: float
    boundary: float | None
    patches: dict[str, float]
    storage: float | None
    source: float | None
    imbalance: float | None
    scale: float | None
    imbalance_percent: float | None
    sampling_band: float
    resolution_band: float
    rounding_band: float
    linear_imbalance: float | None
    tolerance_percent: float | None
    verdict: str | None
    datum: float | None = None
    inequality: bool = False
    time_band: float = 0.0

    @property
    def label(self) -> str:
        """Law and component in one word."""
        return self.law if self.component is None else f"{self.law}-{self.component}"

    def percent(self, value: float | None) -> float | None:
        """A number in the law's unit in percent of the scale; None where there is none."""
        return None if value is None or not self.scale else 100.0 * value / self.scale


@dataclass(frozen=True)
class Port:
    """A stretch of surface that flow passes: an inlet or outlet patch, or an open line.

    area [m² or m per metre of depth], mass_flow [kg/s] outward positive,
    mean_velocity [m/s] through it, total_pressure [Pa] and temperature [K]
    weighted by mass flow, momentum_factor β = ⟨u²⟩/⟨u⟩² and
    kinetic_energy_factor α = ⟨u³⟩/⟨u⟩³ of the velocity through it.
    """

    patch: str | None
    piece: str | None
    area: float
    mass_flow: float | None
    mean_velocity: float | None
    total_pressure: float | None
    temperature: float | None
    momentum_factor: float | None
    kinetic_energy_factor: float | None


@dataclass(frozen=True)
class Ledger:
    """All rows of one control surface.

    length, area : of the border of the volume, enclosed domain boundary included, and of the volume
    degrees : degree of the sampling polynomials -> share of the length it was used on
    """

    name: str
    kind: str
    closed: bool
    length: float
    area: float | None
    degrees: dict[str, float]
    rows: tuple[Row, ...]
    ports: tuple[Port, ...]
    hints: tuple[Hint, ...] = ()

    def __getitem__(self, key: str | tuple[str, str]) -> Row:
        """``ledger["mass"]``, ``ledger["momentum", "x"]`` or ``ledger["momentum-x"]``."""
        label = key if isinstance(key, str) else "-".join(key)
        for row in self.rows:
            if row.label == label:
                return row
        have = ", ".join(row.label for row in self.rows) or "none"
        raise SetupError(f"the ledger of {self.name!r} has no row {label!r}", mend=f"Rows: {have}.")

    @property
    def verdict(self) -> str | None:
        """The worst of the rows."""
        return worst(row.verdict for row in self.rows)

    def _repr_html_(self) -> str:
        titles = (
            *("law", "unit", "in", "out", "net flux", "boundary", "storage", "source", "imbalance"),
            *("imbalance %", "±data %", "±mesh %", "limit %", "verdict"),
        )
        rows = [
            (
                *(r.label, r.unit, r.inflow, r.outflow, r.flux, r.boundary, r.storage, r.source, r.imbalance),
                *(r.imbalance_percent, r.percent(r.sampling_band), r.percent(r.resolution_band)),
                *(r.tolerance_percent, r.verdict or ""),
            )
            for r in self.rows
        ]
        return html_table(titles, rows, f"{self.name} ({self.kind})")


@dataclass(frozen=True)
class Result:
    """What one call of the tool found: the ledgers of several control surfaces of one flow."""

    case: dict[str, Any]
    ledgers: tuple[Ledger, ...]
    hints: tuple[Hint, ...] = ()

    def __getitem__(self, name: str) -> Ledger:
        """The ledger of a control surface by its name."""
        for ledger in self.ledgers:
            if ledger.name == name:
                return ledger
        have = ", ".join(ledger.name for ledger in self.ledgers)
        raise SetupError(f"there is no ledger {name!r}", mend=f"Ledgers: {have}.")

    @property
    def verdict(self) -> str | None:
        """The worst of all ledgers."""
        return worst(ledger.verdict for ledger in self.ledgers)

    def to_dict(self) -> dict[str, Any]:
        """The result file: plain types, strict JSON."""
        return {
            "schema": SCHEMA,
            "version": __version__,
            "case": self.case,
            "verdict": self.verdict,
            "surfaces": [ledger_dict(ledger) for ledger in self.ledgers],
            "hints": [asdict(hint) for hint in self.hints],
        }

    def _repr_html_(self) -> str:
        head = html_line(self.case.get("file", ""), f"verdict: {self.verdict or 'none'}")
        return head + "".join(ledger._repr_html_() for ledger in self.ledgers) + html_hints(self.hints)


def ledger_dict(ledger: Ledger) -> dict[str, Any]:
    """One entry of ``surfaces`` in the result file."""
    return {
        "name": ledger.name,
        "kind": ledger.kind,
        "closed": ledger.closed,
        "length": ledger.length,
        "area": ledger.area,
        "degrees": ledger.degrees,
        "laws": [asdict(row) for row in ledger.rows],
        "ports": [asdict(port) for port in ledger.ports],
    }


def case_dict(flow: Flow) -> dict[str, Any]:
    """The ``case`` entry of the result file."""
    case: Case = flow.case
    return {
        "file": case.file,
        "format": case.format,
        "step": case.step,
        "time": case.time,
        "cells": flow.mesh.n_cells + flow.mesh.left_out,
        "points": flow.mesh.n_points + flow.mesh.points_left_out,
        "location": flow.location,
        "plane": case.plane,
        "symmetry": case.symmetry,
        "axis": None if case.axis is None else "xy"[case.axis],
        "depth": case.depth,
        "fields": {role: field.name for role, field in flow.fields.items()},
        "patches": list(flow.mesh.boundary.names),
        "bodies": list(flow.mesh.bodies),
    }
