"""What a closed-form flow is, and its derivatives and boundary integrals."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

import numpy as np

Array = np.ndarray
Scalar = Callable[[Array, Array], Array]
Box = tuple[float, float, float, float]

NOTHING: Mapping = MappingProxyType({})


@dataclass(frozen=True, eq=False)
class ExactFlow:
    """A flow field known everywhere, with the equations it satisfies.

    All functions take arrays (x, y) of one shape and return that shape; they
    also accept complex arguments, which is how derivatives are formed.

    name : short, kebab-case
    domain : (x0, y0, x1, y1), a rectangle that suits the field
    fluid : keyword arguments of the fluid: ``density, viscosity`` and, where there
        is a temperature, ``conductivity, specific_heat``; a compressible field
        has ``gas_constant, gamma, viscosity`` instead of a density
    feature : shortest length l over which the field changes by its own size, in the
        sense of exp(x/l) or sin(x/l)
    speed, length : the scales a textbook would use
    u, v, p : velocity and static pressure
    w : velocity out of the plane, the swirl of an axisymmetric flow; None for none
    T, rho : temperature, density (``rho`` only when it varies)
    rates : name -> exact time derivative of that quantity; empty when steady
    body_force : (f_x, f_y) per volume that the momentum equations need
    heat_source : per volume, that the heat equation needs
    viscous_heating : the temperature contains the heat of dissipation
    hole : (x, y, r), a disc to be left out
    jump : (x, y, angle), the straight line across which the field jumps
    """

    name: str
    domain: Box
    fluid: Mapping[str, float]
    feature: float
    u: Scalar
    v: Scalar
    p: Scalar
    T: Scalar | None = None
    rho: Scalar | None = None
    speed: float = 1.0
    length: float = 1.0
    rates: Mapping[str, Scalar] = field(default_factory=lambda: NOTHING)
    body_force: tuple[Scalar, Scalar] | None = None
    heat_source: Scalar | None = None
    viscous_heating: bool = False
    hole: tuple[float, float, float] | None = None
    jump: tuple[float, float, float] | None = None
    w: Scalar | None = None

    @property
    def compressible(self) -> bool:
        return self.rho is not None

    @property
    def viscosity(self) -> float:
        return float(self.fluid.get("viscosity", 0.0))

    def density(self, x: Array, y: Array) -> Array:
        """Density at (x, y), constant or not."""
        if self.rho is not None:
            return self.rho(x, y)
        return constant(self.fluid["density"])(x, y)

    def velocity(self, x: Array, y: Array) -> Array:
        """(…, 2) velocity."""
        return np.stack([self.u(x, y), self.v(x, y)], axis=-1)

    def total_energy(self, x: Array, y: Array) -> Array:
        """ρE of a perfect gas, per volume: p/(γ−1) + ½ρ|u|²."""
        kinetic = 0.5 * self.density(x, y) * (self.u(x, y) ** 2 + self.v(x, y) ** 2)
        return self.p(x, y) / (self.fluid["gamma"] - 1.0) + kinetic

    def rate(self, name: str, x: Array, y: Array) -> Array:
        """∂/∂t of ``u``, ``v``, ``p``, ``T`` or ``rho``; zero when steady."""
        return self.rates.get(name, constant(0.0))(x, y)

    def stress(self, x: Array, y: Array) -> Array:
        """(…, 2, 2) viscous stress τ = μ(∇u + ∇uᵀ − ⅔ ∇·u 1)."""
        g = np.stack([gradient(self.u, x, y), gradient(self.v, x, y)], axis=-2)
        divergence = g[..., 0, 0] + g[..., 1, 1]
        strain = g + np.swapaxes(g, -1, -2) - 2.0 / 3.0 * divergence[..., None, None] * np.eye(2)
        return self.viscosity * strain


def constant(value: float) -> Scalar:
    """A function that is ``value`` everywhere, of the arguments' shape."""
    return lambda x, y: value + 0.0 * (x + y)


