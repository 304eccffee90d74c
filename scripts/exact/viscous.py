"""Closed-form solutions of the incompressible Navier-Stokes equations."""

from __future__ import annotations

import numpy as np

from exact.flow import ExactFlow, constant


def kovasznay(re: float = 40.0) -> ExactFlow:
    """Flow behind a grid (Kovasznay 1948, Proc. Camb. Phil. Soc. 44). ν = 1/re, ρ = 1."""
    nu = 1.0 / re
    lam = re / 2 - np.sqrt(re**2 / 4 + 4 * np.pi**2)
    return ExactFlow(
        name="kovasznay",
        domain=(-0.5, -0.5, 1.0, 1.5),
        fluid={"density": 1.0, "viscosity": nu},
        feature=1 / (2 * np.pi),
        u=lambda x, y: 1 - np.exp(lam * x) * np.cos(2 * np.pi * y),
        v=lambda x, y: lam / (2 * np.pi) * np.exp(lam * x) * np.sin(2 * np.pi * y),
        p=lambda x, y: 0.5 * (1 - np.exp(2 * lam * x)) + 0 * y,
    )


def taylor_green(nu: float = 0.05, time: float = 0.0, rho: float = 1.0) -> ExactFlow:
    """One instant of decaying vortices (Taylor 1923; Taylor & Green 1937). Wave length 2π."""
    a = np.exp(-2 * nu * time)

    def u(x, y):
        return a * np.sin(x) * np.cos(y)

    def v(x, y):
        return -a * np.cos(x) * np.sin(y)

    def p(x, y):
        return 0.25 * rho * a**2 * (np.cos(2 * x) + np.cos(2 * y))

    return ExactFlow(
        name="taylor-green",
        domain=(0.0, 0.0, 2 * np.pi, 2 * np.pi),
        fluid={"density": rho, "viscosity": rho * nu},
        feature=1.0,
        u=u,
        v=v,
        p=p,
        speed=a,
        length=2 * np.pi,
        rates={
            "u": lambda x, y: -2 * nu * u(x, y),
            "v": lambda x, y: -2 * nu * v(x, y),
            "p": lambda x, y: -4 * nu * p(x, y),
        },
    )


def poiseuille(height: float = 1.0, mean: float = 1.0, wall_flux: float = 1.0) -> ExactFlow:
    """Developed channel flow, both walls heated evenly (Schlichting & Gersten; Shah & London 1978).

    ρ = 1, μ = 0.1, c = 2, k = 0.05; ``wall_flux`` is the heat entering per area of each
    wall. Temperature rises linearly along the channel, so axial conduction carries a
    constant and the field is an exact solution. Dissipation is left out of the heat.
    """
    rho, mu, c, k = 1.0, 0.1, 2.0, 0.05
    rise = 2 * wall_flux / (rho * c * mean * height)
    size = wall_flux * 2 * height / k

    def temperature(x, y):
        n = y / height
        return 300.0 + rise * x + size * (n**3 - 0.5 * n**4 - 0.5 * n)

    return ExactFlow(
        name="poiseuille",
        domain=(0.0, 0.0, 3.0 * height, height),
        fluid={"density": rho, "viscosity": mu, "conductivity": k, "specific_heat": c},
        feature=height / np.pi,
        u=lambda x, y: 6 * mean * y * (height - y) / height**2 + 0 * x,
        v=constant(0.0),
        p=lambda x, y: -12 * mu * mean / height**2 * x + 0 * y,
        T=temperature,
        speed=mean,
        length=height,
    )


def couette(height: float = 1.0, wall_speed: float = 2.0) -> ExactFlow:
    """Plane Couette flow heated by its own friction, lower wall adiabatic (Schlichting & Gersten).

    T − T_w = μU²/(2k)·(1 − y²/h²). ρ = 1, μ = 0.3, c = 1, k = 0.2.
    """
    mu, k = 0.3, 0.2
    return ExactFlow(
        name="couette",
        domain=(0.0, 0.0, 2.0 * height, height),
        fluid={"density": 1.0, "viscosity": mu, "conductivity": k, "specific_heat": 1.0},
        feature=height / np.sqrt(2),
        u=lambda x, y: wall_speed * y / height + 0 * x,
        v=constant(0.0),
        p=constant(0.0),
        T=lambda x, y: 300.0 + mu * wall_speed**2 / (2 * k) * (1 - (y / height) ** 2) + 0 * x,
        speed=wall_speed,
        length=height,
        viscous_heating=True,
    )


def lamb_oseen(gamma: float = 1.0, nu: float = 0.01, time: float = 1.0) -> ExactFlow:
    """One instant of a spreading line vortex (Lamb, Hydrodynamics; Oseen 1912). ρ = 1.

    The pressure is −∫ u_θ²/r dr, which exponential integrals express.
    """
    from scipy.special import exp1

    core2 = 4 * nu * time

    def s(x, y):
        return (x * x + y * y) / core2 + 1e-200

    def spin(x, y):  # u_θ / r, regular at the centre
        return gamma / (2 * np.pi * core2) * -np.expm1(-s(x, y)) / s(x, y)

    def spin_rate(x, y):
        return -gamma / (2 * np.pi * core2 * time) * np.exp(-s(x, y))

    def p(x, y):
        q = s(x, y)
        return -(gamma**2) / (8 * np.pi**2 * core2) * (np.expm1(-q) ** 2 / q + 2 * (exp1(q) - exp1(2 * q)))

    core = np.sqrt(core2)
    return ExactFlow(
        name="lamb-oseen",
        domain=(-0.5, -0.5, 0.5, 0.5),
        fluid={"density": 1.0, "viscosity": nu},
        feature=core / 2,
        u=lambda x, y: -y * spin(x, y),
        v=lambda x, y: x * spin(x, y),
        p=p,
        speed=0.6381727 * gamma / (2 * np.pi * core),
        length=core,
        rates={"u": lambda x, y: -y * spin_rate(x, y), "v": lambda x, y: x * spin_rate(x, y)},
    )


