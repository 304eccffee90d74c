"""More closed-form flows of a perfect gas, γ = 1.4: shocks, a fan, a nozzle, heat addition."""

from __future__ import annotations

import numpy as np

from exact.compressible import GAMMA
from exact.flow import ExactFlow, constant, gradient

K = np.sqrt((GAMMA + 1) / (GAMMA - 1))


def jump_ratios(mach: float) -> tuple[float, float, float]:
    """p₂/p₁, ρ₂/ρ₁ and Δs/R across a normal shock (NACA Report 1135)."""
    m2 = mach**2
    p = 1 + 2 * GAMMA / (GAMMA + 1) * (m2 - 1)
    rho = (GAMMA + 1) * m2 / ((GAMMA - 1) * m2 + 2)
    return p, rho, float(np.log(p / rho**GAMMA) / (GAMMA - 1))


def normal_shock(mach: float = 2.0, x0: float = 0.487) -> ExactFlow:
    """A normal shock at x0 (NACA Report 1135). Ahead ρ = 1, p = 1/γ, sound speed 1; R = 1/γ, T = 1."""
    p, rho, _ = jump_ratios(mach)

    def either(ahead, after):
        return lambda x, y: np.where(np.real(x) < x0, ahead, after) + 0 * (x + y)

    return ExactFlow(
        name="normal-shock",
        domain=(0.0, 0.0, 1.0, 0.5),
        fluid={"gamma": GAMMA, "gas_constant": 1 / GAMMA, "viscosity": 0.0},
        feature=0.0,
        u=either(mach, mach / rho),
        v=constant(0.0),
        p=either(1 / GAMMA, p / GAMMA),
        T=either(1.0, p / rho),
        rho=either(1.0, rho),
        speed=mach,
        jump=(x0, 0.0, np.pi / 2),
    )


def prandtl_meyer_angle(mach):
    """ν(M), radians (Prandtl & Meyer 1908; NACA Report 1135)."""
    b = np.sqrt(mach * mach - 1)
    return K * np.arctan(b / K) - np.arctan(b)


def expansion_fan(mach: float = 2.0, degrees: float = 10.0) -> ExactFlow:
    """A stream turned down at the origin by a centred fan (Prandtl & Meyer 1908).

    With ω the angle from the sonic ray, M² = 1 + K² tan²(ω/K), K² = (γ+1)/(γ−1);
    ω held between its first and last value gives the uniform streams as well.
    M 2 turned 10° leaves at M 2.3848872, static pressure .5479687 of before.
    """
    from scipy.optimize import brentq

    turn = np.radians(degrees)
    nu1 = prandtl_meyer_angle(mach)
    last = brentq(lambda m: prandtl_meyer_angle(m) - nu1 - turn, mach, 50.0, xtol=1e-15)
    first_ray = np.arcsin(1 / mach)

    def omega_of(m):
        return K * np.arctan(np.sqrt(m * m - 1) / K)

    w1, w2 = omega_of(mach), omega_of(last)
    total = 1 + 0.5 * (GAMMA - 1) * mach**2

    def local(x, y):
        ray = np.arctan2(np.real(y), np.real(x))
        omega = np.clip(w1 + first_ray - ray, w1, w2)
        m = np.sqrt(1 + K**2 * np.tan(omega / K) ** 2)
        return m, total / (1 + 0.5 * (GAMMA - 1) * m * m), nu1 - prandtl_meyer_angle(m)

    def u(x, y):
        m, t, angle = local(x, y)
        return m * np.sqrt(t) * np.cos(angle)

    def v(x, y):
        m, t, angle = local(x, y)
        return m * np.sqrt(t) * np.sin(angle)

    return ExactFlow(
        name="expansion-fan",
        domain=(0.3, 0.3, 1.8, 1.3),
        fluid={"gamma": GAMMA, "gas_constant": 1 / GAMMA, "viscosity": 0.0},
        feature=0.2,
        u=u,
        v=v,
        p=lambda x, y: local(x, y)[1] ** (GAMMA / (GAMMA - 1)) / GAMMA,
        T=lambda x, y: local(x, y)[1],
        rho=lambda x, y: local(x, y)[1] ** (1 / (GAMMA - 1)),
        speed=mach,
    )


