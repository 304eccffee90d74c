"""Axisymmetric and swirling flows against closed forms (scripts/exact names the papers)."""

from __future__ import annotations

from dataclasses import replace

import exact
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import flow_on

import fvcheck
from fvcheck import ControlSurface, Fluid

BOX = ControlSurface.box(0.0, 0.0, 1.0, 1.0, name="can")


def revolved(flow, h, where="point", **settings):
    cells = tm.mixed(flow.domain, h, seed=3)
    return flow_on(flow, cells, where=where, symmetry="axisymmetric", axis="x", **settings)


def half_circle(radius, count=400):
    """The meridian of a sphere about the origin, counter-clockwise: its normal is outward."""
    t = np.linspace(0.0, np.pi, count)
    return ControlSurface.line(radius * np.column_stack([np.cos(t), np.sin(t)]), name="sphere")


def exchanged(flow):
    """The same flow with y as the axis: r, axial; the third component turns with the axes."""
    other = replace(
        flow,
        domain=tuple(flow.domain[i] for i in (1, 0, 3, 2)),
        u=lambda x, y: flow.v(y, x),
        v=lambda x, y: flow.u(y, x),
        p=lambda x, y: flow.p(y, x),
    )
    return other if flow.w is None else replace(other, w=lambda x, y: -flow.w(y, x))


# --- pipe flow ---------------------------------------------------------------------------------


def test_a_pipe_has_the_flow_rate_and_factors_of_the_parabola():
    # Hagen-Poiseuille: Q = πR⁴G/8μ, momentum factor 4/3, energy factor 2 (check values, "verified").
    pipe = exact.hagen_poiseuille()
    flow = revolved(pipe, 0.15)
    ledger = fvcheck.balance(flow, ControlSurface.line([(1.3, 0.0), (1.3, 1.0)], name="station"))
    port = ledger.ports[0]
    # The parabola is a polynomial of degree two: exact to rounding.
    assert port.area == pytest.approx(np.pi, rel=1e-12)
    assert port.mass_flow == pytest.approx(1.3 * np.pi / (8 * 0.1), rel=1e-10)
    assert port.momentum_factor == pytest.approx(4 / 3, rel=1e-10)
    assert port.kinetic_energy_factor == pytest.approx(2.0, rel=1e-10)
    assert ledger["mass"].unit == "kg/s"


def test_the_pressure_drop_of_a_pipe_is_the_wall_friction_and_is_dissipated():
    pipe = exact.hagen_poiseuille()
    flow = revolved(pipe, 0.15)
    ledger = fvcheck.balance(flow, ControlSurface.domain())
    wall = 2 * np.pi * 3.0 * 0.5  # 2πR L times τ_w = GR/2
    walls = [v for v in ledger["momentum-x"].patches.values() if v == pytest.approx(wall, rel=1e-9)]
    assert len(walls) == 1
    power = np.pi / (8 * 0.1) * 3.0  # GQL
    assert ledger["kinetic-energy"].source == pytest.approx(-power, rel=1e-9)
    for row in ledger.rows:
        assert row.verdict == "closed"
        assert abs(row.imbalance) < 1e-9, row.label


def test_averages_over_rings_are_read_as_such():
    # A finite-volume cell of an axisymmetric run holds ∫qr dA / ∫r dA: the pipe stays exact.
    pipe = exact.hagen_poiseuille()
    cells = tm.mixed(pipe.domain, 0.15, seed=3)
    volume = tm.cell_integrals(lambda x, y: y, cells)

    def average(function):
        return tm.cell_integrals(lambda x, y: y * function(x, y), cells) / volume

    flow = fvcheck.Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        cell_data={"U": np.column_stack([average(pipe.u), average(pipe.v)]), "p": average(pipe.p)},
        fluid=Fluid(**pipe.fluid),
        symmetry="axisymmetric",
        axis="x",
    )
    for row in fvcheck.balance(flow, ControlSurface.box(0.6, 0.0, 2.2, 0.7)).rows:
        assert abs(row.imbalance) < 1e-9 * row.scale, row.label


