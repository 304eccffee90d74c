"""Right flows set up wrongly on purpose, sources planted in them, and runs that are not done."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace
from pathlib import Path

import exact
import numpy as np
import trial_meshes as tm
from exact import ExactFlow
from exact_data import flow_data, mesh_for

import fvcheck
from fvcheck import Flow, Fluid
from fvcheck.fields import Field

Array = np.ndarray

ROOT = Path(__file__).resolve().parent.parent
NAMES = {"velocity": "U", "pressure": "p", "temperature": "T", "density": "rho"}


@dataclass(frozen=True, eq=False)
class Trial:
    """One flow with one mis-setting.

    causes : names of causes that are right, with their coefficients, None for any
    """

    kind: str
    subject: str
    flow: Flow
    law: str
    causes: dict[str, float | None]
    previous: Flow | None = None


def exact_flow(
    flow: ExactFlow,
    cells: int,
    where: str,
    density: float = 1.0,
    seed: int = 1,
    kind: str = "triangles",
    **settings,
) -> Flow:
    """An exact field on a mesh of about so many cells, in a fluid ``density`` times as dense."""
    x0, y0, x1, y1 = flow.domain
    h = float(np.sqrt((x1 - x0) * (y1 - y0) / cells))
    mesh = mesh_for(flow, kind, h, seed)
    data = dict(flow_data(flow, mesh, where))
    fluid = dict(flow.fluid)
    if flow.rho is None:
        data["pressure"] = data["pressure"] * density
        for name in ("density", "viscosity"):
            fluid[name] = fluid.get(name, 0.0) * density
        if "conductivity" in fluid:
            fluid["conductivity"] *= density
    location = "point_data" if where == "point" else "cell_data"
    arrays = {NAMES[role]: values for role, values in data.items()}
    return Flow.from_arrays(
        mesh.points, (mesh.offsets, mesh.nodes), **{location: arrays}, fluid=Fluid(**fluid), **settings
    )


def places(flow: Flow, role: str = "velocity") -> Array:
    """(n, 2) where the data of a role are."""
    if flow.fields[role].location == "point":
        return flow.mesh.points
    cells = tm.Cells(flow.mesh.points, flow.mesh.offsets, flow.mesh.nodes)
    return cells.centroids


def field_of(flow: Flow, function: Callable[[Array, Array], Array]) -> Array:
    """Values of a function at the data: at points, or averages over cells."""
    if flow.fields["velocity"].location == "point":
        return function(*flow.mesh.points.T)
    cells = tm.Cells(flow.mesh.points, flow.mesh.offsets, flow.mesh.nodes)
    return tm.cell_averages(function, cells, 11, None)


def scaled(flow: Flow, role: str, factor: float) -> Flow:
    old = flow.fields[role]
    rim = None if old.rim is None else old.rim * factor
    return replace(flow, fields={**flow.fields, role: replace(old, values=old.values * factor, rim=rim)})


def added(flow: Flow, role: str, values: Array) -> Flow:
    """A field added to, or made."""
    old = flow.fields.get(role)
    if old is not None:
        new = replace(old, values=old.values + values)
    else:
        new = Field(role, flow.fields["velocity"].location, values)
    return replace(flow, fields={**flow.fields, role: new})


def told(flow: Flow, **changes) -> Flow:
    return replace(flow, fluid=replace(flow.fluid, **changes))


def cavity(rayleigh: str) -> Flow:
    """Natural convection by an independent solver (tests/data/cavity.json)."""
    info = json.loads((ROOT / "tests/data/cavity.json").read_text())
    fluid = Fluid(**info[rayleigh]["fluid"])
    return fvcheck.open_flow(ROOT / f"tests/data/cavity_{rayleigh}.vtu", fluid=fluid)


def cylinder() -> Flow:
    """The channel-cylinder benchmark at Re 20 by an independent solver."""
    fluid = Fluid(density=1.0, viscosity=1e-3)
    return fvcheck.open_flow(ROOT / "tests/data/cylinder_re20.vtu", fluid=fluid)


def demo(name: str = "coarse") -> Flow:
    """The bundled finite-volume run, or one of its iterations ("coarse-0020")."""
    fluid = Fluid(density=1.2, viscosity=1.8e-5, specific_heat=1005.0, conductivity=0.026)
    walls = ["patch-3", "patch-4"]
    return fvcheck.open_flow(ROOT / f"meshes/demo-{name}.vtu", fluid=fluid, walls=walls)


def right_flows(cells: int = 2500) -> Iterator[tuple[str, Flow]]:
    """Flows that are set up right."""
    for flow in (exact.kovasznay(), exact.jeffery_hamel(), exact.hiemenz()):
        for where in ("point", "average"):
            yield f"{flow.name}/{where}", exact_flow(flow, cells, where, 2.5)
    for rayleigh in ("1e4", "1e5"):
        yield f"cavity-{rayleigh}", cavity(rayleigh)
    yield "cylinder-re20", cylinder()
    for size in ("coarse", "fine"):
        yield f"demo-{size}", demo(size)


def momentum_trials(subject: str, flow: Flow, factors: tuple[float, ...]) -> Iterator[Trial]:
    """Every kind that makes sense for a momentum balance of constant density."""

    def trial(kind: str, wrong: Flow, value: float, *causes: str) -> Trial:
        return Trial(kind, subject, wrong, "momentum", dict.fromkeys(causes, value))

    rho = float(flow.fluid.density)
    mu = float(flow.fluid.viscosity)
    still = not flow.fluid.expansion
    scale_u = float(np.sqrt(np.mean(np.sum(np.asarray(flow.fields["velocity"].values, float) ** 2, axis=1))))
    width = flow.mesh.bounds[2] - flow.mesh.bounds[0]
    force = rho * scale_u**2 / width
    for f in factors:
        yield trial("pressure factor", scaled(flow, "pressure", 1.0 / f), f, "pressure-factor")
        yield trial("viscosity factor", told(flow, viscosity=mu / f), f, "viscosity-factor")
        if still:
            yield trial("density factor", told(flow, density=rho / f), f, "density-factor")
            yield trial("velocity unit", scaled(flow, "velocity", 1.0 / f), f, "velocity-factor")
    if still and rho != 1.0:
        yield trial("kinematic pressure", scaled(flow, "pressure", 1.0 / rho), rho, "pressure-factor")
        yield trial("kinematic viscosity", told(flow, viscosity=mu / rho), rho, "viscosity-factor")
    where = flow.fields["velocity"].location
    p_at = flow.fields["pressure"].location
    xp = places(flow, "pressure")
    for share in (0.3, 3.0):
        fx = share * force
        wrong = added(flow, "pressure", fx * xp[:, 0])
        yield trial("uniform force left out", wrong, fx, "uniform-force-x", "uniform-force")
    if still:
        g = (0.0, -2.0 * force / rho)
        yield trial("weight left out of the pressure", told(flow, gravity=g), 1.0, "hydrostatic-pressure")
        warm = 300.0 + 10.0 * field_of(flow, lambda a, b: np.sin(2.0 * a / width) * np.cos(3.0 * b / width))
        beta = 0.3 * force / (rho * 9.81 * 5.0)
        hot = told(
            added(flow, "temperature", warm),
            gravity=(0.0, -9.81),
            pressure_kind="reduced",
            expansion=beta,
            reference_temperature=300.0,
        )
        yield trial("buoyancy told that is not", hot, -rho * 9.81 * beta, "buoyancy-y")
    else:
        b = float(flow.fluid.expansion * rho * -flow.fluid.gravity[1])
        wrong = told(flow, expansion=None, reference_temperature=None)
        yield trial("buoyancy left out", wrong, b, "buoyancy-y")
        weak = told(flow, expansion=flow.fluid.expansion / 3.0)
        yield trial("buoyancy too weak", weak, b * 2 / 3, "buoyancy-y")
    if where == p_at:
        u = np.asarray(flow.fields["velocity"].values, float)
        # |u|u of cell averages is not the average of |u|u.
        powers = {"resistance": 1} | ({"resistance-quadratic": 2} if where == "point" else {})
        for name, power in powers.items():
            k = 0.5 * force / scale_u**power
            size = np.linalg.norm(u[:, :2], axis=1, keepdims=True) ** (power - 1)
            told_force = np.zeros((len(u), 3))
            told_force[:, :2] = k * size * u[:, :2]
            yield trial(name, added(flow, "body_force", told_force), k, name)


def frame_trials(flow: ExactFlow, stream: Callable, cells: int, where: str) -> Iterator[Trial]:
    """A steady flow in a turning frame: p' = p − 2ρΩψ + ½ρΩ²|x − x₀|² balances both inertial forces."""
    base = exact_flow(flow, cells, where, 1.5)
    centre, rho = np.array([0.3, -0.2]), 1.5
    for rate in (0.5, -4.0):

        def more(x, y, rate=rate):
            turned = 0.5 * rate**2 * ((x - centre[0]) ** 2 + (y - centre[1]) ** 2)
            return rho * (turned - 2.0 * rate * stream(x, y))

        wrong = added(base, "pressure", field_of(base, more))
        yield Trial("rotating frame", f"{flow.name}/{where}", wrong, "momentum", {"rotating-frame": rate})


