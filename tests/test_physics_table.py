"""Handbook flows that no other test has: similarity flows about an axis, gas vortices, ducts, sources.

Values are those of the named books and papers, recomputed to the digits shown.
"""

from __future__ import annotations

import numpy as np
import pytest
import trial_meshes as tm

import fvcheck
from fvcheck import ControlSurface, Flow, Fluid

GAMMA = 1.4
GAS = Fluid(gamma=GAMMA, gas_constant=1 / GAMMA, viscosity=0.0)


def flow_of(cells, data, fluid, **settings):
    """Point data on trial cells."""
    return Flow.from_arrays(
        cells.points, (cells.offsets, cells.nodes), point_data=data, fluid=fluid, **settings
    )


def line_flux(flow, points, law):
    """Total flux of each component of a law through an open line, taken positive down the stream."""
    rows = fvcheck.balance(flow, ControlSurface.line(points), laws=[law]).rows
    return [row.flux for row in rows]


def similar(slopes, start, end, guess, far=12.0):
    """Solution of a similarity equation on [0, far]: sol(ζ) (n, m). start, end: component -> value."""
    from scipy.integrate import solve_bvp

    z = np.linspace(0.0, far, 200)
    solved = solve_bvp(
        slopes,
        lambda a, b: np.array([*(a[k] - v for k, v in start), *(b[k] - v for k, v in end)]),
        z,
        guess(z),
        tol=1e-9,
        max_nodes=100_000,
    )
    assert solved.success
    return solved.sol


def karman():
    """F, F', G, G', H of the rotating disc: F'' = F² − G² + F'H, G'' = 2FG + G'H, H' = −2F (Kármán 1921)."""
    return similar(
        lambda z, s: np.stack(
            [s[1], s[0] ** 2 - s[2] ** 2 + s[1] * s[4], s[3], 2 * s[0] * s[2] + s[3] * s[4], -2 * s[0]]
        ),
        [(0, 0.0), (2, 1.0), (4, 0.0)],
        [(0, 0.0), (2, 0.0)],
        lambda z: np.stack([z * np.exp(-z), (1 - z) * np.exp(-z), np.exp(-z), -np.exp(-z), -0.8 + 0 * z]),
        far=20.0,
    )


@pytest.mark.parametrize("walls", [False, True])
def test_a_rotating_disc_has_its_torque_and_closes_every_law(walls):
    # F'(0) .510233, G'(0) −.615922, H∞ −.884474; both faces 2M/(ρΩ²R⁵) = 3.86995/√Re (Cochran 1934)
    sol = karman()
    assert sol(0.0)[[1, 3]] == pytest.approx([0.510233, -0.615922], abs=2e-6)
    assert sol(20.0)[4] == pytest.approx(-0.884474, abs=1e-5)
    radius = 2.0  # ρ = ν = Ω = 1: Re = 4
    cells = tm.quads((0.0, 0.0, 5.0, radius), 0.12, 1, jitter=0.1)

    def state(x, y):
        f, _, g, _, h = sol(x)
        return {"U": np.column_stack([h, y * f, y * g]), "p": -2 * f - 0.5 * h * h}

    about_axis = {"symmetry": "axisymmetric", "axis": "x"}
    fluid = Fluid(density=1.0, viscosity=1.0)
    if walls:
        flow = Flow.from_arrays(
            cells.points,
            (cells.offsets, cells.nodes),
            cell_data=state(*cells.centroids.T),
            cell_values="centroid",
            fluid=fluid,
            walls={"left": {"omega": 1.0}},
            **about_axis,
        )
    else:
        flow = flow_of(cells, state(*cells.points.T), fluid, **about_axis)
    torque = -0.5 * 3.86995 / np.sqrt(4.0) * 0.5 * radius**5
    disc = fvcheck.forces(flow, "left", methods="body-surface")["body-surface"]
    # slopes at the wall are one-sided, on eight cells to the length √(ν/Ω)
    assert disc.moment == pytest.approx(torque, rel=1e-2)
    assert abs(disc.moment - torque) <= disc.band("moment")
    around = fvcheck.forces(
        flow, "left", methods="control-surface", surfaces=[ControlSurface.box(-1, -1, 1.0, 9.0)]
    )["control-surface"]
    # of cells, nothing is known at the outer rim, where half as much passes by one-sided slopes
    assert around.moment == pytest.approx(torque, rel=2e-2 if walls else 2e-3)
    assert abs(around.moment - torque) <= around.band("moment")
    ledger = fvcheck.balance(flow, ControlSurface.box(0.2, 0.2, 3.0, 1.6))
    assert {"angular-momentum", "momentum-y"} <= {row.label for row in ledger.rows}
    for row in ledger.rows:
        assert row.verdict == "closed", row.label


