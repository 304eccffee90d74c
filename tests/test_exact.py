"""The closed-form flows satisfy their equations, and give the numbers of the handbooks."""

from __future__ import annotations

import exact
import numpy as np
import pytest
from exact import box_contour, circle_contour, fluxes, gradient

FLOWS = exact.all_flows()
by_name = pytest.mark.parametrize("flow", FLOWS, ids=lambda f: f.name)

# eighth-order central differences (standard coefficients)
WEIGHTS = {1: 4 / 5, 2: -1 / 5, 3: 4 / 105, 4: -1 / 280}


def step_of(flow):
    # 1/20 of the feature: truncation (1/20)^8/630 = 6e-14, rounding 1e-16·20
    return 0.05 * (flow.feature or 0.1)


def difference(f, x, y, axis, h):
    dx, dy = (h, 0.0) if axis == 0 else (0.0, h)
    return sum(w * (f(x + k * dx, y + k * dy) - f(x - k * dx, y - k * dy)) for k, w in WEIGHTS.items()) / h


def inner_points(flow, n=200):
    x0, y0, x1, y1 = flow.domain
    rng = np.random.default_rng(1)
    # 6 % from the sides, so that no difference reaches beyond the domain
    x = x0 + (x1 - x0) * rng.uniform(0.06, 0.94, n)
    y = y0 + (y1 - y0) * rng.uniform(0.06, 0.94, n)
    keep = np.ones(n, bool)
    if flow.hole:
        keep &= np.hypot(x - flow.hole[0], y - flow.hole[1]) > 1.3 * flow.hole[2]
    if flow.jump:
        a = flow.jump[2]
        keep &= abs((x - flow.jump[0]) * np.sin(a) - (y - flow.jump[1]) * np.cos(a)) > 0.05
    assert keep.sum() > n / 2
    return x[keep], y[keep]


def laplacian(f, x, y, h):
    return sum(difference(lambda a, b, i=i: gradient(f, a, b)[..., i], x, y, i, h) for i in (0, 1))


def assert_balanced(*terms, tolerance):
    total, size = sum(terms), max(np.max(np.abs(t)) for t in terms)
    assert np.max(np.abs(total)) <= tolerance * size + 1e-14


@by_name
def test_gradients_agree_with_finite_differences(flow):
    x, y = inner_points(flow)
    for f in (flow.u, flow.v, flow.p, flow.T, flow.rho):
        if f is None:
            continue
        g = gradient(f, x, y)
        scale = np.max(np.abs(f(x, y))) / step_of(flow)
        for axis in (0, 1):
            # rounding of f over the step, and a truncation of 6e-14 of feature-sized derivatives
            found = difference(f, x, y, axis, step_of(flow))
            assert np.max(np.abs(found - g[:, axis])) <= 1e-11 * scale


@by_name
def test_mass_and_momentum_equations_hold_everywhere(flow):
    x, y = inner_points(flow)
    rho, u, v = flow.density(x, y), flow.u(x, y), flow.v(x, y)
    gu, gv, gp = (gradient(f, x, y) for f in (flow.u, flow.v, flow.p))
    grho = gradient(flow.density, x, y)
    # 1e-9: rounding of the differences (1e-14 of the sizes) leaves room for a profile
    # solved from an ordinary differential equation (1e-11)
    assert_balanced(
        flow.rate("rho", x, y), grho[:, 0] * u, grho[:, 1] * v, rho * gu[:, 0], rho * gv[:, 1], tolerance=1e-9
    )
    forces = flow.body_force or (lambda x, y: 0 * x, lambda x, y: 0 * x)
    for name, f, g, i in (("u", flow.u, gu, 0), ("v", flow.v, gv, 1)):
        viscous = -flow.viscosity * laplacian(f, x, y, step_of(flow)) if flow.viscosity else 0 * x
        assert_balanced(
            rho * flow.rate(name, x, y),
            rho * u * g[:, 0],
            rho * v * g[:, 1],
            gp[:, i],
            viscous,
            -forces[i](x, y),
            tolerance=1e-9,
        )


