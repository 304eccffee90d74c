"""Handbook flows of plates, jets, steps and sections: flux, force and loss as the books have them.

Values are those of the named books and papers, recomputed to the digits shown.
"""

from __future__ import annotations

import exact
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import flow_on
from exact.gas_dynamics import jump_ratios
from scipy.optimize import brentq

import fvcheck
from fvcheck import ControlSurface, Flow, Fluid


def flow_of(cells, data, fluid, **settings):
    return Flow.from_arrays(
        cells.points, (cells.offsets, cells.nodes), point_data=data, fluid=fluid, **settings
    )


def fluxes(flow, points, law):
    return [row.flux for row in fvcheck.balance(flow, ControlSurface.line(points), laws=[law]).rows]


def test_an_oscillating_plate_has_the_friction_and_power_of_stokes():
    # Stokes 1851: u = U e^(−ky) cos(ωt − ky), k² = ω/2ν; τ of amplitude ρU√(ων), 45° before the plate; mean
    # power ρU²√(ων)/2√2. Here ρ = 2, U = 3, ω = 2, ν = 1, k = 1; ten cells to 1/k
    rho, speed, omega = 2.0, 3.0, 2.0
    cells = tm.channel(np.linspace(0.0, 1.0, 6), np.linspace(0.0, 10.0, 101))
    y = cells.points[:, 1]
    fluid = Fluid(density=rho, viscosity=rho)
    friction = []
    phases = np.arange(8) * np.pi / 4
    for phase in phases:
        u, rate = (speed * np.exp(-y) * wave(phase - y) for wave in (np.cos, lambda a: -omega * np.sin(a)))
        data = {"U": np.column_stack([u, 0 * y]), "dUdt": np.column_stack([rate, 0 * y]), "p": 0 * y}
        flow = flow_of(cells, data, fluid, fields={"rate:velocity": "dUdt"})
        friction.append(fvcheck.forces(flow, "bottom", methods="body-surface")["body-surface"].force[0])
        row = fvcheck.balance(flow, ControlSurface.box(0.2, -1.0, 0.8, 11.0), laws=["momentum"])["momentum-x"]
        # what the layer gains is what the plate gives: the volume takes up all of the friction
        assert abs(row.imbalance) <= row.sampling_band + 1e-3 * rho * speed  # e^(−10) stays outside
    wave = np.mean(np.array(friction) * np.exp(-1j * phases)) * 2.0
    assert abs(wave) == pytest.approx(rho * speed * np.sqrt(2.0), rel=1e-3)  # one-sided slopes, h = 0.1/k
    # the fluid pulls against the plate: its friction is −τ, and τ leads by 45°
    assert np.degrees(np.angle(-wave)) == pytest.approx(45.0, abs=0.1)
    power = np.mean(-np.array(friction) * speed * np.cos(phases))
    assert power == pytest.approx(rho * speed**2 * np.sqrt(2.0) / (2.0 * np.sqrt(2.0)), rel=2e-3)


def test_a_plane_jet_keeps_its_momentum_and_draws_mass_in():
    # Schlichting 1933; Bickley 1937: J = ρK at every station, Q = 3.30193 (Kνx)^⅓; K = 1, ν = .01
    nu = 0.01
    cells = tm.channel(np.linspace(1.0, 2.0, 21), np.linspace(-2.0, 2.0, 161))
    x, y = cells.points.T
    xi = 0.2751704 * nu ** (-2 / 3) * y * x ** (-2 / 3)
    u = 0.4542802 * (nu * x) ** (-1 / 3) / np.cosh(xi) ** 2
    v = 0.5503211 * (nu / x**2) ** (1 / 3) * (2 * xi / np.cosh(xi) ** 2 - np.tanh(xi))
    # the layer equations leave the pressure and friction along the stream out
    flow = flow_of(cells, {"U": np.column_stack([u, v]), "p": 0 * x}, Fluid(density=1.0, viscosity=0.0))
    for at in (1.2, 1.5, 1.8):
        station = [(at, -2.0), (at, 2.0)]
        (mass,) = fluxes(flow, station, "mass")
        assert mass == pytest.approx(3.30193 * (nu * at) ** (1 / 3), rel=1e-3)  # six cells to the half-width
        assert fluxes(flow, station, "momentum")[0] == pytest.approx(1.0, rel=1e-3)
    row = fvcheck.balance(flow, ControlSurface.box(1.1, -1.9, 1.9, 1.9), laws=["mass"])["mass"]
    assert row.verdict == "closed" and abs(row.imbalance) <= row.sampling_band