def test_a_stream_against_a_plate_has_the_friction_of_homann():
    # φ''' + 2φφ'' − φ'² + 1 = 0: φ''(0) = 1.3119377, δ* = .5689018 √(ν/a) (Homann 1936)
    sol = similar(
        lambda z, s: np.stack([s[1], s[2], s[1] ** 2 - 1 - 2 * s[0] * s[2]]),
        [(0, 0.0), (1, 0.0)],
        [(1, 1.0)],
        lambda z: np.stack([z - 0.5 + 0.5 * np.exp(-z), 1 - np.exp(-z), np.exp(-z)]),
        far=8.0,
    )
    assert sol(0.0)[2] == pytest.approx(1.3119377, abs=1e-6)
    assert 8.0 - sol(8.0)[0] == pytest.approx(0.5689018, abs=1e-6)
    cells = tm.quads((0.0, 0.0, 3.0, 1.5), 0.08, 1, jitter=0.1)
    x, y = cells.points.T
    phi, slope, _ = sol(x)
    data = {"U": np.column_stack([-2 * phi, y * slope]), "p": -0.5 * y * y - 2 * phi**2 - 2 * slope}
    flow = flow_of(cells, data, Fluid(density=1.0, viscosity=1.0), symmetry="axisymmetric", axis="x")
    row = fvcheck.balance(flow, ControlSurface.patch("left"), laws=["momentum"])["momentum-y"]
    # friction r φ''(0) over the disc: 2πR³/3 φ''(0)
    assert row.parts["viscous"] == pytest.approx(2 * np.pi * 1.5**3 / 3 * 1.3119377, rel=5e-3)
    for row in fvcheck.balance(flow, ControlSurface.box(-1.0, -1.0, 2.0, 1.0)).rows:
        assert row.verdict == "closed", row.label


def test_a_supersonic_vortex_between_arcs_turns_its_impulse():
    # M 2.25 at r = 1, to r = 1.384: mass 1.3535620, ∫(ρu² + p)dr 3.2205776, h0 5.03125 (Aftosmis et al. 1994)
    cells = tm.mapped(
        tm.quads((0.0, 0.0, 1.0, 1.0), 0.05, 1, jitter=0.1),
        lambda p: (
            ((1 + 0.384 * p[:, 0]) * np.stack([np.cos(np.pi / 2 * p[:, 1]), np.sin(np.pi / 2 * p[:, 1])])).T
        ),
    )
    x, y = cells.points.T
    r = np.hypot(x, y)
    rho = (1 + 0.2 * 2.25**2 * (1 - 1 / r**2)) ** 2.5
    speed = 2.25 / r
    data = {
        "U": (speed / r * np.stack([-y, x])).T,
        "rho": rho,
        "p": rho**GAMMA / GAMMA,
    }
    flow = flow_of(cells, data, GAS)
    entry = [(1.384, 1e-9), (1.0, 1e-9)]  # the normal is to the right of the line: upwards, down the stream
    (mass,) = line_flux(flow, entry, "mass")
    assert mass == pytest.approx(1.3535620, rel=1e-4)
    assert line_flux(flow, entry, "momentum")[1] == pytest.approx(3.2205776, rel=1e-4)
    assert line_flux(flow, entry, "total-energy")[0] == pytest.approx(mass * 5.03125, rel=1e-4)
    laws = ["mass", "momentum", "angular-momentum", "total-energy"]
    ledger = fvcheck.balance(flow, ControlSurface.domain(), laws=laws)
    for row in ledger.rows:
        assert row.verdict == "closed", row.label
        assert abs(row.imbalance_percent) < 0.1, row.label
    # both walls together turn the impulse by a right angle: (J, J) on them
    walls = [name for name in flow.mesh.boundary.names if name not in ("bottom", "left")]
    found = fvcheck.forces(flow, walls, methods="body-surface")
    force = np.sum([e.force for e in found.estimates], axis=0)
    if len(walls) == 2:
        # chords of 4.5 degrees: (θ²/24) of the pressure
        assert force == pytest.approx([3.2205776, 3.2205776], rel=5e-3)