@by_name
def test_energy_equation_holds_where_there_is_a_temperature(flow):
    x, y = inner_points(flow)
    if flow.T is None:
        assert "conductivity" not in flow.fluid
        return
    if flow.compressible:
        gas = flow.fluid["gas_constant"] * flow.rho(x, y) * flow.T(x, y)
        assert np.allclose(gas, flow.p(x, y), rtol=1e-13)  # equation of state, rounding
        gamma = flow.fluid["gamma"]
        u, v, rho = flow.u(x, y), flow.v(x, y), flow.rho(x, y)
        storage = (
            flow.rate("p", x, y) / (gamma - 1)
            + 0.5 * flow.rate("rho", x, y) * (u * u + v * v)
            + rho * (u * flow.rate("u", x, y) + v * flow.rate("v", x, y))
        )
        parts = [
            gradient(lambda a, b, w=w: (flow.total_energy(a, b) + flow.p(a, b)) * w(a, b), x, y)[:, i]
            for i, w in ((0, flow.u), (1, flow.v))
        ]
        assert_balanced(storage, *parts, tolerance=1e-12)
        return
    c, k, rho = flow.fluid["specific_heat"], flow.fluid["conductivity"], flow.fluid["density"]
    gt, gu, gv = (gradient(f, x, y) for f in (flow.T, flow.u, flow.v))
    heating = 0 * x
    if flow.viscous_heating:
        heating = flow.viscosity * (2 * gu[:, 0] ** 2 + 2 * gv[:, 1] ** 2 + (gu[:, 1] + gv[:, 0]) ** 2)
    source = flow.heat_source(x, y) if flow.heat_source else 0 * x
    convection = rho * c * (flow.u(x, y) * gt[:, 0] + flow.v(x, y) * gt[:, 1])
    conduction = -k * laplacian(flow.T, x, y, step_of(flow))
    assert_balanced(convection, conduction, -heating, -source, tolerance=1e-9)


@pytest.mark.parametrize("make", [exact.taylor_green, exact.lamb_oseen])
def test_rates_are_the_change_from_instant_to_instant(make):
    at, dt = 1.0, 1e-4
    early, now, late = (make(time=at + k * dt) for k in (-1, 0, 1))
    x, y = inner_points(now)
    for name in ("u", "v"):
        found = (getattr(late, name)(x, y) - getattr(early, name)(x, y)) / (2 * dt)
        # second order in dt: 1e-8 of the third derivative
        assert np.allclose(found, now.rate(name, x, y), atol=2e-7 * now.speed)


def test_a_carried_vortex_changes_as_if_moved():
    flow, dt = exact.isentropic_vortex(stream=(0.5, 0.3)), 1e-4
    x, y = inner_points(flow)
    for name in ("u", "v", "p", "T", "rho"):
        f = getattr(flow, name)
        moved = (f(x - 0.5 * dt, y - 0.3 * dt) - f(x + 0.5 * dt, y + 0.3 * dt)) / (2 * dt)
        assert np.allclose(moved, flow.rate(name, x, y), atol=1e-7)  # second order in dt


def test_kovasznay_box_has_the_published_fluxes():
    # Kovasznay 1948, box [−½,1]×[−½,¾]; printed to 10 digits, hence 1e-9
    flow = exact.kovasznay()
    side = fluxes(flow, box_contour(-0.5, -0.5, 1.0, 0.75))
    assert np.allclose(side["mass"], [0.0, 1.310711775, 0.1969759501, -1.507687725], atol=1e-9)
    total = {name: value.sum(axis=0) for name, value in side.items()}
    assert np.allclose(total["momentum"], [-1.744456987, -0.0302129732], atol=1e-9)
    assert np.allclose(total["force"], total["momentum"], atol=1e-12)  # quadrature is spectral
    assert total["moment"] == pytest.approx(0.3075425154, abs=1e-10)
    assert total["angular_momentum"] == pytest.approx(0.3075425154, abs=1e-10)
    assert total["kinetic_energy"] == pytest.approx(-2.758630979, abs=1e-9)
    assert total["work"] == pytest.approx(-1.853956980, abs=1e-9)
    t, w = np.polynomial.legendre.leggauss(40)
    x, y = np.meshgrid(0.25 + 0.75 * t, 0.125 + 0.625 * t)
    g = np.stack([gradient(flow.u, x, y), gradient(flow.v, x, y)], axis=-2)
    heat = np.sum(flow.stress(x, y) * g, axis=(-1, -2))
    assert 0.75 * 0.625 * w @ heat @ w == pytest.approx(0.904673999, abs=1e-9)