def other_trials(cells: int) -> Iterator[Trial]:
    """Heat, gas, storage, axisymmetry, turning frames."""
    heated = [("poiseuille", exact.poiseuille()), ("suction", exact.suction_layer())]
    for name, case in heated:
        for where in ("point", "average"):
            flow = exact_flow(case, cells, where, 1.5)
            k, c, at = float(flow.fluid.conductivity), float(flow.fluid.specific_heat), f"{name}/{where}"
            for f in (1.1, 30.0):
                # Only their ratio can be seen.
                one = {"conductivity-factor": f, "specific-heat-factor": 1.0 / f}
                other = {"conductivity-factor": 1.0 / f, "specific-heat-factor": f}
                yield Trial("conductivity", at, told(flow, conductivity=k / f), "heat", one)
                yield Trial("specific heat", at, told(flow, specific_heat=c / f), "heat", other)
    for rayleigh in ("1e4", "1e5"):
        flow = cavity(rayleigh)
        for f in (1.1, 7.0):
            one = {"conductivity-factor": f, "specific-heat-factor": 1.0 / f}
            yield Trial("conductivity", f"cavity-{rayleigh}", told(flow, conductivity=1.0 / f), "heat", one)
        wrong = added(flow, "heat_source", np.full(flow.mesh.n_points, -5.0))
        yield Trial("heat source", f"cavity-{rayleigh}", wrong, "heat", {"uniform-heat-source": 5.0})
    radial = exact.spherical_source()
    for where in ("point", "average"):
        gas = exact_flow(radial, cells, where, symmetry="axisymmetric", axis="x")
        for gamma in (1.3, 1.67):
            yield Trial("gamma", f"spherical/{where}", told(gas, gamma=gamma), "total-energy", {"gamma": 1.4})
    green = exact.taylor_green()
    for where in ("point", "average"):
        now = exact_flow(green, cells, where)
        then = exact_flow(exact.taylor_green(time=-0.01), cells, where)
        now = replace(now, case=replace(now.case, time=0.01))
        then = replace(then, case=replace(then.case, time=0.0))
        yield Trial("storage", f"taylor-green/{where}", now, "momentum", {"storage": 1.0}, then)
    jet = exact.landau_jet()
    for where in ("point",):
        flow = exact_flow(jet, cells, where)
        yield Trial(
            "axisymmetric", f"landau/{where}", flow, "mass", {"axisymmetric-x": 1.0, "axisymmetric-y": 1.0}
        )
    lam = 20 - np.sqrt(400 + 4 * np.pi**2)

    def kovasznay_stream(x, y):
        return y - np.exp(lam * x) * np.sin(2 * np.pi * y) / (2 * np.pi)

    for where in ("point", "average"):
        yield from frame_trials(exact.kovasznay(), kovasznay_stream, cells, where)