def test_a_transonic_stream_between_curved_walls_carries_the_mass_of_ringleb():
    # ψ = 1/k: between k = .7 and 1.2 flows abs(1/k1 − 1/k2) = .5952381 (Ringleb 1940)
    def place(q, k):
        c = np.sqrt(1 - 0.2 * q * q)
        rho = c**5
        j = 1 / c + 1 / (3 * c**3) + 1 / (5 * c**5) - 0.5 * np.log((1 + c) / (1 - c))
        return np.column_stack(
            [(1 / q**2 - 2 / k**2) / (2 * rho) + j / 2, np.sqrt(1 - (q / k) ** 2) / (k * rho * q)]
        )

    square = tm.quads((0.0, 0.0, 1.0, 1.0), 0.03, 1, jitter=0.0)
    k = 0.7 + 0.5 * square.points[:, 0]
    q = 0.45 + (0.97 * k - 0.45) * square.points[:, 1]
    cells = tm.mapped(square, lambda p: place(q, k))
    c = np.sqrt(1 - 0.2 * q * q)
    sine = q / k
    data = {
        "U": -q[:, None] * np.column_stack([np.sqrt(1 - sine**2), sine]),
        "rho": c**5,
        "p": c**7 / GAMMA,
    }
    flow = flow_of(cells, data, GAS)
    across = 0.7 + 0.5 * np.linspace(0.0, 1.0, 400)
    station = place(0.45 + (0.97 * across - 0.45) * 0.5, across)
    (mass,) = line_flux(flow, station, "mass")
    # the ends lie between nodes of the curved walls: chords cut the stream by 1e-4 of it
    assert abs(mass) == pytest.approx(0.5952381, rel=5e-4)
    ledger = fvcheck.balance(
        flow, ControlSurface.domain(), laws=["mass", "momentum", "angular-momentum", "total-energy"]
    )
    for row in ledger.rows:
        assert row.verdict == "closed", row.label
        assert abs(row.imbalance) <= row.resolution_band, row.label


def test_of_two_equal_sources_each_pulls_the_other():
    # −ρm²/(2πd) on the right one (Lagally 1922); m = d = ρ = 1
    cells = tm.with_hole((0.4, -0.7, 1.8, 0.7), (1.0, 0.0, 0.15), 0.1, 0.03)
    x, y = cells.points.T
    near, far = (x - 1.0) ** 2 + y * y, x * x + y * y
    u = np.column_stack([(x - 1.0) / near + x / far, y / near + y / far]) / (2 * np.pi)
    flow = flow_of(cells, {"U": u, "p": -0.5 * np.sum(u * u, axis=1)}, Fluid(density=1.0, viscosity=0.0))
    body = flow.mesh.bodies[0]
    for route in ("control-surface", "band"):
        for e in fvcheck.forces(flow, body, methods=route).of(route):
            assert e.force[0] == pytest.approx(-1 / (2 * np.pi), rel=2e-3), e.label
            assert abs(e.force[1]) <= max(e.sampling_band[1], 2e-4), e.label