# --- vortices ----------------------------------------------------------------------------------


@pytest.mark.parametrize("turned", [False, True], ids=["x axis", "y axis"])
def test_the_angular_momentum_of_the_burgers_vortex_is_met(turned):
    # a = Γ = R = h = 1, ν = .1: side −.4589575, top +.3164170, viscous −.1425405 (Burgers 1948; "verified").
    vortex = exact.burgers_vortex()
    if turned:
        cells = tm.mixed(exchanged(vortex).domain, 0.06, seed=3)
        flow = flow_on(exchanged(vortex), cells, symmetry="axisymmetric", axis="y")
        side, top = [(1, 0), (1, 1)], [(1, 1), (0, 1)]
        other = {"momentum-x": "momentum-y", "momentum-y": "momentum-x"}
    else:
        flow = revolved(vortex, 0.06)
        side, top = [(1, 1), (0, 1)], [(1, 0), (1, 1)]
        other = {}
    law = ["angular-momentum"]
    for line, value in ((side, -0.4589575), (top, 0.3164170)):
        row = fvcheck.balance(flow, ControlSurface.line(line), laws=law)["angular-momentum"]
        # 16 cells across: degree 3 leaves 1e-5 of the side's flux.
        assert row.parts["convective"] == pytest.approx(value, abs=2e-5)
    ledger = fvcheck.balance(flow, BOX)  # swirl: angular momentum is among the default laws
    row = ledger["angular-momentum"]
    # The slope of the swirl converges an order slower than the swirl.
    assert row.parts["viscous"] == pytest.approx(0.1425405, abs=2e-4)
    assert row.parts["convective"] == pytest.approx(-0.1425405, abs=2e-5)
    for row in ledger.rows:
        assert row.verdict == "closed", row.label
        assert abs(row.imbalance) <= row.sampling_band, other.get(row.label, row.label)


@pytest.mark.parametrize("turned", [False, True], ids=["x axis", "y axis"])
@pytest.mark.parametrize("rate", [1.5, -4.0])
def test_a_swirl_seen_from_a_turning_frame_has_the_ledger_of_one_at_rest(turned, rate):
    # The Burgers vortex less Ωr of swirl, with Coriolis and centrifugal force (Batchelor, section 3.2).
    vortex = exchanged(exact.burgers_vortex()) if turned else exact.burgers_vortex()
    axis = 1 if turned else 0
    cells = tm.mixed(vortex.domain, 0.06, seed=3)
    fields = {"axis": "xy"[axis], "symmetry": "axisymmetric"}
    still = flow_on(vortex, cells, **fields)
    velocity = still.fields["velocity"]
    values = velocity.values.copy()
    values[:, 2] -= (-1 if turned else 1) * rate * still.mesh.points[:, 1 - axis]
    seen = {**still.fields, "velocity": replace(velocity, values=values)}
    flow = replace(still, fields=seen, fluid=Fluid(**vortex.fluid, frame_rate=rate))
    box = ControlSurface.box(0.1, 0.1, 1.0, 1.0)
    here, there = (fvcheck.balance(f, box) for f in (still, flow))
    # friction does not see a solid rotation
    parts = [ledger["angular-momentum"].parts["viscous"] for ledger in (here, there)]
    assert parts[0] == pytest.approx(parts[1], rel=1e-9)
    for row in there.rows:
        assert row.verdict == "closed", row.label
        assert abs(row.imbalance) <= row.resolution_band, row.label
    # without its forces the turning frame is found out
    bare = fvcheck.balance(replace(flow, fluid=Fluid(**vortex.fluid)), box)
    assert bare["angular-momentum"].verdict == "open"
    assert bare["momentum-y" if axis == 0 else "momentum-x"].verdict == "open"