def test_a_sudden_expansion_has_the_rise_and_loss_of_borda_and_carnot():
    # White; Idelchik, r = ½: Δp = 2r(1 − r) ½ρU², loss (1 − r)² ½ρU² of total pressure. From the step, whose
    # pressure is that of the small duct, to the far end streams mix without friction at walls
    r = 0.5
    whole = tm.quads((-1.0, 0.0, 2.0, 1.0), 0.05, jitter=0.0)
    kept = (whole.centroids[:, 0] > 0.0) | (whole.centroids[:, 1] < r)
    used, nodes = np.unique(whole.nodes.reshape(-1, 4)[kept], return_inverse=True)
    cells = tm.from_table(whole.points[used], nodes.reshape(-1, 4))
    x, y = cells.points.T
    s = np.clip((x - 0.3) / 1.2, 0.0, 1.0)
    mixed, slope = s**2 * (3 - 2 * s), 6 * s * (1 - s) / 1.2
    inner = y <= r + 1e-9
    u = np.where(inner, 1.0, 0.0) * (1 - mixed) + r * mixed
    v = slope * np.where(inner, (1 - r) * y, r * (1 - y))  # ∇·u = 0 on both sides
    p = mixed * r * (1 - r)
    data, fluid = {"U": np.column_stack([u, v]), "p": p}, Fluid(density=1.0, viscosity=0.0)
    mesh = flow_of(cells, data, fluid).mesh
    step = [n for n in mesh.boundary.names if not mesh.points[mesh.patch_edges(n)][..., 0].any()]
    flow = flow_of(cells, data, fluid, walls=step)
    volume = ControlSurface.box(-0.5, -1.0, 1.8, 2.0)
    ledger = fvcheck.balance(flow, volume, laws=["mass", "momentum", "kinetic-energy"])
    # streams across the border are uniform, and so is the pressure on the step: rounding
    assert ledger["mass"].imbalance == pytest.approx(0.0, abs=1e-9)
    assert ledger["momentum-x"].imbalance == pytest.approx(0.0, abs=1e-9)
    # the volume lacks ½ρU²(1 − r)² of what Q = r carries in: mixing has turned it into heat
    assert ledger["kinetic-energy"].flux == pytest.approx(-r * 0.5 * (1 - r) ** 2, abs=1e-9)


def test_a_rankine_oval_has_neither_drag_nor_lift_and_lets_nothing_through():
    # source and sink 2πUa apart by 2a: half-length √3 a, half-width 1.3065424 a (White's table); d'Alembert
    def stream(r, angle):
        x, y = r * np.cos(angle), r * np.sin(angle)
        return y + np.arctan2(y, x + 1) - np.arctan2(y, x - 1)

    def radius(angle):
        angle = abs((angle + np.pi) % (2 * np.pi) - np.pi)
        if min(angle, np.pi - angle) < 1e-9:
            return np.sqrt(3.0)
        return brentq(stream, 1e-6, 4.0, args=(angle,), xtol=1e-13)

    def onto_oval(points):
        scale = [radius(a) for a in np.arctan2(points[:, 1], points[:, 0])]
        return points * np.array(scale)[:, None]

    cells = tm.mapped(tm.annulus(1.0, 4.0, 2 * np.pi / 120), onto_oval)
    x, y = cells.points.T
    source, sink = (x + 1) ** 2 + y**2, (x - 1) ** 2 + y**2
    velocity = np.column_stack([1 + (x + 1) / source - (x - 1) / sink, y / source - y / sink])
    data = {"U": velocity, "p": -0.5 * np.sum(velocity**2, axis=1)}
    flow = flow_of(cells, data, Fluid(density=1.0, viscosity=0.0))
    (body,) = flow.mesh.bodies
    on_body = flow.mesh.points[flow.mesh.patch_edges(body)].reshape(-1, 2)
    assert on_body.max(axis=0) == pytest.approx((1.7320508, 1.3065424), abs=1e-7)
    assert np.hypot(*velocity.T).max() == pytest.approx(1.7388108, rel=1e-6)
    for e in fvcheck.forces(flow, distances=[0.4, 1.0, 2.0]).estimates:
        assert abs(e.drag) <= e.band("drag") and abs(e.lift) <= e.band("lift"), e.label
        assert abs(e.drag) < 2e-3, e.label  # of ½ρU² times a height of 2.6
    row = fvcheck.balance(flow, ControlSurface.around(body, 0.5), laws=["mass"])["mass"]
    # chords cut the flow off by the sagitta: second order of 3 degrees
    assert abs(row.boundary) < 1e-3 and row.verdict == "closed"