def test_friction_in_a_duct_takes_the_impulse_of_fanno():
    # 4fL/D 1.0690603 and F/F* 1.2026756 at M .5, p/p* 2.1380899 (Shapiro 1953; Keenan & Kaye 1945)
    def length(m):
        t = 1.2 * m * m / (1 + 0.2 * m * m)
        return (1 - m * m) / (GAMMA * m * m) + 0.6 / 0.7 * np.log(t)

    def state(m):
        t = 1.2 / (1 + 0.2 * m * m)
        return np.sqrt(t) / m, t, m * np.sqrt(t)  # p/p*, T/T*, u/c*

    def impulse(m):
        return (1 + GAMMA * m * m) / (m * np.sqrt(4.8 * (1 + 0.2 * m * m)))

    assert length(0.5) == pytest.approx(1.0690603, rel=1e-7)
    assert state(0.5)[0] == pytest.approx(2.1380899, rel=1e-7)
    assert impulse(0.5) == pytest.approx(1.2026756, rel=1e-7)
    square = tm.mixed((0.5, 0.0, 0.9, 0.3), 0.03, 1)
    cells = tm.mapped(square, lambda p: np.column_stack([length(0.5) - length(p[:, 0]), p[:, 1]]))
    p, t, u = state(square.points[:, 0])  # p* = 1, T* = 1 with R = 1: c* = √γ
    rho = p / t
    speed = u * np.sqrt(GAMMA)
    # the walls' friction, spread over the section: ½ρu² per unit of 4fx/D
    force = np.column_stack([-0.5 * rho * speed**2, 0 * p, 0 * p])
    data = {"U": np.column_stack([speed, 0 * u]), "p": p, "T": t, "f": force}
    fluid = Fluid(gamma=GAMMA, gas_constant=1.0, viscosity=0.0)
    flow = flow_of(cells, data, fluid, fields={"body_force": "f"})
    end = length(0.5) - length(0.9)
    ledger = fvcheck.balance(flow, ControlSurface.box(-1.0, -1.0, 2.0, 1.0), laws=["mass", "momentum"])
    assert [row.verdict for row in ledger.rows] == ["closed"] * 3
    # F* is p*(1 + γ) = 2.4 per height
    lost = (1.2026756 - impulse(0.9)) * 2.4 * 0.3
    assert -ledger["momentum-x"].source == pytest.approx(lost, rel=1e-4)
    entry = [(1e-9, 0.3), (1e-9, 0.0)]
    assert abs(line_flux(flow, entry, "momentum")[0]) == pytest.approx(1.2026756 * 2.4 * 0.3, rel=1e-4)
    assert flow.mesh.bounds[2] == pytest.approx(end, rel=1e-9)


def graetz_pipe(terms=60):
    """λ², Y(r) of Y'' + Y'/r + λ²(1 − r²)Y = 0, Y'(0) = Y(1) = 0: the first mode (Graetz 1883)."""
    from scipy.optimize import brentq

    def series(square):
        c = np.zeros(2 * terms)
        c[0] = 1.0
        for k in range(2, 2 * terms, 2):
            c[k] = -square * (c[k - 2] - (c[k - 4] if k >= 4 else 0.0)) / k**2
        return np.polynomial.Polynomial(c)

    square = brentq(lambda s: series(s)(1.0), 6.0, 9.0, xtol=1e-14)
    return square, series(square)


def test_a_pipe_of_even_temperature_has_its_nusselt_number():
    # λ 2.7043644 (Brown 1960), Nu = λ²/2 = 3.656793 on the diameter (Shah & London 1978)
    square, mode = graetz_pipe()
    assert np.sqrt(square) == pytest.approx(2.7043644, rel=1e-7)
    alpha = 1e-3  # conduction along the pipe left out: T = Y(r) exp(−λ²αx/2), mean speed 1
    cells = tm.quads((0.0, 0.0, 4.0, 1.0), 0.05, 1)
    x, r = cells.points.T
    data = {
        "U": np.column_stack([2 * (1 - r * r), 0 * r]),
        "T": mode(r) * np.exp(-square * alpha * x / 2),
        "p": 0 * x,
    }
    fluid = Fluid(density=1.0, specific_heat=1.0, conductivity=alpha, viscosity=0.0)
    flow = flow_of(cells, data, fluid, symmetry="axisymmetric", axis="x")
    row = fvcheck.balance(flow, ControlSurface.box(1.5, 0.5, 2.5, 2.0), laws=["heat"])["heat"]
    flux = -row.boundary / (2 * np.pi)
    station = fvcheck.balance(flow, ControlSurface.line([(2.0, 0.0), (2.0, 1.0)]), laws=["mass"])
    number = flux * 2 / (alpha * (0.0 - station.ports[0].temperature))
    assert number == pytest.approx(3.656793, rel=2e-3)
    box = fvcheck.balance(flow, ControlSurface.box(1.0, -1.0, 3.0, 0.8), laws=["heat"])["heat"]
    assert box.verdict == "closed"