def test_kovasznay_exponent_is_the_published_one():
    flow = exact.kovasznay()
    decay = gradient(flow.p, np.array(0.0), np.array(0.0))[0]  # p = ½(1 − e^{2λx}), so −λ at x = 0
    assert -decay == pytest.approx(-0.9637405442, abs=1e-10)


def test_taylor_green_has_a_quarter_of_rho_as_mean_kinetic_energy():
    flow = exact.taylor_green(time=0.0, rho=1.3)
    a = 2 * np.pi * np.arange(16) / 16  # trapezoidal rule, exact for these waves
    x, y = np.meshgrid(a, a)
    assert np.mean(0.5 * 1.3 * (flow.u(x, y) ** 2 + flow.v(x, y) ** 2)) == pytest.approx(1.3 / 4, rel=1e-14)


def test_lamb_oseen_has_the_published_angular_momentum_and_torque():
    # Lamb, Hydrodynamics; Γ = 1, ν = .01, t = 1, R = .3; printed to 9 digits
    flow = exact.lamb_oseen()
    r, w = np.polynomial.legendre.leggauss(40)
    r, w = 0.15 + 0.15 * r, 0.15 * w
    swirl = flow.v(r, 0 * r)
    assert np.sum(w * 2 * np.pi * r**2 * swirl) == pytest.approx(0.0271079845, abs=1e-10)
    spin_down = np.sum(w * 2 * np.pi * r**2 * flow.rate("v", r, 0 * r))
    assert spin_down == pytest.approx(-0.0131490504, abs=1e-10)
    torque = fluxes(flow, circle_contour(0.0, 0.0, 0.3))["moment"][0]
    assert torque == pytest.approx(-0.0131490504, abs=1e-10)
    peak = 1.1209064 * np.sqrt(0.04)
    slope = gradient(flow.v, np.array(peak), np.array(0.0))[0]
    assert abs(slope) < 1e-6  # the radius of the peak is printed to 8 digits


def test_poiseuille_has_the_handbook_flow_rate_and_nusselt_number():
    # Schlichting & Gersten; Shah & London 1978: Nu on 2H is 140/17; polynomials, hence rounding
    height, mean, q = 0.7, 1.3, 2.0
    flow = exact.poiseuille(height, mean, q)
    mu, k = flow.fluid["viscosity"], flow.fluid["conductivity"]
    side = fluxes(flow, box_contour(0.0, 0.0, 1.0, height))
    g = -gradient(flow.p, np.array(0.0), np.array(0.0))[0]
    assert side["mass"][1] == pytest.approx(g * height**3 / (12 * mu), rel=1e-13)
    assert side["momentum"][1, 0] == pytest.approx(1.2 * mean**2 * height, rel=1e-13)
    assert -side["viscous"][0, 0] == pytest.approx(g * height / 2, rel=1e-13)  # drag on the wall
    assert side["kinetic_energy"][1] == pytest.approx(54 / 35 * 0.5 * mean**3 * height, rel=1e-13)
    bulk = side["heat"][3] / side["mass"][3] / flow.fluid["specific_heat"]
    wall = float(flow.T(np.array(0.0), np.array(0.0)))
    assert q * 2 * height / (k * (wall - bulk)) == pytest.approx(140 / 17, rel=1e-10)  # T is 300 ± 50
    assert side["conduction"][[0, 2]] == pytest.approx([-q, -q], rel=1e-12)


