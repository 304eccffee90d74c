"""Does the set-up look right? Remarks on settings that the data speak against; they change no number."""

from __future__ import annotations

import shlex
from collections.abc import Callable, Sequence

import numpy as np

from fvcheck.flow import Flow
from fvcheck.hints import Hint
from fvcheck.laws import MissingData, State, find_law
from fvcheck.ledger import Row
from fvcheck.sampling.sampled import Sampled
from fvcheck.volume import BEST, SampledVolume
from fvcheck.walls import wall_velocity

Array = np.ndarray

# At most so many data are looked at.
_SAMPLE = 20_000

# Mean relative misfit between fields that p = ρRT and the like tie together.
_MISFIT = 3e-3

# Relative spread of a density that should be one number.
_SPREAD = 1e-2

# Net throughflow of a wall over that of the typical speed. Cell values beside a
# wall are not those at it: a stream that meets a body moves in its first cells.
_THROUGH = {"point": 0.01, "cell": 0.1}

# Speed on a patch against that of the field, below which the patch may be a no-slip wall. Cell
# values are carried to the boundary by a fit, which leaves a few percent on coarse meshes.
STILL = {"point": 0.02, "cell": 0.1}

# Imbalances beyond so many resolution bands call for an explanation.
_OPEN = 3.0

# A changed setting explains an imbalance when it leaves no more than this share of it.
_EXPLAINED = 0.1

# Change between two stored states, and change per time against that of the flow's passage.
_CHANGE = 1e-2


def field_hints(flow: Flow) -> list[Hint]:
    """What fields say: a gas that breaks its law, a density that varies, leaking walls, a change in time."""
    return [*_gas_hints(flow), *_density_hints(flow), *_wall_hints(flow), *change_hints(flow)]


def _gas_hints(flow: Flow) -> list[Hint]:
    """Misfits between fields of a gas of which fewer would do."""
    fluid, there = flow.fluid, flow.fields
    if not fluid.ideal_gas:
        return []
    out = []
    checks: list[tuple[str, set[str], str, Callable[[State], Array]]] = [
        ("density", {"pressure", "temperature"}, "p/(RT)", lambda s: s.density),
        ("total_energy", {"pressure"}, "p/(gamma-1) + rho u2/2", lambda s: s.total_energy),
    ]
    if {"velocity", "momentum", "density"} <= set(there):
        both = {"velocity", "density"}
        checks.append(("momentum", both, "rho u", lambda s: s.density[:, None] * s.velocity))
    for role, needed, formula, found in checks:
        if role not in there or not needed <= set(there):
            continue
        state = _data_state(flow, leave_out=role)
        try:
            values = found(state)
        except (MissingData, KeyError):
            continue
        told = _picked(flow, role)
        if told.shape != values.shape:
            continue
        size = np.median(np.abs(told[np.isfinite(told)])) if np.isfinite(told).any() else 0.0
        apart = np.abs(values - told)
        apart = apart[np.isfinite(apart)]
        if size > 0 and len(apart) and apart.mean() > _MISFIT * size:
            out.append(
                Hint(
                    "gas-law-misfit",
                    f"{role} = {there[role].name!r} and {formula} of the other fields differ by "
                    f"{100 * apart.mean() / size:.3g} % (mean; at most "
                    f"{100 * apart.max() / size:.3g} %): look at --gas-constant, --gamma and the units",
                )
            )
    return out


