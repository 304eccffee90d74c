"""Exact Navier-Stokes solutions that need an ordinary differential equation."""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np
from numpy.polynomial import Chebyshev

from exact.flow import ExactFlow, gradient

Series = Chebyshev


def solve_ode(
    residual: Callable[[np.ndarray, Series], np.ndarray],
    conditions: Callable[[Series], list[float]],
    interval: tuple[float, float],
    guess: Callable[[np.ndarray], np.ndarray],
    degree: int,
) -> Series:
    """A Chebyshev series f with residual(t, f) = 0 at Gauss points and conditions(f) = 0.

    Collocation does not amplify errors along the interval as shooting does, and the
    series, unlike a stepwise solution, is differentiable and takes complex arguments.
    """
    n_conditions = len(conditions(Chebyshev([1.0], domain=list(interval))))
    angle = np.pi * (np.arange(degree + 1 - n_conditions) + 0.5) / (degree + 1 - n_conditions)
    low, high = interval
    nodes = 0.5 * (low + high) - 0.5 * (high - low) * np.cos(angle)
    start = Chebyshev.interpolate(guess, degree, domain=list(interval))

    def equations(coefficients):
        f = Chebyshev(coefficients, domain=list(interval))
        return np.concatenate([residual(nodes, f), conditions(f)])

    coefficients = start.coef
    for _ in range(30):
        jacobian = np.imag([equations(coefficients + 1e-30j * e) for e in np.eye(degree + 1)]).T / 1e-30
        step = np.linalg.solve(jacobian, equations(coefficients))
        coefficients = coefficients - step
        if np.max(np.abs(step)) < 1e-12:
            return Chebyshev(coefficients, domain=list(interval))
    raise ArithmeticError("Newton's method did not converge; try a nearer guess")


@cache
def hiemenz_profile() -> Series:
    """f of f''' + f f'' + 1 − f'² = 0, f(0) = f'(0) = 0, f'(∞) = 1, on 0 … 8."""

    def residual(t, f):
        d1, d2, d3 = f.deriv(1)(t), f.deriv(2)(t), f.deriv(3)(t)
        return d3 + f(t) * d2 + 1 - d1 * d1

    def conditions(f):
        return [f(0.0), f.deriv(1)(0.0), f.deriv(1)(8.0) - 1.0]

    return solve_ode(residual, conditions, (0.0, 8.0), lambda t: t - 0.65 * (1 - np.exp(-t / 0.65)), 48)


def hiemenz(a: float = 1.0, nu: float = 0.01) -> ExactFlow:
    """Plane stagnation flow on a wall (Hiemenz 1911): f''(0) = 1.2325877, δ* = .6479005 √(ν/a). ρ = 1."""
    f = hiemenz_profile()
    f1 = f.deriv(1)
    size = float(np.sqrt(nu / a))

    def v(x, y):
        return -np.sqrt(nu * a) * f(y / size) + 0 * x

    return ExactFlow(
        name="hiemenz",
        domain=(-0.5, 0.0, 0.5, 5 * size),
        fluid={"density": 1.0, "viscosity": nu},
        feature=size,
        u=lambda x, y: a * x * f1(y / size),
        v=v,
        p=lambda x, y: -0.5 * (a * a * x * x + v(x, y) ** 2) - nu * a * f1(y / size),
        speed=0.5 * a,
        length=size,
    )


@cache
def jeffery_hamel_profile(re: float, alpha: float) -> Series:
    """F of F''' + 2 Re α F F' + 4α² F' = 0, F(±1) = 0, F(0) = 1; α in radians, < 0 converging."""

    def residual(t, f):
        return f.deriv(3)(t) + (2 * re * alpha * f(t) + 4 * alpha**2) * f.deriv(1)(t)

    def conditions(f):
        return [f(-1.0), f(1.0), f(0.0) - 1.0]

    return solve_ode(residual, conditions, (-1.0, 1.0), lambda t: 1 - t * t, 40)


def jeffery_hamel(re: float = 50.0, degrees: float = 5.0) -> ExactFlow:
    """Radial flow between plane walls at ±α (Jeffery 1915; Hamel 1916); degrees < 0 converges.

    u_r = f(θ)/r, f = f_max F(θ/α), Re = f_max α/ν, ρ = 1, |f_max| = 1;
    p = (2μf − K)/r² with K = 2μf + ½ρ(f² + νf''), which is constant. The domain is a
    rectangle that just fits between the walls.
    """
    alpha = np.radians(degrees)
    peak = 1.0 if degrees > 0 else -1.0
    nu = float(abs(alpha) / re)
    profile = jeffery_hamel_profile(re, alpha)
    curvature = float(profile.deriv(2)(0.0))
    k = 2 * nu * peak + 0.5 * (1.0 + nu * peak * curvature / alpha**2)

    def f(x, y):
        return peak * profile(np.arctan(y / x) / alpha)

    width = float(np.tan(abs(alpha)))
    return ExactFlow(
        name="jeffery-hamel" if degrees > 0 else "jeffery-hamel-converging",
        domain=(1.0, -width, 2.0, width),
        fluid={"density": 1.0, "viscosity": nu},
        feature=width / 2,
        u=lambda x, y: f(x, y) * x / (x * x + y * y),
        v=lambda x, y: f(x, y) * y / (x * x + y * y),
        p=lambda x, y: (2 * nu * f(x, y) - k) / (x * x + y * y),
        length=width,
    )


def wall_shear(flow: ExactFlow, x: float) -> float:
    """μ ∂u/∂y on y = 0."""
    return float(flow.viscosity * gradient(flow.u, np.array(x), np.array(0.0))[1])
