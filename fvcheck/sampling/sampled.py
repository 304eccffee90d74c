"""What sampling returns, and how such fields combine, gradients included."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

Array = np.ndarray


class Sampled(NamedTuple):
    """A field at q places: values (q,) or (q, 3), gradients (q, 2) or (q, 3, 2)."""

    value: Array
    gradient: Array

    def times(self, factor: Sampled | float) -> Sampled:
        """The product with a scalar field or a number; (fg)' = f'g + fg'."""
        if not isinstance(factor, Sampled):
            return Sampled(self.value * factor, self.gradient * factor)
        f, g = _aligned(factor.value, self.value.ndim), self.value
        slope = factor.gradient if g.ndim == 1 else factor.gradient[:, None, :]
        return Sampled(g * f, self.gradient * f[..., None] + g[..., None] * slope)

    def over(self, divisor: Sampled) -> Sampled:
        """The quotient by a scalar field."""
        return self.times(Sampled(1.0 / divisor.value, -divisor.gradient / divisor.value[:, None] ** 2))

    def plus(self, other: Sampled, factor: float = 1.0) -> Sampled:
        """The sum with ``factor`` times another field."""
        return Sampled(self.value + factor * other.value, self.gradient + factor * other.gradient)

    def squared(self) -> Sampled:
        """|f|² of a vector field."""
        return Sampled(
            np.sum(self.value**2, axis=1), 2.0 * np.einsum("qi,qij->qj", self.value, self.gradient)
        )


def uniform(value: float, count: int) -> Sampled:
    """The same number at ``count`` places."""
    return Sampled(np.full(count, value), np.zeros((count, 2)))


def _aligned(values: Array, ndim: int) -> Array:
    return values if ndim == 1 else values[:, None]