def test_the_torque_between_cylinders_is_met_at_every_radius():
    # 4πμΩ R₁²R₂²/(R₂² − R₁²) = 16.755161 for radii 1, 2 and Ω = μ = 1 (check values, "verified").
    couette = exact.cylindrical_couette()
    flow = flow_on(couette, tm.annulus(1.0, 2.0, 0.05, "triangles", 1))
    for radius in (1.2, 1.5, 1.8):
        ledger = fvcheck.balance(flow, ControlSurface.circle(0, 0, radius), laws=["angular-momentum"])
        row = ledger["angular-momentum"]
        # Degree 3 on some 15 cells across the gap.
        assert row.flux == pytest.approx(16.755161, rel=1e-3)
        # At the inner wall fits are one-sided, and chords stand for the circle.
        assert row.boundary == pytest.approx(-16.755161, rel=2e-2)
        assert row.verdict == "closed"
        assert row.unit == "N m/m"


def test_the_moment_about_another_point_differs_by_the_moment_of_the_force():
    flow = flow_on(exact.kovasznay(), tm.mixed((-0.5, -0.5, 1.0, 1.5), 0.08, 0))
    box = ControlSurface.box(-0.3, -0.3, 0.8, 0.7)
    laws = ["momentum", "angular-momentum"]
    here = fvcheck.balance(flow, box, laws=laws)
    there = fvcheck.balance(flow, box, laws=laws, about=(2.0, -3.0))
    shift = 2.0 * here["momentum-y"].flux + 3.0 * here["momentum-x"].flux
    moved = here["angular-momentum"].flux - there["angular-momentum"].flux
    assert moved == pytest.approx(shift, abs=1e-12)  # by algebra: rounding only


def test_the_moment_of_the_kovasznay_box_is_met():
    # Box [−½,1] × [−½,¾]: moment .3075425154 about the origin (check values, "verified").
    flow = flow_on(exact.kovasznay(), tm.triangles((-0.7, -0.7, 1.2, 1.0), 0.04, 0))
    ledger = fvcheck.balance(flow, ControlSurface.box(-0.5, -0.5, 1.0, 0.75), laws=["angular-momentum"])
    row = ledger["angular-momentum"]
    assert row.verdict == "closed"
    # Four cells in the decay length of the field: degree 3 leaves some 1e-3.
    assert row.parts["convective"] == pytest.approx(0.3075425154, rel=3e-3)
    assert -row.parts["pressure"] - row.parts["viscous"] == pytest.approx(0.3075425154, rel=3e-3)


def test_lamb_oseen_loses_the_angular_momentum_that_friction_carries_out():
    # R = .3: dL/dt = −.0131490504, equal to the viscous torque (check values, "verified").
    vortex = exact.lamb_oseen()
    cells = tm.triangles(vortex.domain, 0.03, seed=1)
    x, y = cells.points.T
    rate = np.column_stack([vortex.rates["u"](x, y), vortex.rates["v"](x, y)])
    flow = fvcheck.Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        point_data={"U": vortex.velocity(x, y), "p": vortex.p(x, y), "dUdt": rate},
        fields={"rate:velocity": "dUdt"},
        fluid=Fluid(**vortex.fluid),
    )
    row = fvcheck.balance(flow, ControlSurface.circle(0, 0, 0.3), laws=["angular-momentum"])[
        "angular-momentum"
    ]
    assert row.storage == pytest.approx(-0.0131490504, rel=1e-3)
    assert row.parts["viscous"] == pytest.approx(0.0131490504, rel=2e-3)
    assert row.verdict == "closed"


# --- jets and spheres --------------------------------------------------------------------------


def test_the_momentum_of_a_landau_jet_passes_every_sphere():
    # Axial momentum 64.811426 ρν² through any sphere about the source, A = 1.5 (Landau 1944; "verified").
    assert exact.landau_force(1.5) == pytest.approx(64.811426, rel=1e-7)
    flow = revolved(exact.landau_jet(), 0.05)
    for radius in (1.0, 1.4, 1.8):
        row = fvcheck.balance(flow, half_circle(radius), laws=["momentum"])["momentum-x"]
        # 20 to 36 cells to the source, where the field grows as 1/R.
        assert row.flux == pytest.approx(64.811426, rel=1e-3)
        assert abs(row.flux - 64.811426) <= row.sampling_band