def cylindrical_couette(mu: float = 1.0, spin: float = 1.0) -> ExactFlow:
    """Between circles r = 1, turning at ``spin``, and r = 2, at rest (Schlichting & Gersten). ρ = 1.

    u_θ = Ar + B/r; torque per length 4πμΩ R₁²R₂²/(R₂² − R₁²) = 16.755161 μΩ.
    """
    b = spin * 4.0 / 3.0
    a = -b / 4.0

    def turning(x, y):  # u_θ / r
        return a + b / (x * x + y * y)

    def p(x, y):
        r2 = x * x + y * y
        return 0.5 * (a * a * r2 - b * b / r2) + a * b * np.log(r2)

    return ExactFlow(
        name="cylindrical-couette",
        domain=(-2.0, -2.0, 2.0, 2.0),
        fluid={"density": 1.0, "viscosity": mu},
        feature=0.5,
        u=lambda x, y: -y * turning(x, y),
        v=lambda x, y: x * turning(x, y),
        p=p,
        speed=spin,
    )


def shear_layer(thickness: float = 0.1, mean: float = 1.0, half_jump: float = 0.5) -> ExactFlow:
    """Parallel flow u = mean + half_jump tanh(y/δ), held steady by a body force −μu''.

    By algebra: a parallel flow has no convective acceleration. ρ = 1, μ = 0.001.
    """
    mu = 1e-3

    def force(x, y):
        t = np.tanh(y / thickness)
        return 2 * mu * half_jump / thickness**2 * t * (1 - t * t) + 0 * x

    return ExactFlow(
        name="shear-layer",
        domain=(-1.0, -1.0, 1.0, 1.0),
        fluid={"density": 1.0, "viscosity": mu},
        feature=thickness / 2,
        u=lambda x, y: mean + half_jump * np.tanh(y / thickness) + 0 * x,
        v=constant(0.0),
        p=constant(0.0),
        speed=mean,
        length=thickness,
        body_force=(force, constant(0.0)),
    )


def suction_layer(delta: float = 0.004, length: float = 10.0) -> ExactFlow:
    """Asymptotic suction profile u = U(1 − exp(v₀y/ν)), v = v₀ < 0 (Schlichting & Gersten).

    An exact Navier-Stokes solution over a porous plate, independent of x, whose
    thickness δ = ν/|v₀| may be as small a part of the plate as wished (2,500 by
    default). The temperature from a heated plate, T = T∞ + ΔT exp(ρc v₀ y/k), is
    exact too. ρ = 1, U = 1, v₀ = −0.001, c = 1, Pr = 0.7.
    """
    speed, v0 = 1.0, -1e-3
    nu = delta * -v0
    k = nu / 0.7
    return ExactFlow(
        name="suction-layer",
        domain=(0.0, 0.0, length, 12 * delta),
        fluid={"density": 1.0, "viscosity": nu, "conductivity": k, "specific_heat": 1.0},
        feature=delta,
        u=lambda x, y: -speed * np.expm1(v0 * y / nu) + 0 * x,
        v=constant(v0),
        p=constant(0.0),
        T=lambda x, y: 300.0 + 20.0 * np.exp(v0 * y / k) + 0 * x,
        speed=speed,
        length=delta,
    )


def uniform(u: float = 1.2, v: float = -0.7) -> ExactFlow:
    """The same velocity, pressure and temperature everywhere; every closed balance is zero."""
    return ExactFlow(
        name="uniform",
        domain=(0.0, 0.0, 1.0, 1.0),
        fluid={"density": 1.3, "viscosity": 0.1, "conductivity": 0.2, "specific_heat": 2.0},
        feature=1.0,
        u=constant(u),
        v=constant(v),
        p=constant(5.0),
        T=constant(300.0),
        speed=float(np.hypot(u, v)),
    )


def linear(a: float = 0.5, b: float = -1.5, c: float = 0.75) -> ExactFlow:
    """u = ax + by, v = cx − ay with the quadratic pressure that drives it, by algebra.

    (u·∇)u = (a² + bc)(x, y), a gradient, so p = −½ρ(a² + bc)(x² + y²); a linear
    temperature is carried with the heat source ρc u·∇T. Fits of degree 2 and above
    reproduce it to rounding; of degree 1 in velocity and temperature.
    """
    rho, heat = 1.3, 2.0

    def u(x, y):
        return a * x + b * y

    def v(x, y):
        return c * x - a * y

    return ExactFlow(
        name="linear",
        domain=(-1.0, -1.0, 1.0, 1.0),
        fluid={"density": rho, "viscosity": 0.1, "conductivity": 0.2, "specific_heat": heat},
        feature=1.0,
        u=u,
        v=v,
        p=lambda x, y: -0.5 * rho * (a * a + b * c) * (x * x + y * y),
        T=lambda x, y: 300.0 + 3.0 * x - 2.0 * y,
        heat_source=lambda x, y: rho * heat * (3.0 * u(x, y) - 2.0 * v(x, y)),
    )
