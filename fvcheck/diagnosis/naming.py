"""Which of the causes may be named: those that leave almost nothing, and far less than the others."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np

from fvcheck.diagnosis.cause import Cause, Told
from fvcheck.diagnosis.fitting import Fit, Ledgers, fit, in_bands

Array = np.ndarray

# Mean square of imbalances in sampling bands below which there is nothing to explain.
# Bands stand for three standard deviations, so that clean ledgers leave some 0.02.
_NOTHING = 0.3

# A named cause leaves at most so large a share, and so much in bands (mean squares).
# The share alone would not do: among 300 flows with a smooth error, seven were
# "explained" to 0.5 % by chance, by a factor on the pressure mostly, with 49 to 6,800 left.
# Cell averages of a gas leave 11 to 13 of ten million with the right gamma: no chance either.
_ENOUGH = ((0.05, 1.0), (0.005, 10.0), (1e-5, 100.0))

# A rival that leaves at most this many times as much is as good; clean ledgers leave so much.
_AS_GOOD, _CLEAN = 4.0, 0.02


@dataclass(frozen=True, eq=False)
class Candidate:
    """A cause with its fit; ``told`` is None where its coefficient makes no sense."""

    cause: Cause
    fit: Fit
    told: Told | None


@dataclass(frozen=True, eq=False)
class Why:
    """What one law's ledgers say.

    before : mean square imbalance in sampling bands; coarse : in resolution bands
    named : causes that explain it; ranked : all, the best first
    """

    law: str
    before: float
    coarse: float
    named: tuple[Candidate, ...]
    ranked: tuple[Candidate, ...]

    @property
    def next_left(self) -> float | None:
        """What the best of the causes leaves that are not named, nor hold one that is."""
        held = [set(c.cause.model.columns) for c in self.named]
        others = [
            c.fit.left
            for c in self.ranked
            if c.told is not None and not any(columns <= set(c.cause.model.columns) for columns in held)
        ]
        return min(others, default=None)

    @property
    def silent(self) -> bool:
        """Whether there is nothing to explain."""
        return self.before < _NOTHING


def explain(law: str, ledgers: Ledgers, causes: Sequence[Cause]) -> Why:
    found = ledgers.found()
    before, coarse = in_bands(found), in_bands(found, "resolution")
    if before < _NOTHING:
        return Why(law, before, coarse, (), ())
    tried = []
    for cause in causes:
        fitted = fit(ledgers, cause.model)
        if fitted is not None and np.isfinite(fitted.theta).all():
            if fitted.misfit > _ENOUGH[1][1] and fitted.left <= _ENOUGH[2][0]:
                # What is left has one sign from block to block; the fit's own interval takes it for chance.
                fitted = replace(fitted, half=fitted.half * np.sqrt(fitted.misfit))
            tried.append(Candidate(cause, fitted, cause.tell(fitted)))
    tried.sort(key=lambda c: c.fit.left)
    return Why(law, before, coarse, tuple(_named(tried)), tuple(tried))


def _named(tried: Sequence[Candidate]) -> list[Candidate]:
    good = [c for c in tried if c.told is not None and _explains(c.fit)]
    if not good:
        return []
    # What lies within the bands lies there: less is luck.
    least = max(good[0].fit.misfit, _CLEAN)
    good = [c for c in good if c.fit.misfit <= _AS_GOOD * least]
    # More unknowns always leave less; fewer that leave as little say more.
    few = min(c.cause.model.unknowns for c in good)
    good = [c for c in good if c.cause.model.unknowns == few]
    idle = frozenset().union(*(c.cause.makes_idle for c in good))
    # A coefficient that had to be one number, and is, speaks for its cause.
    return sorted((c for c in good if c.cause.name not in idle), key=lambda c: not c.cause.fixed)


def _explains(fit: Fit) -> bool:
    return any(fit.left <= left and fit.misfit <= misfit for left, misfit in _ENOUGH)