def test_a_box_beside_the_source_of_the_jet_closes():
    flow = revolved(exact.landau_jet(), 0.05)
    ledger = fvcheck.balance(flow, ControlSurface.box(0.8, 0.0, 1.7, 1.2), laws=["mass", "momentum"])
    for row in ledger.rows:
        assert row.verdict == "closed", row.label


@pytest.fixture(scope="module")
def sphere():
    cells = tm.mapped(
        tm.quads((0.0, 0.0, 1.0, 1.0), 0.03, 2, jitter=0.1),
        lambda p: ((1 + 3 * p[:, 0]) * np.stack([np.cos(np.pi * p[:, 1]), np.sin(np.pi * p[:, 1])])).T,
    )
    return flow_on(exact.stokes_sphere(), cells, symmetry="axisymmetric", axis="x")


@pytest.mark.parametrize("radius", [1.5, 2.0, 3.0])
def test_the_force_on_a_stokes_sphere_is_the_same_at_every_radius(sphere, radius):
    # 6πμRU in all at any radius (Stokes 1851; "verified"); inertia is left out of the field.
    row = fvcheck.balance(sphere, half_circle(radius), laws=["momentum"])["momentum-x"]
    # Polygon of 400 sides and 30 cells from 1 to 4 radii.
    assert -row.flux == pytest.approx(6 * np.pi, rel=1e-3)


def test_a_third_of_the_force_on_a_stokes_sphere_is_pressure(sphere):
    patch = min(
        sphere.mesh.boundary.names,
        key=lambda name: np.hypot(*sphere.mesh.points[sphere.mesh.patch_edges(name)].reshape(-1, 2).T).max(),
    )
    row = fvcheck.balance(sphere, ControlSurface.patch(patch), laws=["momentum"])["momentum-x"]
    # The patch's normal points out of the fluid, into the sphere; chords of 3° and one-sided slopes.
    assert row.parts["pressure"] == pytest.approx(2 * np.pi, rel=5e-3)
    assert row.parts["viscous"] == pytest.approx(4 * np.pi, rel=4e-2)


def test_a_surface_around_a_body_on_the_axis_holds_its_force(sphere):
    patch = min(
        sphere.mesh.boundary.names,
        key=lambda name: np.hypot(*sphere.mesh.points[sphere.mesh.patch_edges(name)].reshape(-1, 2).T).max(),
    )
    row = fvcheck.balance(sphere, ControlSurface.around(patch, 0.6), laws=["momentum"])["momentum-x"]
    assert -row.flux == pytest.approx(6 * np.pi, rel=2e-3)
    assert row.patches[patch] == pytest.approx(6 * np.pi, rel=3e-2)  # as for the patch itself


# --- gas and heat ------------------------------------------------------------------------------


@pytest.mark.parametrize("where", ["point", "average"])
def test_gas_from_a_point_source_keeps_mass_momentum_energy_and_entropy(where):
    source = exact.spherical_source()
    laws = ["mass", "momentum", "total-energy", "entropy"]
    flow = revolved(source, 0.1, where=where)
    ledger = fvcheck.balance(flow, ControlSurface.box(1.5, 0.0, 2.7, 1.2), laws=laws)
    for row in ledger.rows:
        assert row.verdict == "closed", row.label
    through = fvcheck.balance(flow, _arc(2.2, 0.5), laws=["mass"])["mass"]
    # ρ*u* times the share of the sphere: 2π(1 − cos .5) √γ at A* = 1.
    assert through.flux == pytest.approx(2 * np.pi * (1 - np.cos(0.5)) * np.sqrt(1.4), rel=1e-3)


def _arc(radius, angle):
    t = np.linspace(0.0, angle, 200)
    return ControlSurface.line(radius * np.column_stack([np.cos(t), np.sin(t)]))