def test_a_flat_plate_in_a_supersonic_stream_has_the_lift_and_drag_of_shock_and_fan():
    # shock-expansion theory, M 2 at 5°: c_l .2020650, c_d .0176784. A stream line behind each carries p alone
    angle = np.radians(5.0)
    shock, fan = exact.oblique_shock(2.0, 5.0), exact.expansion_fan(2.0, 5.0)
    pressure = []
    for field, start in ((shock, (0.45, 0.05)), (fan, (1.2, 0.35))):
        flow = flow_on(field, tm.triangles(field.domain, 0.05, 2))
        along = field.velocity(*np.array(start))
        end = np.array(start) + 0.3 * along / np.hypot(*along)
        (mass,) = fluxes(flow, [start, tuple(end)], "mass")
        assert abs(mass) < 1e-9
        pressure.append(np.hypot(*fluxes(flow, [start, tuple(end)], "momentum")) / 0.3)
    force = (pressure[0] - pressure[1]) / 2.0  # ½ρV² = 2
    assert (force * np.cos(angle), force * np.sin(angle)) == pytest.approx((0.2020650, 0.0176784), rel=1e-5)


@pytest.mark.parametrize(("mach", "ratio"), [(1.05, 0.99993), (1.2, 0.99717), (2.0, 0.92380)])
def test_the_entropy_that_a_shock_makes_is_the_drag_of_oswatitsch(mach, ratio):
    # D = (T/U) ∫ρuΔs dA to first order (Oswatitsch); exact: the speed lost at ambient pressure
    flow = flow_on(exact.normal_shock(mach), tm.quads((0.0, 0.0, 1.0, 0.5), 0.05, 1, jitter=0.0), "average")
    tube = ControlSurface.box(0.1, 0.1, 0.9, 0.4)
    made = fvcheck.balance(flow, tube, laws=["entropy"])["entropy"].imbalance
    mass = mach * 0.3
    loss = np.exp(-jump_ratios(mach)[2])  # of total pressure
    total = (1 + 0.2 * mach**2) ** 3.5 * loss
    far = np.sqrt(5.0 * (total ** (2 / 7) - 1.0))  # Mach number at ambient pressure
    speed = far * np.sqrt((1 + 0.2 * mach**2) / (1 + 0.2 * far**2))
    assert made / mach / (mass * (mach - speed)) == pytest.approx(ratio, rel=2e-5)  # the digits of the table