def area_ratio(mach):
    """A/A* of isentropic flow (NACA Report 1135)."""
    t = 1 + 0.5 * (GAMMA - 1) * mach * mach
    return (2 * t / (GAMMA + 1)) ** ((GAMMA + 1) / (2 * (GAMMA - 1))) / mach


def nozzle(mach_before: float = 2.0, exit_area: float = 2.0) -> ExactFlow:
    """Quasi-one-dimensional nozzle with a shock, as a plane flow (NACA Report 1135).

    A throat of half-height 1/2 at x = 0, M given along x: from 1 to ``mach_before``
    at the shock x = 1, then subsonic to ``exit_area`` throats at x = 2. p, ρ, T and u
    depend on x only and v = u y A′/A, so that streamlines follow the walls: mass and
    axial momentum hold exactly, the rest to the order of the slope. Stagnation
    pressure 1 before the shock, T₀ = 1, R = 1. The wall is y = ± `half_height`.
    """
    from scipy.optimize import brentq

    *_, rise = jump_ratios(mach_before)
    behind = np.sqrt((1 + 0.2 * mach_before**2) / (GAMMA * mach_before**2 - 0.2))
    lost = np.exp(-rise)  # p₀ ratio, as T₀ is constant
    # A/A* behind the shock is A/A_throat times the loss of stagnation pressure.
    leave = brentq(lambda m: area_ratio(m) - exit_area * lost, 1e-3, 1.0, xtol=1e-15)

    def mach(x):
        early = 1.0 + (mach_before - 1.0) * x * x * (3 - 2 * x)
        late = behind + (leave - behind) * (x - 1.0)
        return np.where(np.real(x) < 1.0, early, late)

    def stagnation(x):
        return np.where(np.real(x) < 1.0, 1.0, lost)

    def t(x):
        return 1 / (1 + 0.2 * mach(x) ** 2)

    def u(x, y):
        return mach(x) * np.sqrt(GAMMA * t(x)) + 0 * y

    def v(x, y):
        half = half_height(np.real(x))
        slope = gradient(lambda a, b: half_height(a) + 0 * b, np.real(x), 0 * np.real(x))[..., 0]
        return u(x, y) * y * slope / half

    def half_height(x):
        return 0.5 * area_ratio(mach(x)) / stagnation(x)

    flow = ExactFlow(
        name="nozzle",
        domain=(0.0, -1.0, 2.0, 1.0),
        fluid={"gamma": GAMMA, "gas_constant": 1.0, "viscosity": 0.0},
        feature=0.5,
        u=u,
        v=v,
        p=lambda x, y: stagnation(x) * t(x) ** (GAMMA / (GAMMA - 1)) + 0 * y,
        T=lambda x, y: t(x) + 0 * y,
        rho=lambda x, y: stagnation(x) * t(x) ** (1 / (GAMMA - 1)) + 0 * y,
        jump=(1.0, 0.0, np.pi / 2),
    )
    object.__setattr__(flow, "half_height", half_height)
    return flow


def rayleigh(mach_in: float = 0.5, mach_out: float = 0.8) -> ExactFlow:
    """Heat added in a duct of constant area (Shapiro 1953; Keenan & Kaye 1945): T₀/T₀* .6913580 at M .5.

    M rises evenly along the duct; p* = T* = R = 1. ``heat_source`` is ρu c_p dT₀/dx.
    """

    def mach(x):
        return mach_in + (mach_out - mach_in) * x

    def p(x, y):
        return (1 + GAMMA) / (1 + GAMMA * mach(x) ** 2) + 0 * y

    def t(x, y):
        return (mach(x) * p(x, y)) ** 2

    def stagnation(x, y):
        return t(x, y) * (1 + 0.2 * mach(x) ** 2)

    def u(x, y):
        return mach(x) * np.sqrt(GAMMA * t(x, y))

    def heat(x, y):
        flux = p(x, y) / t(x, y) * u(x, y)
        return flux * GAMMA / (GAMMA - 1) * gradient(stagnation, x, y)[..., 0]

    return ExactFlow(
        name="rayleigh",
        domain=(0.0, 0.0, 1.0, 0.5),
        fluid={"gamma": GAMMA, "gas_constant": 1.0, "viscosity": 0.0},
        feature=0.5,
        u=u,
        v=constant(0.0),
        p=p,
        T=t,
        rho=lambda x, y: p(x, y) / t(x, y),
        heat_source=heat,
    )


