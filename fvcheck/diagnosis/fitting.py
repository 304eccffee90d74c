"""Weighted regression of the ledgers of many blocks on what a cause would leave in them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np

from fvcheck.diagnosis.cells import Column
from fvcheck.diagnosis.volumes import Blocks, Found, measure

Array = np.ndarray

# Weights depend on the bands of the corrected ledger, and these on the coefficients.
_ROUNDS = 6

# A band below this share of the typical one is luck, and must not rule the fit.
_LEAST_BAND = 0.3

# Half-widths of intervals: bands stand for three standard deviations of what is
# sampled at one block; blocks overlap, and share their errors.
_COVERAGE = 2.0


@dataclass(frozen=True, eq=False)
class Model:
    """What becomes of the ledger: r + Σ a_k(θ) T_k.

    columns : T_k by name; amounts : θ -> a, None for a = θ; starts : where θ is looked for from
    """

    columns: tuple[str, ...]
    unknowns: int
    amounts: Callable[[Array], Array] | None = None
    starts: Callable[[Array], list[Array]] | None = None

    def at(self, theta: Array) -> Array:
        return theta if self.amounts is None else self.amounts(theta)

    def slopes(self, theta: Array) -> Array:
        """(k, p) ∂a/∂θ by central differences."""
        if self.amounts is None:
            return np.eye(self.unknowns)
        out = []
        for number in range(self.unknowns):
            step = np.zeros(self.unknowns)
            step[number] = 1e-6 * max(abs(theta[number]), 1e-6)
            out.append((self.at(theta + step) - self.at(theta - step)) / (2.0 * step[number]))
        return np.array(out).T


@dataclass(frozen=True, eq=False)
class Fit:
    """One cause fitted.

    theta, half : (p,) and the half-width of its interval
    misfit : mean square of what is left, in sampling bands of the corrected ledger
    left : the same as a share of the mean square before, in the bands of then. Both are
        counted in bands of their own: a cause that makes all terms small makes bands small too
    """

    theta: Array
    half: Array
    left: float
    misfit: float


@dataclass(frozen=True, eq=False)
class Ledgers:
    """Imbalances of one law over blocks, ready for regression; edges that bound no block left out."""

    blocks: Blocks
    total: Column
    columns: dict[str, Column]
    outside: Array
    shaken: Array | None

    @classmethod
    def of(
        cls,
        blocks: Blocks,
        total: Column,
        columns: dict[str, Column],
        outside: Array,
        shaken: Array | None,
    ) -> Ledgers:
        used = np.unique(blocks.border.indices)
        few = Blocks(blocks.border[:, used].tocsr(), blocks.cells, blocks.size)

        def cut(c: Column) -> Column:
            return Column(c.edge[:, used], c.cell)

        return cls(
            few,
            cut(total),
            {name: cut(c) for name, c in columns.items()},
            outside[used],
            None if shaken is None else shaken[:, used],
        )

    def found(self, names: Sequence[str] = (), amounts: Sequence[float] | Array = ()) -> Found:
        """The ledger with so much of the columns added."""
        whole = self.total
        for name, amount in zip(names, amounts):
            whole = whole + self.columns[name] * float(amount)
        return measure(self.blocks, whole, self.outside, self.shaken)

    def values(self, name: str) -> Array:
        """(k·c,) a column over the blocks."""
        c = self.columns[name]
        return self.blocks.sums(c.edge[-1], None if c.cell is None else c.cell[-1]).ravel()


def in_bands(found: Found, kind: str = "sampling") -> float:
    """Mean square of the imbalances in bands of a kind."""
    return float(np.mean((found.value.ravel() / _sigma(found, kind)) ** 2))


def _sigma(found: Found, kind: str = "sampling") -> Array:
    band = getattr(found, kind)
    typical = np.median(band, axis=0)
    # Components share what one of them can be sure of.
    least = _LEAST_BAND * np.maximum(typical, 0.1 * typical.max())
    # Where nothing moves, bands may be nothing; squares of what is divided by them must stay numbers.
    return np.maximum(np.maximum(band, least), 1e-14 * np.abs(found.value).max(initial=0.0)).ravel() + 1e-140


def fit(ledgers: Ledgers, model: Model) -> Fit | None:
    """The best of the starts; None where the signature vanishes or cannot be told apart."""
    before = ledgers.found()
    r = before.value.ravel()
    matrix = np.column_stack([ledgers.values(name) for name in model.columns])
    if not np.isfinite(matrix).all() or not np.all(np.abs(matrix).max(axis=0) > 0.0):
        return None
    sigma = _sigma(before)
    theta, kept = None, np.inf
    for start in [np.zeros(model.unknowns)] if model.starts is None else _starts(model, matrix, r, sigma):
        found = _solve(model, matrix, r, sigma, start)
        if found is None:
            continue
        left = float(np.sum(((r + matrix @ model.at(found)) / sigma) ** 2))
        if left < kept:
            theta, kept = found, left
    if theta is None:
        return None
    for _ in range(_ROUNDS):
        sigma = _sigma(ledgers.found(model.columns, model.at(theta)))
        again = _solve(model, matrix, r, sigma, theta)
        if again is None:
            break
        close = np.allclose(again, theta, rtol=1e-6)
        theta = again
        if close:
            break
    after = ledgers.found(model.columns, model.at(theta))
    sigma = _sigma(after)
    rest = after.value.ravel()
    misfit = float(np.mean((rest / sigma) ** 2))
    left = misfit / max(in_bands(before), 1e-300)
    slopes = matrix @ model.slopes(theta) / sigma[:, None]
    inverse = np.linalg.pinv(slopes.T @ slopes)
    # Where more is left than the bands allow, the residual tells how sure the coefficients are.
    half = _COVERAGE * np.sqrt(np.maximum(np.diag(inverse), 0.0) * max(1.0, 9.0 * misfit))
    return Fit(theta, half, left, misfit)


def _starts(model: Model, matrix: Array, r: Array, sigma: Array) -> list[Array]:
    assert model.starts is not None
    free, *_ = np.linalg.lstsq(matrix / sigma[:, None], -r / sigma, rcond=None)
    return model.starts(free)


def _solve(model: Model, matrix: Array, r: Array, sigma: Array, theta: Array) -> Array | None:
    """Gauss-Newton with halved steps; one step for a linear model."""

    def cost(t: Array) -> float:
        return float(np.sum(((r + matrix @ model.at(t)) / sigma) ** 2))

    for _ in range(1 if model.amounts is None else 30):
        slopes = matrix @ model.slopes(theta) / sigma[:, None]
        size = np.linalg.norm(slopes, axis=0)
        if not np.all(size > 0.0):
            return None
        rest = (r + matrix @ model.at(theta)) / sigma
        scaled, *_ = np.linalg.lstsq(slopes / size, -rest, rcond=1e-10)
        step = scaled / size
        if model.amounts is None:
            return theta + step
        here, share = cost(theta), 1.0
        while share > 1e-4 and not cost(theta + share * step) < here:
            share *= 0.5
        if share <= 1e-4 or np.all(np.abs(share * step) <= 1e-9 * np.abs(theta)):
            break
        theta = theta + share * step
    return theta