def test_a_plate_under_a_slanting_jet_parts_it_and_feels_its_normal_momentum():
    # White: F = ρQV sinθ, branches ½(1 ± cosθ)Q. The whole field by its hodograph ζ = u − iv in the
    # upper half disc: source at e^(iθ), sinks at ±1, and dz = dw/ζ (Kirchhoff; derived here). θ = 30°
    angle = np.radians(30.0)
    cells = tm.quads((-9.0, 0.0, 9.0, 0.5 * np.pi), 0.1, jitter=0.0)
    jet = np.array([np.log(1.0 / np.tan(0.5 * angle)), 0.5 * np.pi])  # where ζ = e^(iθ)
    kept = np.hypot(*(cells.centroids - jet).T) > 0.15
    used, nodes = np.unique(cells.nodes.reshape(-1, 4)[kept], return_inverse=True)
    zeta = np.tanh(0.5 * (cells.points[used, 0] + 1j * cells.points[used, 1]))
    turn, right, left = np.exp(1j * angle), 0.5 * (1 + np.cos(angle)), 0.5 * (1 - np.cos(angle))
    z = np.log(1 - zeta / turn) / turn + np.log(1 - zeta * turn) * turn
    z = (z - 2 * right * np.log(1 - zeta) + 2 * left * np.log(1 + zeta)) / np.pi
    places = tm.from_table(np.column_stack([z.real, z.imag]), nodes.reshape(-1, 4))
    data = {"U": np.column_stack([zeta.real, -zeta.imag]), "p": 0.5 * (1 - np.abs(zeta) ** 2)}
    flow = flow_of(places, data, Fluid(density=1.0, viscosity=0.0))
    mesh = flow.mesh
    plate = [n for n in mesh.boundary.names if np.abs(mesh.points[mesh.patch_edges(n)][..., 1]).max() < 1e-12]
    for x, high, branch in ((2.0, 2.0, right), (-0.42, 0.15, -left)):
        (mass,) = fluxes(flow, [(x, -1.0), (x, high)], "mass")
        assert mass == pytest.approx(branch, rel=2e-3)  # sixteen cells across, the free surface one of them
    found = fvcheck.forces(flow, plate, methods="body-surface")
    # all the pressure there is: e^(−9) of it lies beyond the ends
    assert found["body-surface"].force == pytest.approx((0.0, -np.sin(angle)), abs=1e-3)
    for row in fvcheck.balance(flow, ControlSurface.domain(), laws=["mass", "momentum"]).rows:
        assert abs(row.imbalance) <= row.sampling_band and abs(row.imbalance) < 1e-2, row.label


def test_a_boundary_layer_has_the_thicknesses_and_friction_of_blasius():
    # f''' + ½ f f'' = 0, f''(0) .3320573: δ* 1.7207877, θ .6641147, δ₃ 1.0443755 times √(νx/U); D = ρU²θ
    # (Blasius 1908). Layer equations: pressure and the friction along the stream are left out
    from scipy.integrate import solve_ivp

    nu = 1e-4
    cells = tm.channel(np.linspace(1.0, 2.0, 21), np.linspace(0.0, 0.14, 141))
    x, y = cells.points.T
    eta = y / np.sqrt(nu * x)
    profile = solve_ivp(
        lambda _, s: [s[1], s[2], -0.5 * s[0] * s[2]],
        (0, 15),
        [0, 0, 0.3320573],
        rtol=1e-10,
        dense_output=True,
    ).sol
    f, slope = profile(eta)[:2]
    data = {"U": np.column_stack([slope, 0.5 * np.sqrt(nu / x) * (eta * slope - f)]), "p": 0 * x}
    flow = flow_of(cells, data, Fluid(density=1.0, viscosity=nu))
    still = flow_of(cells, data, Fluid(density=1.0, viscosity=0.0))
    for at in (1.2, 1.8):
        station, scale = [(at, 0.0), (at, 0.14)], np.sqrt(nu * at)
        (mass,) = fluxes(still, station, "mass")
        (energy,) = fluxes(still, station, "kinetic-energy")
        momentum = fluxes(still, station, "momentum")[0]
        thick = np.array([0.14 - mass, mass - momentum, mass - 2 * energy]) / scale
        # ten to fourteen cells to √(νx/U): by cubics to 6e-4
        assert thick == pytest.approx((1.7207877, 0.6641147, 1.0443755), rel=1e-3)
    drag = fvcheck.forces(flow, "bottom", methods="body-surface")["body-surface"].force[0]
    assert drag == pytest.approx(0.5 * 1.3282293 * np.sqrt(nu) * (np.sqrt(2.0) - 1.0), rel=1e-3)