def source_velocity(x: Array, y: Array, centre: Array, radius: float, rate: float) -> Array:
    """(…, 2) velocity of a source spread evenly over a disc."""
    dx, dy = x - centre[0], y - centre[1]
    r2 = np.maximum(dx**2 + dy**2, 1e-300)
    size = rate / (2 * np.pi) * np.where(r2 < radius**2, 1.0 / radius**2, 1.0 / r2)
    return np.stack([size * dx, size * dy], axis=-1)


def with_source(flow: Flow, centre: Array, radius: float, volume_rate: float) -> Flow:
    """The flow with fluid entering over a disc; ``volume_rate`` per depth."""
    more = field_of(flow, lambda x, y: source_velocity(x, y, centre, radius, volume_rate))
    values = np.zeros((len(more), 3))
    values[:, :2] = more
    old = flow.fields["velocity"]
    whole = np.zeros((len(more), 3))
    whole[:, : old.values.shape[1]] = old.values
    return replace(flow, fields={**flow.fields, "velocity": replace(old, values=whole + values)})


def unfinished(flow: Flow, seed: int, size: float) -> Flow:
    """The flow with a smooth random error in velocity and pressure, as of a run that is not done."""
    rng = np.random.default_rng(seed)
    x0, y0, x1, y1 = flow.mesh.bounds
    scale = np.array([x1 - x0, y1 - y0])
    waves = [(rng.normal(size=2) * 4.0 / scale, rng.uniform(0, 6.3, 3), rng.normal(size=2)) for _ in range(6)]

    def error(x, y):
        out = np.zeros((*np.shape(x), 3))
        for k, phase, amount in waves:
            # Free of divergence: along the crests.
            crest = np.array([-k[1], k[0]]) / np.linalg.norm(k)
            wave = np.sin(k[0] * x + k[1] * y + phase[0])
            out[..., :2] += amount[0] * crest * wave[..., None]
            out[..., 2] += amount[1] * np.sin(k[0] * x + k[1] * y + phase[1])
        return out

    more = field_of(flow, error)
    u = np.asarray(flow.fields["velocity"].values, float)
    speed = float(np.sqrt(np.mean(np.sum(u**2, axis=1))))
    velocity = np.zeros_like(u)
    velocity[:, :2] = size * speed * more[:, :2]
    wrong = added(flow, "velocity", velocity)
    return added(wrong, "pressure", size * float(flow.fluid.density) * speed**2 * more[:, 2])