def test_couette_sends_its_wall_power_out_as_heat():
    # Schlichting & Gersten: heat out of the upper wall μU²/h, lower wall adiabatic
    flow = exact.couette(0.5, 3.0)
    side = fluxes(flow, box_contour(0.0, 0.0, 1.0, 0.5))
    power = flow.viscosity * 9.0 / 0.5
    assert side["work"][2] == pytest.approx(power, rel=1e-13)
    assert side["conduction"][[0, 2]] == pytest.approx([0.0, power], rel=1e-13, abs=1e-13)
    assert side["mass"][1] == pytest.approx(3.0 * 0.5 / 2, rel=1e-13)


def test_hiemenz_profile_has_the_published_slope_and_thickness():
    # Hiemenz 1911: f''(0) 1.2325877, δ* .6479005 √(ν/a), printed to 7 decimals
    f = exact.hiemenz_profile()
    assert f.deriv(2)(0.0) == pytest.approx(1.2325877, abs=6e-8)
    assert 8.0 - f(8.0) == pytest.approx(0.6479005, abs=6e-8)  # ∫(1 − f')


@pytest.mark.parametrize(
    ("degrees", "curvature", "share"), [(5.0, -3.5394156, 0.5865728), (-5.0, -1.1219891, 0.7254894)]
)
def test_jeffery_hamel_profiles_are_the_published_ones(degrees, curvature, share):
    # Jeffery 1915, Hamel 1916, Re = 50, printed to 7 decimals
    f = exact.jeffery_hamel_profile(50.0, np.radians(degrees))
    assert f.deriv(2)(0.0) == pytest.approx(curvature, abs=6e-8)
    assert f.integ()(1.0) - f.integ()(0.0) == pytest.approx(share, abs=6e-8)


def test_cylinder_lift_is_shared_by_pressure_and_momentum_as_published():
    # Batchelor; Milne-Thomson: no drag, L = −ρUΓ, pressure carries ½(1 + a²/R²) of it
    flow = exact.cylinder(radius=1.0, speed=1.5, circulation=-3.0)
    lift = 1.5 * 3.0
    for r in (1.0, 1.7, 3.0):
        got = {name: value[0] for name, value in fluxes(flow, circle_contour(0.0, 0.0, r)).items()}
        on_body = got["force"] - got["momentum"]
        assert np.allclose(on_body, [0.0, lift], atol=1e-12)  # trapezoidal rule on a circle: rounding
        assert got["force"][1] == pytest.approx(0.5 * (1 + 1 / r**2) * lift, rel=1e-12)


def test_source_sends_the_published_share_through_the_right_side():
    # Batchelor; Milne-Thomson: .3015489935 m, printed to 10 digits
    side = fluxes(exact.source(strength=2.0), box_contour(-1, -1, 1, 1))["mass"]
    assert side[1] == pytest.approx(2.0 * 0.3015489935, abs=2e-10)
    assert side.sum() == pytest.approx(2.0, rel=1e-13)
    centred = fluxes(exact.source(2.0, 0.0, 0.0), box_contour(-1, -1, 1, 1))["mass"]
    assert np.allclose(centred, 0.5, rtol=1e-12)


def test_source_in_a_stream_is_pulled_upstream_by_rho_u_m():
    total = fluxes(exact.source(2.0, stream=1.5), box_contour(-1, -1, 1, 1))
    on_source = (total["force"] - total["momentum"]).sum(axis=0)
    assert np.allclose(on_source, [-1.5 * 2.0, 0.0], atol=1e-11)  # 40 Gauss points a side


def test_rankine_half_body_has_the_published_shape_and_peak_speed():
    # Milne-Thomson; White: peak 1.2595905 U at 62.957°, Cp = 0 at 113.218°, from downstream
    flow = exact.rankine_half_body(1.0, 1.0)

    def on_body(degrees):  # streamline ψ = m/2: r = m(π − θ)/(2πU sin θ)
        angle = np.radians(degrees)
        r = (np.pi - angle) / (2 * np.pi * np.sin(angle))
        return r * np.cos(angle), r * np.sin(angle)

    speed = {d: float(np.hypot(flow.u(*on_body(d)), flow.v(*on_body(d)))) for d in (62.957, 90.0, 113.218)}
    assert speed[62.957] == pytest.approx(1.2595905, abs=1e-7)
    assert speed[113.218] == pytest.approx(1.0, abs=1e-5)  # the angle is printed to 1e-3 degrees
    assert on_body(90.0)[1] == pytest.approx(0.25, rel=1e-14)
    nose = np.array([-1 / (2 * np.pi)]), np.array([0.0])
    assert abs(flow.u(*nose)[0]) < 1e-14


