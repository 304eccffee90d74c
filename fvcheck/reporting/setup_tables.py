"""The set-up as it was understood."""

from __future__ import annotations

import re
from dataclasses import fields

import numpy as np

from fvcheck.fluid import Fluid
from fvcheck.laws import Law
from fvcheck.reporting.gathering import Gathered
from fvcheck.reporting.tables import Cell, Table, number, table, word
from fvcheck.surfaces import ControlSurface
from fvcheck.text.numbers import short
from fvcheck.walls import motion_text

_UNITS = {
    "density": "kg/m³",
    "viscosity": "Pa s",
    "conductivity": "W/(m K)",
    "specific_heat": "J/(kg K)",
    "gas_constant": "J/(kg K)",
    "expansion": "1/K",
    "reference_temperature": "K",
    "frame_rate": "rad/s",
    "gravity": "m/s²",
}


def setup_tables(found: Gathered) -> list[Table]:
    """Case, fluid, fields, patches, surfaces, and what was told beside."""
    out = [_case(found), _fluid(found), _fields(found), _patches(found), _surfaces(found)]
    asked = found.question
    told = [
        [word("tolerance"), word(law), number(value), word("%")] for law, value in asked.tolerance.items()
    ]
    told += [
        [word("scale"), word(law), number(value), word(_unit(found.laws, law))]
        for law, value in asked.scale.items()
    ]
    told += [
        [word(f"source in {spelled(s.shape)}"), word(s.law), _rate(s.rate), word(_unit(found.laws, s.law))]
        for s in asked.sources
    ]
    if told:
        out.append(table("Told beside", ("what", "law", "value", "unit"), told))
    return out


def spelled(surface: ControlSurface) -> str:
    """The spelling of a surface without its name, long decimals cut."""
    text = surface.text.removeprefix(f"{surface.name}=")
    return re.sub(r"-?\d+\.\d{8,}(?:e[-+]?\d+)?", lambda found: f"{float(found[0]):.8g}", text)


def _rate(rate: object) -> Cell:
    return number(rate) if isinstance(rate, int | float) else word(rate)


def _unit(laws: tuple[Law, ...], name: str) -> str:
    return next((law.unit for law in laws if law.name == name), "")


def _case(found: Gathered) -> Table:
    case, flow = found.flow.case, found.flow
    x0, y0, x1, y1 = flow.mesh.bounds
    rows = [
        ("file", case.file),
        ("format", case.format),
        ("state", f"{case.step} of 0 to {case.steps - 1}"),
        ("time", "not in the file" if case.time is None else short(case.time, 7)),
        ("cells, points", f"{flow.mesh.n_cells}, {flow.mesh.n_points}"),
        ("extent", f"x {short(x0)} to {short(x1)}, y {short(y0)} to {short(y1)} m"),
        ("plane", case.plane),
        ("symmetry", case.symmetry + ("" if case.axis is None else f", axis {'xy'[case.axis]}")),
        ("results", "per metre of depth" if case.per_metre
         else "for the whole turn" if case.axis is not None else f"for a depth of {short(case.depth)} m"),
        ("a cell value is", "its average" if case.cell_values == "average" else "that at its centroid"),
        ("angular momentum about", f"({short(found.question.about[0])}, {short(found.question.about[1])})"),
    ]  # fmt: skip
    return table("Case", ("what", "as understood"), [[word(a), word(b)] for a, b in rows])


def _fluid(found: Gathered) -> Table:
    fluid, plain_fluid = found.flow.fluid, Fluid()
    rows = [[word("model"), word("ideal gas" if fluid.ideal_gas else "constant density")]]
    for item in fields(Fluid):
        value = getattr(fluid, item.name)
        if item.name == "model" or value is None or value == getattr(plain_fluid, item.name):
            continue
        text = value if not isinstance(value, dict) else ", ".join(f"{k} = {v:g}" for k, v in value.items())
        if isinstance(value, float):
            text = f"{value:.6g} {_UNITS.get(item.name, '')}".rstrip()
        rows.append([word(item.name.replace("_", " ")), word(text)])
    rows.append([word("pressure is"), word(fluid.pressure_kind)])
    return table("Fluid", ("property", "value"), rows)


def _fields(found: Gathered) -> Table:
    rows = []
    for role, field in found.flow.fields.items():
        values = np.asarray(field.values, float)
        size = np.linalg.norm(values, axis=1) if values.ndim == 2 else values
        size = size[np.isfinite(size)]
        low, high = (float(size.min()), float(size.max())) if len(size) else (None, None)
        rows.append([word(role), word(field.name), word(f"{field.location}s"), number(low), number(high)])
    return table("Fields (vectors: magnitude)", ("role", "array", "at", "least", "most"), rows)


def _patches(found: Gathered) -> Table:
    mesh, walls = found.flow.mesh, found.flow.walls
    rows = []
    for k, name in enumerate(mesh.boundary.names):
        ends = mesh.points[mesh.boundary.edges[mesh.boundary.patch == k]]
        length = float(np.hypot(*(ends[:, 1] - ends[:, 0]).T).sum()) if len(ends) else 0.0
        wall = "no"
        if name in walls:
            moves = motion_text(walls[name])
            wall = f"moves, {moves}" if moves else "at rest"
        kind = mesh.kinds.get(name, "") + (" body" if name in mesh.bodies else "")
        rows.append(
            [word(name), number(len(ends), str(len(ends))), number(length), word(wall), word(kind.strip())]
        )
    return table("Patches", ("patch", "edges", "length [m]", "no-slip wall", "kind"), rows)


def _surfaces(found: Gathered) -> Table:
    rows = []
    for ledger, volume in zip(found.result.ledgers, found.volumes):
        text = spelled(volume.surface)
        rows.append(
            [
                word(ledger.name), word(text if len(text) < 160 else text[:157] + "…"), number(ledger.length),
                number(ledger.area),
                word(", ".join(f"{d}: {100 * share:.3g} %" for d, share in ledger.degrees.items() if share)),
            ]
        )  # fmt: skip
    titles = ("surface", "as drawn", "length [m]", "area [m²]", "degree: share of length")
    return table("Control surfaces", titles, rows)
