"""Moving surfaces and turning frames: the laws do not care who looks."""

from __future__ import annotations

import exact
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import flow_on

import fvcheck
from fvcheck import ControlSurface, Flow, Fluid

LAWS = ["mass", "momentum", "total-energy", "angular-momentum"]


# --- a vortex carried by a stream --------------------------------------------------------------


def carried(rates):
    vortex = exact.isentropic_vortex(stream=(0.5, 0.3))
    cells = tm.triangles((-3.0, -3.0, 3.0, 3.0), 0.2, 2)
    x, y = cells.points.T
    data = {"U": vortex.velocity(x, y), "p": vortex.p(x, y), "T": vortex.T(x, y), "rho": vortex.rho(x, y)}
    fields = {}
    if rates:
        data["dU"] = np.column_stack([vortex.rate("u", x, y), vortex.rate("v", x, y)])
        data |= {f"d{name}": vortex.rate(name, x, y) for name in ("p", "T", "rho")}
        names = {"velocity": "dU", "pressure": "dp", "temperature": "dT", "density": "drho"}
        fields = {f"rate:{role}": name for role, name in names.items()}
    return Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        point_data=data,
        fields=fields,
        fluid=Fluid(**vortex.fluid),
    )


@pytest.mark.parametrize("rates", [True, False], ids=["with rates", "steady in the moving frame"])
def test_a_carried_vortex_closes_in_a_surface_that_moves_along(rates):
    surface = ControlSurface.parse("box(-1.2, -1, 0.9, 1.4) @ velocity(0.5, 0.3)")
    ledger = fvcheck.balance(carried(rates), surface, laws=LAWS[:3])
    for row in ledger.rows:
        assert row.verdict == "closed", row.label
        # Thomas & Lombard 1979: the storage is that of a content which does not change.
        assert abs(row.storage) <= 2e-3 * row.scale, row.label
        assert abs(row.imbalance) <= row.resolution_band, row.label


def test_a_carried_vortex_does_not_close_in_a_surface_at_rest_without_its_rates():
    surface = ControlSurface.box(-1.2, -1.0, 0.9, 1.4)
    still = fvcheck.balance(carried(False), surface, laws=["mass"])["mass"]
    assert still.verdict != "closed"
    full = fvcheck.balance(carried(True), surface, laws=LAWS)
    for row in full.rows:
        assert row.verdict == "closed", row.label


@pytest.mark.parametrize(
    "motion", ["velocity(3, -2)", "spin(1.5, 0.2, 0.1)", "velocity(1, 0) @ spin(-2, 0, 0)"]
)
def test_any_motion_of_the_surface_leaves_the_ledger_of_a_flow_with_rates_closed(motion):
    shape = "polygon(-1 -0.8, 0.9 -1, 0.7 1.1, -0.6 0.9)"
    for spelled in (shape, f"{shape} @ {motion}"):
        ledger = fvcheck.balance(carried(True), ControlSurface.parse(spelled), laws=LAWS)
        for row in ledger.rows:
            assert row.verdict == "closed", (spelled, row.label)


# --- a vane ------------------------------------------------------------------------------------

JET = 1.0
INNER, OUTER = 5.0, 5.2


def turning_jet(speed, turn):
    """A jet of ρ = 1 and thickness .2 on a vane that moves at ``speed``, from x into the direction ``turn``.

    In the vane's frame the speed is JET − speed along concentric circles, an exact
    solution of Euler's equations with p = W² ln r.
    """
    wind = JET - speed
    cells = tm.mapped(
        tm.quads((-0.1, 0.0, 1.1, 1.0), 0.05, 3, jitter=0.1),
        lambda p: _polar(4.9 + 0.4 * p[:, 1], turn * p[:, 0]),
    )
    x, y = cells.points.T
    r = np.hypot(x, y)
    u = np.column_stack([wind * -y / r + speed, wind * x / r])
    return Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        point_data={"U": u, "p": wind**2 * np.log(r)},
        fluid=Fluid(density=1.0, viscosity=0.0),
    )


def _polar(r, angle):
    """Points whose circle runs along x at angle 0, turning counter-clockwise."""
    return np.column_stack([r * np.sin(angle), -r * np.cos(angle)])


def _sector(speed, turn):
    angle = np.linspace(0.0, turn, 400)
    ring = np.concatenate([_polar(np.full(400, OUTER), angle), _polar(np.full(400, INNER), angle[::-1])])
    return ControlSurface.polygon(ring, motion=fvcheck.Motion((speed, 0.0)))


@pytest.mark.parametrize("degrees", [60.0, 120.0, 165.0])
@pytest.mark.parametrize("speed", [0.0, 1 / 3, 0.6])
def test_a_vane_at_constant_speed_takes_force_and_work_from_the_jet(speed, degrees):
    # Fx = ρA(V−U)²(1−cosβ), Fy = −ρA(V−U)² sinβ (White, Fluid Mechanics; check values, "verified").
    turn, area, wind = np.radians(degrees), OUTER - INNER, JET - speed
    ledger = fvcheck.balance(
        turning_jet(speed, turn), _sector(speed, turn), laws=["mass", "momentum", "kinetic-energy"]
    )
    force = area * wind**2 * np.array([1 - np.cos(turn), -np.sin(turn)])
    # The polygon of 400 chords a side, and 20 cells along the turn.
    tolerance = 2e-3 * area * wind**2
    for c, label in enumerate(("momentum-x", "momentum-y")):
        assert -ledger[label].parts["convective"] == pytest.approx(force[c], abs=tolerance)
    power = -ledger["kinetic-energy"].parts["convective"]
    assert power == pytest.approx(force[0] * speed, abs=tolerance)
    for row in ledger.rows:
        assert row.verdict == "closed", row.label