def test_isentropic_vortex_has_the_published_core_mass_and_spin():
    # Shu 1998; Yee et al. 1999: printed to 7 decimals
    flow = exact.isentropic_vortex()
    zero = np.array(0.0)
    assert float(flow.rho(zero, zero)) == pytest.approx(0.4938073, abs=6e-8)
    assert float(flow.p(zero, zero)) == pytest.approx(0.3723750, abs=6e-8)
    t, w = np.polynomial.legendre.leggauss(60)

    def ring_integral(radius, f):
        r = 0.5 * radius * (1 + t)
        return np.sum(0.5 * radius * w * 2 * np.pi * r * f(r))

    assert ring_integral(1.0, lambda r: flow.rho(r, 0 * r)) == pytest.approx(2.0699899, abs=6e-8)
    spin = ring_integral(5.0, lambda r: flow.rho(r, 0 * r) * r * flow.v(r, 0 * r))
    assert spin == pytest.approx(15.4333496, abs=6e-8)


@pytest.mark.parametrize(
    ("mach", "turn", "beta", "p_ratio", "mach_after", "p0_ratio"),
    [
        (2.0, 10.0, 39.31393, 1.7065786, 1.6405222, 0.9846440),
        (3.0, 20.0, 37.76363, 3.7712575, 1.9941317, 0.7960183),
    ],
)
def test_oblique_shock_has_the_tabulated_values(mach, turn, beta, p_ratio, mach_after, p0_ratio):
    # NACA Report 1135 (1953): printed to 5 and 7 decimals
    flow = exact.oblique_shock(mach, turn)
    assert np.degrees(flow.jump[2]) == pytest.approx(beta, abs=6e-6)
    x, y = np.array([0.1, 0.9]), np.array([0.9, 0.1])  # ahead, behind
    u, v, p, t, rho = (f(x, y) for f in (flow.u, flow.v, flow.p, flow.T, flow.rho))
    m = np.hypot(u, v) / np.sqrt(t)  # the sound speed is 1 where T is
    assert p[1] / p[0] == pytest.approx(p_ratio, abs=6e-8)
    assert m[1] == pytest.approx(mach_after, abs=6e-8)
    total = p * (1 + 0.2 * m**2) ** 3.5
    assert total[1] / total[0] == pytest.approx(p0_ratio, abs=6e-8)
    assert np.degrees(np.arctan2(v[1], u[1])) == pytest.approx(turn, abs=1e-9)
    normal = np.array([np.sin(flow.jump[2]), -np.cos(flow.jump[2])])
    through = rho * (u * normal[0] + v * normal[1])
    enthalpy = (flow.total_energy(x, y) + p) / rho
    assert through[1] == pytest.approx(through[0], rel=1e-12)
    assert enthalpy[1] == pytest.approx(enthalpy[0], rel=1e-12)


def test_suction_layer_balances_wall_drag_by_the_momentum_drawn_in():
    # Schlichting & Gersten: τ_w = −ρ v0 U, whatever the viscosity
    flow = exact.suction_layer()
    side = fluxes(flow, box_contour(0.0, 0.0, 1.0, 30 * flow.feature))
    assert -side["viscous"][0, 0] == pytest.approx(1e-3, rel=1e-12)
    # left and right sides have equal momentum; e^-30 of it is missing at the top
    assert side["momentum"][2, 0] == pytest.approx(-1e-3, rel=1e-10)
    assert flow.domain[2] / flow.feature == pytest.approx(2500.0)


def test_a_box_in_a_uniform_stream_closes_to_rounding():
    total = fluxes(exact.uniform(), box_contour(0.1, 0.2, 0.9, 0.6))
    for name in ("mass", "momentum", "force", "heat"):
        scale = np.max(np.abs(total[name]))
        assert np.all(np.abs(total[name].sum(axis=0)) <= 1e-14 * scale)