def gradient(f: Scalar, x: Array, y: Array) -> Array:
    """(…, 2) gradient of f to rounding, by a complex step.

    f(x + iε) = f(x) + iε f'(x) + O(ε²) for a real analytic f (Squire & Trapp
    1998, SIAM Review 40), so nothing cancels and ε may be tiny.
    """
    step = 1e-30
    x, y = np.broadcast_arrays(np.asarray(x, float), np.asarray(y, float))
    fx = np.imag(f(x + 1j * step, y + 0j)) / step
    fy = np.imag(f(x + 0j, y + 1j * step)) / step
    return np.stack([fx, fy], axis=-1)


def polygon_contour(vertices: Array, order: int = 40) -> tuple[Array, Array]:
    """Gauss points (sides, order, 2) and n dA (sides, order, 2) along a closed polygon.

    ``vertices`` (k, 2) counter-clockwise give the outward normal.
    """
    start = np.asarray(vertices, float)
    side = np.roll(start, -1, axis=0) - start
    t, w = np.polynomial.legendre.leggauss(order)
    points = start[:, None] + side[:, None] * (0.5 + 0.5 * t)[:, None]
    normal = np.stack([side[:, 1], -side[:, 0]], axis=-1)
    return points, normal[:, None] * (0.5 * w)[:, None]


def box_contour(x0: float, y0: float, x1: float, y1: float, order: int = 40) -> tuple[Array, Array]:
    """The same for a box; sides in the order bottom, right, top, left."""
    return polygon_contour(np.array([[x0, y0], [x1, y0], [x1, y1], [x0, y1]]), order)


def circle_contour(x: float, y: float, r: float, count: int = 256) -> tuple[Array, Array]:
    """Points (1, count, 2) and n dA on a circle; the trapezoidal rule is spectral there."""
    t = 2 * np.pi * (np.arange(count) + 0.5) / count
    n = np.stack([np.cos(t), np.sin(t)], axis=-1)[None]
    return np.array([x, y]) + r * n, n * (2 * np.pi * r / count)


def fluxes(flow: ExactFlow, contour: tuple[Array, Array]) -> dict[str, Array]:
    """Exact fluxes through each side of a contour, outward positive.

    Keys, arrays of shape (sides,) or (sides, 2): ``mass``; ``momentum`` (ρu u·n);
    ``force`` (−p n + τ·n, on the fluid inside); ``pressure`` and ``viscous``, its
    parts; ``angular_momentum`` and ``moment`` about the origin; ``kinetic_energy``
    and ``work`` (force·u); ``heat`` (ρcT u·n) and ``conduction`` (−k ∇T·n) when
    there is a temperature and a constant density; ``total_energy`` when compressible.
    """
    points, ds = contour
    x, y = points[..., 0], points[..., 1]
    u, rho = flow.velocity(x, y), flow.density(x, y)
    mass = rho * np.sum(u * ds, axis=-1)
    pressure = -flow.p(x, y)[..., None] * ds
    viscous = np.einsum("...ij,...j->...i", flow.stress(x, y), ds)
    force = pressure + viscous
    momentum = mass[..., None] * u
    out = {
        "mass": mass,
        "momentum": momentum,
        "pressure": pressure,
        "viscous": viscous,
        "force": force,
        "angular_momentum": x * momentum[..., 1] - y * momentum[..., 0],
        "moment": x * force[..., 1] - y * force[..., 0],
        "kinetic_energy": 0.5 * mass * np.sum(u * u, axis=-1),
        "work": np.sum(force * u, axis=-1),
    }
    if flow.T is not None and "specific_heat" in flow.fluid:
        out["heat"] = mass * flow.fluid["specific_heat"] * flow.T(x, y)
        out["conduction"] = -flow.fluid["conductivity"] * np.sum(gradient(flow.T, x, y) * ds, axis=-1)
    if flow.compressible:
        out["total_energy"] = mass / rho * flow.total_energy(x, y)
    return {name: value.sum(axis=1) for name, value in out.items()}
