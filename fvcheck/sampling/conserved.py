"""Cell averages of a gas: what a finite-volume run really averages.

Such a run carries averages of density, momentum and energy over each cell and
derives velocity and pressure from them when it exports. ⟨ρu⟩/⟨ρ⟩ is not the
average of u: reading it so costs an error of second order that no band sees.
The averages are therefore put back before anything is fitted to them.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from fvcheck.fields import Field
from fvcheck.flow import Flow

Array = np.ndarray

_STEP = 1e-30
_PRIMITIVE = ("density", "velocity", "pressure")


def with_conserved_averages(flow: Flow) -> Flow:
    """The flow with conserved averages in place of velocity and pressure, where they apply: a gas in cells.

    Rates of change follow by a complex step. Boundary values of the velocity do
    not carry over; only a wall at rest says something of the momentum.
    """
    fluid, fields = flow.fluid, dict(flow.fields)
    given = {role: fields[role] for role in _PRIMITIVE if role in fields}
    applies = fluid.ideal_gas and fluid.gamma and fluid.pressure_kind == "static"
    in_cells = len(given) == len(_PRIMITIVE) and all(field.location == "cell" for field in given.values())
    if not (applies and in_cells and flow.case.cell_values == "average"):
        return flow
    gamma = float(fluid.gamma or 0.0)
    values = {role: np.asarray(field.values, float) for role, field in given.items()}
    rates = {role: fields.pop(f"rate:{role}").values for role in given if f"rate:{role}" in fields}
    made = _conserved(values, gamma)
    if rates:
        moved = {role: value + 1j * _STEP * rates.get(role, 0.0) for role, value in values.items()}
        turned = _conserved(moved, gamma) | {"density": moved["density"]}
        made |= {f"rate:{role}": value.imag / _STEP for role, value in turned.items()}
    for role, value in made.items():
        if role not in fields:
            rows = given["velocity"].rows
            fields[role] = Field(name=f"conserved {role}", location="cell", values=value, rows=rows)
    del fields["velocity"], fields["pressure"]
    if fluid.gas_constant:
        fields.pop("temperature", None)
    return replace(flow, fields=fields)


def _conserved(values: Mapping[str, Array], gamma: float) -> dict[str, Array]:
    rho, u = values["density"], values["velocity"]
    energy = values["pressure"] / (gamma - 1.0) + 0.5 * rho * np.sum(u * u, axis=1)
    return {"momentum": rho[:, None] * u, "total_energy": energy}
