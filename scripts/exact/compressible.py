"""Closed-form compressible flows of a perfect gas, γ = 1.4, without viscosity."""

from __future__ import annotations

import numpy as np

from exact.flow import ExactFlow, constant, gradient

GAMMA = 1.4


def isentropic_vortex(strength: float = 5.0, stream: tuple[float, float] = (0.0, 0.0)) -> ExactFlow:
    """Isentropic vortex at the origin (Shu 1998; Yee et al. 1999), at rest or carried by a stream.

    T = 1 − (γ−1)b²/(8γπ²)·exp(1−r²), swirl (b/2π) r exp((1−r²)/2), ρ = T^{1/(γ−1)},
    p = ρT (so the gas constant is 1). Carried by a stream U, every quantity q keeps
    ∂q/∂t = −U·∇q.
    """
    drop = (GAMMA - 1) * strength**2 / (8 * GAMMA * np.pi**2)
    spin = strength / (2 * np.pi)

    def temperature(x, y):
        return 1 - drop * np.exp(1 - x * x - y * y)

    def rho(x, y):
        return temperature(x, y) ** (1 / (GAMMA - 1))

    def u(x, y):
        return stream[0] - spin * y * np.exp(0.5 * (1 - x * x - y * y))

    def v(x, y):
        return stream[1] + spin * x * np.exp(0.5 * (1 - x * x - y * y))

    def p(x, y):
        return temperature(x, y) ** (GAMMA / (GAMMA - 1))

    def carried(f):
        return lambda x, y: -gradient(f, x, y) @ np.asarray(stream)

    quantities = {"u": u, "v": v, "p": p, "T": temperature, "rho": rho}
    moving = any(stream)
    return ExactFlow(
        name="moving-vortex" if moving else "isentropic-vortex",
        domain=(-5.0, -5.0, 5.0, 5.0),
        fluid={"gamma": GAMMA, "gas_constant": 1.0, "viscosity": 0.0},
        feature=0.5,
        u=u,
        v=v,
        p=p,
        T=temperature,
        rho=rho,
        speed=spin,
        rates={name: carried(f) for name, f in quantities.items()} if moving else {},
    )


def shock_angle(mach: float, deflection: float) -> float:
    """β of the weak oblique shock, radians, from the θ-β-M relation (NACA Report 1135)."""
    from scipy.optimize import brentq, minimize_scalar

    def turn(beta):
        s2 = (mach * np.sin(beta)) ** 2
        return np.arctan(2 / np.tan(beta) * (s2 - 1) / (mach**2 * (GAMMA + np.cos(2 * beta)) + 2))

    low = np.arcsin(1 / mach)
    high = minimize_scalar(lambda b: -turn(b), bounds=(low, np.pi / 2), method="bounded").x
    return float(brentq(lambda b: turn(b) - deflection, low, high, xtol=1e-15, rtol=1e-15))


def oblique_shock(mach: float = 2.0, degrees: float = 10.0) -> ExactFlow:
    """Two uniform streams, parted by an oblique shock from the origin (NACA Report 1135).

    M 2, 10°: β 39.31393°, pressure ratio 1.7065786, M₂ 1.6405222. Ahead ρ = 1,
    p = 1/γ, sound speed 1; gas constant 1/γ, so T = 1 there.
    """
    beta = shock_angle(mach, np.radians(degrees))
    s2 = (mach * np.sin(beta)) ** 2
    p_ratio = 1 + 2 * GAMMA / (GAMMA + 1) * (s2 - 1)
    rho_ratio = (GAMMA + 1) * s2 / ((GAMMA - 1) * s2 + 2)
    # the shock leaves the tangential component alone and slows the normal one by the density ratio
    tangent, normal = np.array([np.cos(beta), np.sin(beta)]), np.array([np.sin(beta), -np.cos(beta)])
    behind = mach * (np.cos(beta) * tangent + np.sin(beta) / rho_ratio * normal)

    def either(ahead, after):
        def f(x, y):
            is_ahead = np.real(x) * np.sin(beta) < np.real(y) * np.cos(beta)
            return np.where(is_ahead, ahead, after) + 0 * (x + y)

        return f

    return ExactFlow(
        name="oblique-shock",
        domain=(-0.5, 0.0, 1.0, 1.0),
        fluid={"gamma": GAMMA, "gas_constant": 1 / GAMMA, "viscosity": 0.0},
        feature=0.0,
        u=either(mach, behind[0]),
        v=either(0.0, behind[1]),
        p=either(1 / GAMMA, p_ratio / GAMMA),
        T=either(1.0, p_ratio / rho_ratio),
        rho=either(1.0, rho_ratio),
        speed=mach,
        jump=(0.0, 0.0, beta),
    )


def uniform_gas(mach: float = 0.5, degrees: float = 20.0) -> ExactFlow:
    """A uniform stream of gas, ρ = 1, p = 1/γ, sound speed 1."""
    angle = np.radians(degrees)
    return ExactFlow(
        name="uniform-gas",
        domain=(0.0, 0.0, 1.0, 1.0),
        fluid={"gamma": GAMMA, "gas_constant": 1 / GAMMA, "viscosity": 0.0},
        feature=1.0,
        u=constant(mach * np.cos(angle)),
        v=constant(mach * np.sin(angle)),
        p=constant(1 / GAMMA),
        T=constant(1.0),
        rho=constant(1.0),
        speed=mach,
    )
