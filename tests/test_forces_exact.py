"""Forces against closed-form potential flows, Stokes flow and shear: every route, every contour."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import exact
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import flow_on

import fvcheck
from fvcheck import ControlSurface, Flow, Fluid

ROOT = Path(__file__).parent.parent
UNIT = {"velocity": 1.0, "length": 1.0, "density": 1.0}

MU, INCIDENCE = -0.1 + 0.1j, np.radians(5.0)


def joukowski_flow(count=160, outer=5.0):
    """z = ζ + 1/ζ about the circle through ζ = 1 with centre MU; a node lies on the trailing edge."""
    radius = abs(1.0 - MU)
    beta = np.arcsin(MU.imag / radius)
    cells = tm.annulus(radius, outer * radius, 2 * np.pi * radius / count)
    zeta = MU + (cells.points[:, 0] + 1j * cells.points[:, 1]) * (1.0 - MU) / radius
    # At the trailing edge dz/dζ = 0 and the velocity is the limit from the fluid.
    away = np.where(abs(zeta - 1.0) < 1e-9, 1.0 + 1e-6, zeta)
    gamma = -4 * np.pi * radius * np.sin(INCIDENCE + beta)
    s = away - MU
    dw = np.exp(-1j * INCIDENCE) - radius**2 * np.exp(1j * INCIDENCE) / s**2 + gamma / (2j * np.pi * s)
    velocity = dw / (1.0 - 1.0 / away**2)
    z = zeta + 1.0 / zeta
    u = np.column_stack([velocity.real, -velocity.imag])
    points = np.column_stack([z.real, z.imag])
    data = {"U": u, "p": -0.5 * np.sum(u**2, axis=1)}
    fluid = Fluid(density=1.0, viscosity=0.0)
    return Flow.from_arrays(points, (cells.offsets, cells.nodes), point_data=data, fluid=fluid)


@pytest.fixture(scope="module")
def aerofoil():
    return joukowski_flow()


@pytest.fixture(scope="module")
def found(aerofoil):
    body = aerofoil.mesh.bodies[0]
    return fvcheck.forces(
        aerofoil,
        body,
        methods=["control-surface", "band", "circulation"],
        distances=[0.3, 0.6, 1.2, 2.0],
        direction=(np.cos(INCIDENCE), np.sin(INCIDENCE)),
        reference={"velocity": 1.0, "length": 4.0336042, "density": 1.0},
    )


def test_the_joukowski_section_has_its_lift_force_and_moment_on_four_contours(found):
    # Joukowski 1910; Blasius 1910: L 2.4566097, F (-.2141076, 2.4472615), M_O -1.3143791 (recomputed)
    contours = found.of("control-surface")
    assert len(contours) == 4
    for e in (*contours, found["band"]):
        assert e.lift == pytest.approx(2.4566097, rel=1e-3)  # the 0.1 %
        assert abs(e.drag) <= e.band("drag")
        assert e.force == pytest.approx((-0.2141076, 2.4472615), abs=2.5e-3)
        assert e.moment == pytest.approx(-1.3143791, rel=2e-3)
        assert e.coefficients["lift"] == pytest.approx(2.4566097 / (0.5 * 4.0336042), rel=1e-3)


def test_the_circulation_gives_the_lift_of_the_section_and_says_what_it_assumes(found):
    e = found["circulation"]
    assert e.lift == pytest.approx(2.4566097, rel=1e-3)
    assert e.drag is None and e.moment is None
    assert "steady" in e.assumptions and "uniform" in e.assumptions


CYLINDER = exact.cylinder()  # radius 1, speed 1, Γ = -3: lift 3, drag 0


@pytest.mark.parametrize("where", ["point", "average"])
def test_a_cylinder_with_circulation_has_lift_and_no_drag_by_every_route(where):
    # Batchelor; Milne-Thomson: D = 0, L = -ρUΓ; no moment about its centre
    cells = tm.with_hole(CYLINDER.domain, CYLINDER.hole, 0.3, 0.1)
    flow = flow_on(CYLINDER, cells, where)
    found = fvcheck.forces(
        flow,
        methods=["body-surface", "control-surface", "band", "circulation"],
        distances=[0.4, 0.8, 1.3, 2.0],
        reference={"velocity": 1.0, "length": 2.0, "density": 1.0},
    )
    for e in found.estimates:
        # cells on the chords of a polygon of 63 sides: a body 0.1 % thinner, and pressure read on chords
        near = e.method == "body-surface"
        assert e.lift == pytest.approx(3.0, rel=1e-2 if near else 1e-3), e.label
        if e.drag is not None:
            assert abs(e.drag) <= max(e.band("drag"), 1e-3), e.label
            assert abs(e.moment) <= max(e.band("moment"), 1e-3), e.label
    assert not [hint for hint in found.hints if hint.code == "routes-disagree"]


def test_pressure_carries_the_share_of_lift_that_theory_says():
    # on r = R the pressure carries ½(1 + a²/R²) L, momentum the rest (Batchelor; recomputed)
    flow = flow_on(CYLINDER, tm.with_hole(CYLINDER.domain, CYLINDER.hole, 0.3, 0.1))
    circle = ControlSurface.circle(0.0, 0.0, 2.0)
    e = fvcheck.forces(flow, methods="control-surface", surfaces=[circle])["control-surface"]
    assert e.pressure[1] == pytest.approx(0.5 * (1 + 1 / 4) * 3.0, rel=1e-3)
    assert e.parts["momentum"][1] == pytest.approx(0.5 * (1 - 1 / 4) * 3.0, rel=3e-3)
    assert np.sum([e.parts[k] for k in e.parts], axis=0) == pytest.approx(e.force, abs=1e-12)


def test_moving_the_point_of_the_moment_adds_the_force_times_its_arm(aerofoil):
    body = aerofoil.mesh.bodies[0]
    for method in ("body-surface", "control-surface", "band"):
        one, two = (
            fvcheck.forces(aerofoil, body, methods=method, distances=[1.0], about=about)[method]
            for about in ((0.0, 0.0), (0.7, -0.4))
        )
        fx, fy = one.force
        # a sum over the same samples: to rounding
        assert two.moment == pytest.approx(one.moment - (0.7 * fy + 0.4 * fx), abs=1e-9)


def test_a_uniform_pressure_has_no_force_by_the_band_or_a_control_surface():
    cells = tm.with_hole((-2.0, -2.0, 2.0, 2.0), (0.0, 0.0, 0.5), 0.3, 0.1)
    n = len(cells.points)
    data = {"U": np.zeros((n, 2)), "p": np.full(n, 1e5)}
    fluid = Fluid(density=1.0, viscosity=1e-3)
    flow = Flow.from_arrays(cells.points, (cells.offsets, cells.nodes), point_data=data, fluid=fluid)
    for e in fvcheck.forces(flow).estimates:
        assert np.abs(e.force).max() < 1e-8  # rounding of 1e5 over some hundred pieces
        assert np.abs(e.force).max() <= max(e.sampling_band)


def test_weight_counts_in_all_routes_as_buoyancy():
    # Archimedes: still water under gravity pushes a body up by the weight of its area
    cells = tm.with_hole((-2.0, -2.0, 2.0, 2.0), (0.3, 0.1, 0.5), 0.3, 0.1)
    y = cells.points[:, 1]
    data = {"U": np.zeros((len(y), 2)), "p": -9.81 * 2.0 * y}
    fluid = Fluid(density=2.0, viscosity=1e-3, gravity=(0.0, -9.81))
    flow = Flow.from_arrays(cells.points, (cells.offsets, cells.nodes), point_data=data, fluid=fluid)
    edges = flow.mesh.points[flow.mesh.patch_edges(flow.mesh.bodies[0])]
    a, b = edges[:, 0], edges[:, 1]
    area = abs(0.5 * float(np.sum(a[:, 0] * b[:, 1] - a[:, 1] * b[:, 0])))
    for e in fvcheck.forces(flow, about=(0.3, 0.1)).estimates:
        # a linear field: exact to rounding
        assert e.force == pytest.approx((0.0, 9.81 * 2.0 * area), abs=1e-9), e.label
        assert e.moment == pytest.approx(0.0, abs=1e-2), e.label  # the polygon's centre is not quite (.3, .1)


def test_a_wall_of_a_couette_flow_feels_friction_by_every_route():
    # Schlichting & Gersten: τ = μU/h; the lower wall of [0, 3] × [0, 1], both ends and the lid beside it
    points = tm.triangles((0.0, 0.0, 3.0, 1.0), 0.15, 3)
    y = points.points[:, 1]
    data = {"U": np.column_stack([2.0 * y, 0 * y]), "p": 0 * y}
    fluid = Fluid(density=1.0, viscosity=0.1)
    flow = Flow.from_arrays(points.points, (points.offsets, points.nodes), point_data=data, fluid=fluid)
    found = fvcheck.forces(flow, "bottom")
    for e in found.estimates:
        assert e.force == pytest.approx((0.1 * 2.0 * 3.0, 0.0), abs=1e-9), e.label  # linear: exact
    codes = {hint.code for hint in found.hints}
    assert {"open-body", "other-patch-inside"} <= codes


def test_the_drag_of_a_stokes_sphere_is_that_of_stokes_by_every_route():
    # 6πμRU, a third of it pressure (Stokes 1851; recomputed); the field leaves inertia out, so ρ is tiny here
    cells = tm.mapped(
        tm.quads((0.0, 0.0, 1.0, 1.0), 0.03, 2, jitter=0.1),
        lambda p: ((1 + 3 * p[:, 0]) * np.stack([np.cos(np.pi * p[:, 1]), np.sin(np.pi * p[:, 1])])).T,
    )
    sphere = flow_on(exact.stokes_sphere(), cells, symmetry="axisymmetric", axis="x")
    mesh = sphere.mesh
    body = min(
        mesh.boundary.names,
        key=lambda name: np.hypot(*mesh.points[mesh.patch_edges(name)].reshape(-1, 2).T).max(),
    )
    found = fvcheck.forces(sphere, body, distances=[0.5, 1.0], band_between=(0.3, 1.5), reference=UNIT)
    for e in found.estimates:
        near = e.method == "body-surface"
        # one-sided slopes on chords of 5 degrees at the body; 30 cells over 3 radii elsewhere
        assert e.drag == pytest.approx(6 * np.pi, rel=4e-2 if near else 2e-3), e.label
        assert e.force[1] == 0.0
    assert found["body-surface"].pressure[0] == pytest.approx(2 * np.pi, rel=5e-3)


def test_the_torque_between_cylinders_is_that_of_couette_by_every_route():
    # 4πμΩ R1²R2²/(R2² − R1²) = 16.755161 for R 1, 2, Ω 1, 0, μ 1 (White; recomputed); the fluid holds back
    flow = flow_on(exact.cylindrical_couette(), tm.annulus(1.0, 2.0, 0.1, "triangles"))
    found = fvcheck.forces(flow, "body-1")
    for e in found.estimates:
        near = e.method == "body-surface"
        # 63 chords: a body of 0.17 % less radius², slopes on them one-sided
        assert e.moment == pytest.approx(-16.755161, rel=2e-2 if near else 1e-3), e.label
        assert abs(e.moment + 16.755161) <= e.band("moment"), e.label


def wake_profile(deficit, pressure=0.0, width=0.3, ripple=0.0):
    """A parallel wake u = 1 − a exp(−y²/b²) with an all but uniform pressure, behind a body at the left."""
    cells = tm.quads((0.0, -3.0, 1.0, 3.0), 0.05, 1, jitter=0.1)
    y = cells.points[:, 1]
    u = 1.0 - deficit * np.exp(-((y / width) ** 2))
    data = {"U": np.column_stack([u, 0 * u]), "p": pressure + ripple * np.cos(2.5 * y)}
    fluid = Fluid(density=1.0, viscosity=0.0)
    return Flow.from_arrays(cells.points, (cells.offsets, cells.nodes), point_data=data, fluid=fluid)


@pytest.mark.parametrize("formula", ["momentum", "betz", "jones"])
@pytest.mark.parametrize("pressure", [0.0, 7.0])
def test_a_wake_of_stream_pressure_has_its_momentum_deficit_as_drag(formula, pressure):
    # where p = p∞ all three are ρ ∫ u (U − u) dy (Jones 1936, Betz 1925), here √π b (a − a²/√2)
    flow = wake_profile(0.4, pressure)
    line = ControlSurface.line([(0.5, 2.5), (0.5, -2.5)])
    e = fvcheck.forces(flow, "left", methods="wake", wake_line=line, wake_formula=formula, reference=UNIT)[
        "wake"
    ]
    drag = np.sqrt(np.pi) * 0.3 * (0.4 - 0.16 / np.sqrt(2))
    assert e.drag == pytest.approx(drag, rel=1e-3)
    assert abs(e.drag - drag) <= e.band("drag")
    assert e.lift is None and e.assumptions


@pytest.mark.parametrize("formula", ["momentum", "betz", "jones"])
def test_a_wake_under_a_pressure_of_its_own_has_the_value_of_each_formula(formula):
    # Betz 1925, Jones 1936 as in the module's text, here by an adaptive quadrature of the profile itself
    from scipy.integrate import quad

    def u(y):
        return 1.0 - 0.4 * np.exp(-((y / 0.3) ** 2))

    def p(y):
        return -0.1 * np.exp(-((y / 0.5) ** 2))

    def total(y):
        return p(y) + 0.5 * u(y) ** 2

    def density(y):
        if formula == "momentum":
            return u(y) * (1.0 - u(y)) - p(y)
        if formula == "betz":
            lost = 0.5 - total(y)
            outer = np.sqrt(u(y) ** 2 + 2 * lost)
            return lost + 0.5 * (outer - u(y)) * (outer + u(y) - 2.0)
        g = 2 * total(y)
        return np.sqrt(g - 2 * p(y)) * (1.0 - np.sqrt(g))

    cells = tm.quads((0.0, -3.0, 1.0, 3.0), 0.05, 1, jitter=0.1)
    y = cells.points[:, 1]
    data = {"U": np.column_stack([u(y), 0 * y]), "p": p(y)}
    fluid = Fluid(density=1.0, viscosity=0.0)
    flow = Flow.from_arrays(cells.points, (cells.offsets, cells.nodes), point_data=data, fluid=fluid)
    line = ControlSurface.line([(0.5, 2.5), (0.5, -2.5)])
    found = fvcheck.forces(flow, "left", methods="wake", wake_line=line, wake_formula=formula, reference=UNIT)
    # six cells to the half-width of the wake
    assert found["wake"].drag == pytest.approx(quad(density, -2.5, 2.5, limit=200)[0], rel=1e-3)


@pytest.mark.parametrize("method", ["wake", "circulation"])
def test_few_digits_widen_the_bands_of_wake_and_circulation(method):
    # pressures about 1e3 in single precision are known to 6e-5: then digits, not the field, make the band
    bands = {}
    for kind in (np.float64, np.float32):
        if method == "wake":
            flow = wake_profile(0.4, 1e3, ripple=1e-3)
            settings = {"wake_line": ControlSurface.line([(0.5, 2.5), (0.5, -2.5)])}
        else:
            flow = flow_on(CYLINDER, tm.with_hole(CYLINDER.domain, CYLINDER.hole, 0.3, 0.1))
            settings = {"distances": [1.3]}
        coarse = {
            role: replace(field, values=field.values.astype(kind)) for role, field in flow.fields.items()
        }
        body = "left" if method == "wake" else flow.mesh.bodies[0]
        found = fvcheck.forces(
            replace(flow, fields=coarse), body, methods=method, reference=UNIT | {"density": 1.0}, **settings
        )
        bands[kind] = found[method].band("drag" if method == "wake" else "lift")
    assert bands[np.float32] > bands[np.float64]
    if method == "wake":
        # three standard deviations of 6e-5/√3 at random on 100 pieces of 0.05: 5e-5; within a factor of five
        assert 1e-5 < bands[np.float32] - bands[np.float64] < 2.5e-4


def test_a_line_that_ends_within_the_wake_is_refused_with_the_reason():
    flow = wake_profile(0.4)
    line = ControlSurface.line([(0.5, 0.1), (0.5, -2.5)])
    found = fvcheck.forces(flow, "left", methods="wake", wake_line=line, reference=UNIT)
    assert found["wake"].drag is None and "ends" in found["wake"].refused
    assert "route-refused" in {hint.code for hint in found.hints}


def test_the_momentum_deficit_of_a_cylinder_in_potential_flow_vanishes_as_the_line_grows():
    # D = 0; a line of half-length s two radii behind, with pressure and momentum, leaves O(1/s)
    flow = flow_on(exact.cylinder(circulation=0.0), tm.with_hole((-4, -4, 4, 4), (0, 0, 1), 0.2, 0.1))
    line = ControlSurface.line([(3.0, -3.9), (3.0, 3.9)])
    e = fvcheck.forces(flow, methods="wake", wake_line=line, reference=UNIT)["wake"]
    jones = fvcheck.forces(flow, methods="wake", wake_line=line, wake_formula="jones", reference=UNIT)["wake"]
    assert abs(e.drag) < 0.3
    assert abs(jones.drag) < 1e-2  # the total pressure is the same everywhere: nothing but sampling