def _picked(flow: Flow, role: str) -> Array:
    values = np.asarray(flow.fields[role].values, float)
    return values[:: max(1, len(values) // _SAMPLE)]


def _data_state(flow: Flow, leave_out: str) -> State:
    """The state at the data themselves; fields at another location than the one left out are not in it."""
    location = flow.fields[leave_out].location
    fields = {}
    for role, field in flow.fields.items():
        if role != leave_out and field.location == location:
            values = _picked(flow, role)
            fields[role] = Sampled(values, np.zeros((*values.shape, 2)))
    count = len(_picked(flow, leave_out))
    return State(flow.fluid, fields, np.zeros((count, 2)), axis=flow.case.axis)


def _density_hints(flow: Flow) -> list[Hint]:
    field = flow.fields.get("density")
    if field is None or flow.fluid.ideal_gas:
        return []
    values = field.values[np.isfinite(field.values)]
    if len(values) == 0:
        return []
    low, high = float(values.min()), float(values.max())
    if high - low <= _SPREAD * abs(0.5 * (low + high)):
        return []
    return [
        Hint(
            "density-not-constant",
            f"the density {field.name!r} runs from {low:.5g} to {high:.5g}, but the fluid is not told to be "
            "a gas: what compression does is not balanced",
        )
    ]


def _wall_hints(flow: Flow) -> list[Hint]:
    """Patches called wall, by the user or by name, that the flow passes."""
    field = flow.fields.get("velocity")
    if field is None:
        return []
    boundary, mesh = flow.mesh.boundary, flow.mesh
    u = np.asarray(field.values[:, :2], float)
    typical = float(np.sqrt(np.nanmean(np.sum(u**2, axis=1)))) if len(u) else 0.0
    out = []
    for number, name in enumerate(boundary.names):
        if name not in flow.walls and "wall" not in name.lower():
            continue
        here = boundary.patch == number
        edges = boundary.edges[here]
        step = mesh.points[edges[:, 1]] - mesh.points[edges[:, 0]]
        normal = np.column_stack([step[:, 1], -step[:, 0]])
        beside = u[boundary.cells[here]] if field.location == "cell" else u[edges].mean(axis=1)
        middles = mesh.points[edges].mean(axis=1)
        moving = wall_velocity(flow.walls.get(name, (0.0, 0.0)), middles, flow.case.axis)[:, :2]
        through = float(np.nansum((beside - moving) * normal))
        share = abs(through) / (typical * float(np.hypot(*step.T).sum())) if typical > 0 else 0.0
        if share > _THROUGH[field.location]:
            out.append(
                Hint(
                    "wall-with-throughflow",
                    f"{name!r} is called a wall, but {100 * share:.3g} % of the typical speed passes it",
                )
            )
    return out


def still_hints(volume: SampledVolume) -> list[Hint]:
    """Enclosed patches that cell data bring to rest, but that are not told to be walls."""
    flow = volume.flow
    field = flow.fields.get("velocity")
    state = volume.line_state(BEST)
    if field is None or field.location != "cell" or field.rim is not None or state.viscosity is None:
        return []
    if field.rows is not None:
        return []  # the first snapshot has said it
    speed = np.hypot(*state.velocity[:, :2].T)
    u = np.asarray(field.values[:, :2], float)
    typical = float(np.sqrt(np.nanmean(np.sum(u**2, axis=1)))) if len(u) else 0.0
    weight = np.hypot(*volume.normals.T)
    names = flow.mesh.boundary.names
    out = []
    for k in np.unique(volume.patch[~volume.drawn]).tolist():
        here = (volume.patch == k) & ~volume.drawn & (weight > 0.0)
        if not here.any():
            continue  # on the axis
        size = float(np.sqrt(np.average(speed[here] ** 2, weights=weight[here])))
        if names[k] not in flow.walls and size < STILL["cell"] * typical:
            share = 100 * size / typical
            message = f"on {names[k]} the speed is {share:.2g} % of the field's; if a no-slip wall: --wall "
            out.append(Hint("looks-like-wall", message + shlex.quote(names[k])))
    return out


def force_hints(volume: SampledVolume, rows: Sequence[Row]) -> list[Hint]:
    """Whether a momentum balance that is open would close with another meaning of pressure or viscosity."""
    momentum = [row for row in rows if row.law == "momentum"]
    fluid = volume.flow.fluid
    if not volume.overlay.closed or len(momentum) != 2 or fluid.ideal_gas:
        return []
    # Around an axis pressure acts across it in more ways than through the border.
    which = slice(None) if volume.axis is None else slice(volume.axis, volume.axis + 1)
    open_by = np.array([row.imbalance or 0.0 for row in momentum])[which]
    band = np.array([row.resolution_band for row in momentum])[which]
    if not np.any(np.abs(open_by) > _OPEN * band):
        return []
    band = np.maximum(band, 1e-3 * np.abs(open_by).max())
    terms = volume.contributions(find_law("momentum"), BEST)
    rho = float(np.mean(volume.line_state(BEST).density))
    pressure = terms.parts["pressure"].sum(axis=0)[which]
    viscous = terms.parts["viscous"].sum(axis=0)[which] if "viscous" in terms.parts else 0.0 * open_by
    only_weight = not fluid.frame_rate and "body_force" not in volume.flow.fields
    weight = terms.source.sum(axis=0)[which] if only_weight and terms.source is not None else 0.0 * open_by
    told = fluid.pressure_kind
    causes = [
        ("kinematic-pressure", told == "static", (rho - 1.0) * pressure, "the pressure is kinematic, p/rho"),
        (
            "kinematic-pressure",
            told == "kinematic",
            (1.0 / rho - 1.0) * pressure,
            "the pressure is static, not p/rho",
        ),
        ("reduced-pressure-likely", told == "static", weight, "the pressure lacks the weight of the fluid"),
        ("reduced-pressure-likely", told == "reduced", -weight, "the pressure holds the weight of the fluid"),
        ("viscosity-off-by-density", True, (rho - 1.0) * viscous, "the viscosity is kinematic, mu/rho"),
        (
            "viscosity-off-by-density",
            True,
            (1.0 / rho - 1.0) * viscous,
            "the viscosity was divided by rho once",
        ),
    ]
    left = [
        float(np.linalg.norm((open_by + change) / band)) if may else np.inf for _, may, change, _ in causes
    ]
    best = int(np.argmin(left))
    before = float(np.linalg.norm(open_by / band))
    if left[best] > _EXPLAINED * before:
        return []
    code, _, _, text = causes[best]
    share = 100.0 * (1.0 - left[best] / before)
    where = volume.surface.name or volume.surface.kind
    return [Hint(code, f"{where}: {share:.3g} % of the imbalance of momentum would vanish if {text}")]


def change_hints(flow: Flow) -> list[Hint]:
    """Whether the state stored next to this one differs, so that a steady balance misses what is stored."""
    if flow.has_rates or flow.change is None:
        return []
    other, share = flow.change
    if share <= _CHANGE:
        return []
    role = "velocity" if "velocity" in flow.fields else "momentum"
    beside = f"step {other.step}" if other.file == flow.case.file else other.file
    return [
        Hint(
            "not-steady",
            f"the {role} differs from that of {beside} by {100 * share:.3g} % (rms), "
            "but no rates of change are known: what the volume stores is left out",
        )
    ]