def diamond(
    mach: float = 2.0, degrees: float = 5.0
) -> tuple[ExactFlow, tuple[tuple[float, float, float], ...]]:
    """Upper half of a diamond section, chord 1 from the origin, by shock-expansion theory.

    Exact up to where the fan of the shoulder meets the shocks, some three chords away.
    M 2, 5°: drag coefficient .0177367 of the whole section. Ahead ρ = 1, p = 1/γ, sound
    speed 1. Returns the flow and its two shocks (x, y, angle).
    """
    from exact.compressible import shock_angle

    theta = np.radians(degrees)
    top = 0.5 * np.tan(theta)

    def across(m, angle):
        """M, T ratio and p ratio behind an oblique shock."""
        p, rho, _ = jump_ratios(m * np.sin(angle))
        normal2 = (1 + 0.2 * (m * np.sin(angle)) ** 2) / (GAMMA * (m * np.sin(angle)) ** 2 - 0.2)
        return float(np.sqrt(normal2) / np.sin(angle - theta)), p / rho, p

    beta1 = shock_angle(mach, theta)
    m2, t2, p2 = across(mach, beta1)
    fan = expansion_fan(m2, 2 * degrees)
    c, s = np.cos(theta), np.sin(theta)
    scale = np.sqrt(t2)

    def in_fan(x, y):
        """Coordinates of the fan: about the shoulder, its stream along x."""
        dx, dy = x - 0.5, y - top
        return dx * c + dy * s, dy * c - dx * s

    m3 = float(np.sqrt((fan.u(*_AFTER) ** 2 + fan.v(*_AFTER) ** 2) / fan.T(*_AFTER)))
    beta3 = shock_angle(m3, theta)
    m4, t4, p4 = across(m3, beta3)
    t4 = t4 * float(fan.T(*_AFTER)) * t2
    p4 = p4 * GAMMA * float(fan.p(*_AFTER)) * p2
    shocks = ((0.0, 0.0, beta1), (1.0, 0.0, beta3 - theta))

    def pick(ahead, middle, behind):
        def f(x, y):
            x, y = np.real(x), np.real(y)
            first = y * np.cos(beta1) > x * np.sin(beta1)
            last = y * np.cos(shocks[1][2]) < (x - 1.0) * np.sin(shocks[1][2])
            return np.where(first, ahead, np.where(last, behind, middle(x, y)))

        return f

    def along(x, y):
        a = in_fan(x, y)
        return scale * (fan.u(*a) * c - fan.v(*a) * s)

    def up(x, y):
        a = in_fan(x, y)
        return scale * (fan.u(*a) * s + fan.v(*a) * c)

    flow = ExactFlow(
        name="diamond",
        domain=(-0.4, 0.0, 1.4, 0.6),
        fluid={"gamma": GAMMA, "gas_constant": 1 / GAMMA, "viscosity": 0.0},
        feature=0.0,
        u=pick(mach, along, m4 * np.sqrt(t4)),
        v=pick(0.0, up, 0.0),
        p=pick(1 / GAMMA, lambda x, y: p2 * fan.p(*in_fan(x, y)), p4 / GAMMA),
        T=pick(1.0, lambda x, y: t2 * fan.T(*in_fan(x, y)), t4),
        rho=pick(1.0, lambda x, y: p2 / t2 * fan.rho(*in_fan(x, y)), p4 / t4),
        speed=mach,
        jump=shocks[0],
    )
    return flow, shocks


_AFTER = (np.array(1.0), np.array(-0.9))  # behind every fan that turns less than 40°
