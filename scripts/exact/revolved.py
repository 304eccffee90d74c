"""Closed-form axisymmetric flows: the axis is x, the radius y, ``w`` the swirl, right-handed about x."""

from __future__ import annotations

import numpy as np

from exact.flow import ExactFlow, constant


def hagen_poiseuille(radius: float = 1.0, gradient: float = 1.0, mu: float = 0.1) -> ExactFlow:
    """Developed pipe flow: Q = πR⁴G/8μ, momentum factor 4/3, energy factor 2 (Hagen; Poiseuille)."""
    return ExactFlow(
        name="hagen-poiseuille",
        domain=(0.0, 0.0, 3.0 * radius, radius),
        fluid={"density": 1.3, "viscosity": mu},
        feature=radius / np.pi,
        u=lambda x, y: gradient / (4 * mu) * (radius**2 - y * y) + 0 * x,
        v=constant(0.0),
        p=lambda x, y: -gradient * x + 0 * y,
        speed=gradient * radius**2 / (8 * mu),
    )


def burgers_vortex(a: float = 1.0, gamma: float = 1.0, nu: float = 0.1) -> ExactFlow:
    """Vortex held by strain (Burgers 1948): u_r = −ar/2, axial ax, Γ(r) = Γ(1 − exp(−ar²/4ν)). ρ = 1."""
    from scipy.special import exp1

    core2 = 4 * nu / a

    def s(y):
        return y * y / core2 + 1e-200

    def p(x, y):
        q = s(y)
        swirl = -(gamma**2) / (8 * np.pi**2 * core2) * (np.expm1(-q) ** 2 / q + 2 * (exp1(q) - exp1(2 * q)))
        return swirl - a * a * (x * x / 2 + y * y / 8)

    return ExactFlow(
        name="burgers-vortex",
        domain=(-0.2, 0.0, 1.2, 1.2),
        fluid={"density": 1.0, "viscosity": nu},
        feature=np.sqrt(core2) / 2,
        u=lambda x, y: a * x + 0 * y,
        v=lambda x, y: -0.5 * a * y + 0 * x,
        w=lambda x, y: gamma / (2 * np.pi * core2) * y * -np.expm1(-s(y)) / s(y) + 0 * x,
        p=p,
    )


def landau_jet(strength: float = 1.5, nu: float = 1.0) -> ExactFlow:
    """Jet from a point (Landau 1944; Squire 1951), ``strength`` A > 1, ρ = 1.

    u_R = (2ν/R)[(A²−1)/(A−c)² − 1], u_ϑ = −2ν sinϑ/(R(A−c)), p = 4ρν²(Ac−1)/(R²(A−c)²),
    c = cosϑ, in spherical coordinates about the origin.
    """

    def parts(x, y):
        size = np.sqrt(x * x + y * y)
        c, s = x / size, y / size
        along = 2 * nu / size * ((strength**2 - 1) / (strength - c) ** 2 - 1)
        return along, -2 * nu * s / (size * (strength - c)), c, s

    def u(x, y):
        along, across, c, s = parts(x, y)
        return along * c - across * s

    def v(x, y):
        along, across, c, s = parts(x, y)
        return along * s + across * c

    def p(x, y):
        r2 = x * x + y * y
        c = x / np.sqrt(r2)
        return 4 * nu**2 * (strength * c - 1) / (r2 * (strength - c) ** 2)

    return ExactFlow(
        name="landau-jet",
        domain=(-2.1, 0.0, 2.0, 2.0),
        fluid={"density": 1.0, "viscosity": nu},
        feature=0.5,
        u=u,
        v=v,
        p=p,
    )


def landau_force(strength: float) -> float:
    """Axial momentum through any sphere about the source, over ρν² (Landau 1944): 64.811426 at A = 1.5."""
    a = strength
    return 16 * np.pi * a * (1 + 4 / (3 * (a * a - 1)) - a / 2 * np.log((a + 1) / (a - 1)))


def heated_pipe(flux: float = 2.0) -> ExactFlow:
    """Developed pipe flow, R = 1, mean speed 1, evenly heated by ``flux`` per area.

    Nu = 48/11 (Shah & London 1978).

    ρ = 1, c = 2, k = 0.05; T rises along the pipe by 2q/(ρcU), so axial conduction is even.
    """
    rho, c, k = 1.0, 2.0, 0.05
    base = hagen_poiseuille(1.0, 0.8, 0.1)
    rise = 2 * flux / (rho * c)

    def temperature(x, y):
        return 300.0 + rise * x + flux / k * (y * y - 0.25 * y**4)

    return ExactFlow(
        name="heated-pipe",
        domain=base.domain,
        fluid={"density": rho, "viscosity": 0.1, "conductivity": k, "specific_heat": c},
        feature=base.feature,
        u=base.u,
        v=base.v,
        p=base.p,
        T=temperature,
    )


def spherical_source(gamma: float = 1.4) -> ExactFlow:
    """Supersonic gas from a point, A/A* = R² (NACA Report 1135 for the relation); ρ* = p* = R_gas = 1."""
    from exact.gas_dynamics import area_ratio

    def mach(x, y):
        size2 = x * x + y * y
        m = 1.0 + np.sqrt(np.maximum(size2 - 1.0, 0.0))
        for _ in range(60):  # Newton's method on ln(A/A*), whose slope is (M² − 1)/(M(1 + 0.2 M²))
            slope = (m * m - 1) / (m * (1 + 0.2 * m * m))
            m = np.maximum(m - (np.log(area_ratio(m)) - np.log(size2)) / slope, 1.0 + 1e-9)
        return m

    def temperature(x, y):
        return 1.2 / (1 + 0.2 * mach(x, y) ** 2)

    def speed(x, y):
        return mach(x, y) * np.sqrt(gamma * temperature(x, y)) / np.sqrt(x * x + y * y)

    return ExactFlow(
        name="spherical-source",
        domain=(1.2, 0.0, 3.0, 1.5),
        fluid={"gamma": gamma, "gas_constant": 1.0, "viscosity": 0.0},
        feature=0.5,
        u=lambda x, y: x * speed(x, y),
        v=lambda x, y: y * speed(x, y),
        p=lambda x, y: temperature(x, y) ** 3.5,
        T=temperature,
        rho=lambda x, y: temperature(x, y) ** 2.5,
    )


def stokes_sphere(radius: float = 1.0, speed: float = 1.0, mu: float = 1.0) -> ExactFlow:
    """Creeping stream past a sphere (Stokes 1851): force 6πμRU, a third of it pressure.

    ρ is small, as inertia is left out of the solution.
    """

    def u(x, y):
        r2 = x * x + y * y
        r = np.sqrt(r2)
        return speed * (
            1 - 0.75 * radius / r * (1 + x * x / r2) - 0.25 * radius**3 / r**3 * (1 - 3 * x * x / r2)
        )

    def v(x, y):
        r2 = x * x + y * y
        r = np.sqrt(r2)
        return speed * x * y / r2 * (-0.75 * radius / r + 0.75 * radius**3 / r**3)

    return ExactFlow(
        name="stokes-sphere",
        domain=(-3.0, 0.0, 3.0, 3.0),
        fluid={"density": 1e-9, "viscosity": mu},
        feature=radius / 2,
        u=u,
        v=v,
        p=lambda x, y: -1.5 * mu * speed * radius * x / (x * x + y * y) ** 1.5,
        speed=speed,
        length=radius,
    )
