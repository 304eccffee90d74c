"""Potential flows (Batchelor; Milne-Thomson). Bernoulli's equation gives the pressure."""

from __future__ import annotations

import numpy as np

from exact.flow import Box, ExactFlow, Scalar


def _potential(name: str, domain: Box, feature: float, u: Scalar, v: Scalar, **more) -> ExactFlow:
    """ρ = 1, no viscosity, total pressure zero."""
    return ExactFlow(
        name=name,
        domain=domain,
        fluid={"density": 1.0, "viscosity": 0.0},
        feature=feature,
        u=u,
        v=v,
        p=lambda x, y: -0.5 * (u(x, y) ** 2 + v(x, y) ** 2),
        **more,
    )


def cylinder(radius: float = 1.0, speed: float = 1.0, circulation: float = -3.0) -> ExactFlow:
    """Circular cylinder with circulation Γ, counter-clockwise positive: no drag, lift −ρUΓ."""
    a2, g = radius**2, circulation / (2 * np.pi)

    def u(x, y):
        r2 = x * x + y * y
        return speed * (1 - a2 * (x * x - y * y) / r2**2) - g * y / r2

    def v(x, y):
        r2 = x * x + y * y
        return -2 * speed * a2 * x * y / r2**2 + g * x / r2

    size = 4 * radius
    return _potential(
        "cylinder",
        (-size, -size, size, size),
        radius / 2,
        u,
        v,
        speed=speed,
        length=2 * radius,
        hole=(0.0, 0.0, radius),
    )


def source(strength: float = 1.0, x: float = 0.3, y: float = -0.2, stream: float = 0.0) -> ExactFlow:
    """A source of ``strength`` (area per time) at (x, y) in a stream; force on it −ρUm.

    A disc around the source is left out. Without a stream, a box [−1,1]² sends
    .3015489935 m through its right side when the source is at (.3, −.2).
    """
    m = strength / (2 * np.pi)

    def r2(a, b):
        return (a - x) ** 2 + (b - y) ** 2

    return _potential(
        "source-in-stream" if stream else "source-in-box",
        (-1.0, -1.0, 1.0, 1.0),
        0.1,
        lambda a, b: stream + m * (a - x) / r2(a, b),
        lambda a, b: m * (b - y) / r2(a, b),
        speed=max(abs(stream), m / 0.2),
        hole=(x, y, 0.2),
    )


def rankine_half_body(strength: float = 1.0, speed: float = 1.0) -> ExactFlow:
    """A source at the origin in a stream, whose dividing line is a blunt body.

    Nose m/2πU ahead of the source, half-width m/4U beside it, m/2U far behind;
    largest speed on the body 1.2595905 U at 62.957° from downstream. The disc left out
    lies inside the body and passes through its nose.
    """
    flow = source(strength, 0.0, 0.0, speed)
    nose = strength / (2 * np.pi * speed)
    return _potential(
        "rankine-half-body",
        (-1.0, -1.0, 1.5, 1.0),
        nose / 2,
        flow.u,
        flow.v,
        speed=speed,
        length=strength / speed,
        hole=(0.0, 0.0, nose),
    )