def test_an_evenly_heated_pipe_has_its_nusselt_number():
    # 48/11 = 4.363636 on the diameter (Shah & London 1978; "verified").
    pipe = exact.heated_pipe()
    flow = revolved(pipe, 0.08)
    ledger = fvcheck.balance(flow, ControlSurface.box(1.0, 0.5, 2.0, 3.0), laws=["heat"])
    row = ledger["heat"]
    flux = -row.boundary / (2 * np.pi)  # wall of unit length
    assert flux == pytest.approx(2.0, rel=1e-3)
    assert row.verdict == "closed"
    station = fvcheck.balance(flow, ControlSurface.line([(1.5, 0.0), (1.5, 1.0)]), laws=["mass"])
    wall = float(pipe.T(np.array(1.5), np.array(1.0)))
    number = flux * 2 / (0.05 * (wall - station.ports[0].temperature))
    # The profile is of degree four: cubics leave a few 1e-4 of it.
    assert number == pytest.approx(48 / 11, rel=2e-3)


def test_heat_through_a_pipe_wall_is_that_of_fourier():
    # 2πkΔT/ln 2 = 9.0647203 per length for radii 1, 2 (Fourier; "verified"), k = ΔT = 1.
    cells = tm.quads((0.0, 1.0, 1.0, 2.0), 0.1, 1)
    x, y = cells.points.T
    flow = fvcheck.Flow.from_arrays(
        cells.points,
        (cells.offsets, cells.nodes),
        point_data={"U": np.zeros((len(x), 2)), "T": -np.log2(y)},
        fluid=Fluid(density=1.0, specific_heat=1.0, conductivity=1.0),
        symmetry="axisymmetric",
        axis="x",
    )
    for radius in (1.25, 1.8):
        line = ControlSurface.line([(0.8, radius), (0.3, radius)])
        row = fvcheck.balance(flow, line, laws=["heat"])["heat"]
        assert row.flux == pytest.approx(0.5 * 9.0647203, rel=1e-3)


# --- the set-up of axisymmetric runs -----------------------------------------------------------


def test_the_axis_is_found_by_where_the_mesh_lies():
    pipe = exact.hagen_poiseuille()
    upright = flow_on(exchanged(pipe), tm.quads((0.0, -1.0, 1.0, 1.0), 0.2), symmetry="axisymmetric")
    assert upright.case.axis == 1
    lying = flow_on(pipe, tm.quads((-1.0, 0.0, 1.0, 1.0), 0.2), symmetry="axisymmetric")
    assert lying.case.axis == 0
    touching = flow_on(exchanged(pipe), tm.quads((0.0, 0.5, 1.0, 2.0), 0.2), symmetry="axisymmetric")
    assert touching.case.axis == 1
    assert "axis-taken" in [hint.code for hint in touching.hints]


@pytest.mark.parametrize(
    ("settings", "fluid", "match"),
    [
        ({"axis": "y"}, {}, "both sides"),
        ({"axis": "w"}, {}, "unknown axis"),
        ({"depth": 2.0}, {}, "depth"),
        ({}, {"gravity": (0.0, -9.81)}, "gravity"),
        ({}, {"frame_rate": 1.0, "frame_centre": (0.0, 0.5)}, "off the axis"),
    ],
)
def test_what_an_axisymmetric_run_cannot_have_is_refused(settings, fluid, match):
    pipe = exact.hagen_poiseuille()
    cells = tm.quads((-1.0, 0.0, 1.0, 1.0), 0.2)
    with pytest.raises(fvcheck.FvcheckError, match=match):
        flow_on(pipe, cells, symmetry="axisymmetric", fluid=Fluid(**pipe.fluid, **fluid), **settings)


def test_a_surface_may_move_along_the_axis_only():
    flow = revolved(exact.hagen_poiseuille(), 0.2)
    along = fvcheck.balance(
        flow, ControlSurface.parse("box(0.5, 0, 2, 0.8) @ velocity(0.3, 0)"), laws=["mass"]
    )
    assert along["mass"].verdict == "closed"
    for motion in ("velocity(0, 0.3)", "spin(1, 0, 0)"):
        with pytest.raises(fvcheck.SurfaceError, match="along the axis"):
            fvcheck.balance(flow, ControlSurface.parse(f"box(0.5, 0, 2, 0.8) @ {motion}"))