def test_the_best_vane_takes_sixteen_of_twenty_seven_parts_of_the_power():
    # β = 180°: U = V/3, efficiency 16/27 (check values, "verified"); 179° changes 1 − cosβ by 1e-4.
    turn = np.radians(179.0)
    row = fvcheck.balance(turning_jet(1 / 3, turn), _sector(1 / 3, turn), laws=["kinetic-energy"])
    power = -row["kinetic-energy"].parts["convective"]
    assert power / (0.5 * (OUTER - INNER) * JET**3) == pytest.approx(16 / 27, rel=3e-3)


# --- turning frames ----------------------------------------------------------------------------


@pytest.mark.parametrize("rate", [1.0, -2.5])
def test_flow_between_cylinders_balances_in_any_frame_that_turns_with_its_axis(rate):
    # Seen from the frame u' = u − Ω×r; pressure, friction and so the torque are the same.
    couette = exact.cylindrical_couette()
    cells = tm.annulus(1.0, 2.0, 0.06, "triangles", 1)
    x, y = cells.points.T
    seen = couette.velocity(x, y) - rate * np.column_stack([-y, x])
    fluid = Fluid(**couette.fluid, frame_rate=rate)
    flow = Flow.from_arrays(
        cells.points, (cells.offsets, cells.nodes), point_data={"U": seen, "p": couette.p(x, y)}, fluid=fluid
    )
    surface = ControlSurface.box(1.05, 0.0, 1.6, 0.6)
    laws = ["mass", "momentum", "kinetic-energy", "angular-momentum"]
    for row in fvcheck.balance(flow, surface, laws=laws).rows:
        assert row.verdict == "closed", row.label
        assert abs(row.imbalance) <= row.resolution_band, row.label
    torque = fvcheck.balance(flow, ControlSurface.circle(0, 0, 1.5), laws=["angular-momentum"])
    assert torque["angular-momentum"].parts["viscous"] == pytest.approx(16.755161, rel=1e-3)
    without = Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        point_data={"U": seen, "p": couette.p(x, y)},
        fluid=Fluid(**couette.fluid),
    )
    assert fvcheck.balance(without, surface, laws=["momentum"]).verdict == "open"


def test_the_centre_of_the_frame_may_lie_anywhere():
    # Fluid at rest under an even pressure, seen from a frame that turns about (3, −1).
    cells = tm.quads((0.0, 0.0, 1.0, 1.0), 0.2, 1)
    arm = cells.points - [3.0, -1.0]
    seen = -0.7 * np.column_stack([-arm[:, 1], arm[:, 0]])
    flow = Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        point_data={"U": seen, "p": np.full(len(arm), 5.0)},
        fluid=Fluid(density=1.2, viscosity=0.1, frame_rate=0.7, frame_centre=(3.0, -1.0)),
    )
    ledger = fvcheck.balance(
        flow, ControlSurface.box(0.1, 0.2, 0.9, 0.8), laws=["momentum", "kinetic-energy", "angular-momentum"]
    )
    for row in ledger.rows:
        # Linear velocities: all degrees are exact.
        assert abs(row.imbalance) < 1e-10 * row.scale, row.label


def test_a_rotating_frame_can_be_told_on_the_command_line(tmp_path):
    import json

    from write_case import write_case

    from fvcheck.cli.app import run

    couette = exact.cylindrical_couette()
    cells = tm.annulus(1.0, 2.0, 0.1, "triangles", 1)
    x, y = cells.points.T
    arm = cells.points
    seen = couette.velocity(x, y) - np.column_stack([-arm[:, 1], arm[:, 0]])
    path = write_case(tmp_path / "rotor.vtu", cells, {"U": seen, "p": couette.p(x, y)})
    out = tmp_path / "out.json"
    words = ["--density", "1", "--viscosity", "1", "--frame-rate", "1", "--frame-centre", "0,0"]
    words += ["--law", "angular-momentum", "--about", "0.5,0.25", "-s", "circle(0, 0, 1.5)"]
    assert run(["balance", str(path), *words, "--json", str(out), "-q"]) in (0, 3)
    (row,) = json.loads(out.read_text(encoding="utf-8"))["surfaces"][0]["laws"]
    # A torque without a force is the same about every point.
    assert row["parts"]["viscous"] == pytest.approx(16.755161, rel=5e-3)


def test_flow_on_trial_meshes_keeps_its_frame_of_rest():
    # Rate zero is no frame: the same numbers as without it.
    flow = flow_on(exact.kovasznay(), tm.triangles((-0.5, -0.5, 1.0, 1.5), 0.15, 0))
    turned = flow_on(
        exact.kovasznay(),
        tm.triangles((-0.5, -0.5, 1.0, 1.5), 0.15, 0),
        fluid=Fluid(**exact.kovasznay().fluid, frame_rate=0.0, frame_centre=(9.0, 9.0)),
    )
    box = ControlSurface.box(-0.2, -0.2, 0.7, 0.8)
    one, other = (fvcheck.balance(f, box, laws=["momentum"]) for f in (flow, turned))
    assert [row.imbalance for row in one.rows] == [row.imbalance for row in other.rows]
