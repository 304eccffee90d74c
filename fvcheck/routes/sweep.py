"""Numbers against position, and where they are level."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from fvcheck.hints import Hint
from fvcheck.routes.estimate import Estimate

# Common practice: three or more contours in a row within 1 %.
LEAST, WITHIN = 3, 0.01


@dataclass(frozen=True)
class Plateau:
    """The longest stretch of positions over which a number is level.

    mean over it; spread, the largest departure from the mean
    """

    start: float
    end: float
    count: int
    mean: float
    spread: float


def plateau(
    positions: Sequence[float], values: Sequence[float | None], bands: Sequence[float], scale: float
) -> Plateau | None:
    """The longest run of three or more neighbours within 1 % of ``scale``, or their bands, of their mean.

    A missing value ends a run. None where there is no such run; of equally long
    ones the flattest.
    """
    x = np.array([np.nan if v is None else v for v in values], float)
    half = np.maximum(WITHIN * scale, np.asarray(bands, float))
    for count in range(len(x), LEAST - 1, -1):
        level = []
        for at in range(len(x) - count + 1):
            part = x[at : at + count]
            mean = float(part.mean())
            if np.all(np.abs(part - mean) <= half[at : at + count]):
                spread = float(np.abs(part - mean).max())
                level.append(
                    Plateau(float(positions[at]), float(positions[at + count - 1]), count, mean, spread)
                )
        if level:
            return min(level, key=lambda found: found.spread)
    return None


@dataclass(frozen=True)
class Sweep:
    """One body's force by each member of a family of surfaces."""

    body: str
    family: str
    positions: tuple[float, ...]
    estimates: tuple[Estimate, ...]

    def plateau(self, number: str) -> Plateau | None:
        """Where ``drag``, ``lift`` or ``moment`` is level; the scale of drag and lift is the force."""
        values = [getattr(e, number) for e in self.estimates]
        bands = [e.band(number) if np.isfinite(e.band(number)) else 0.0 for e in self.estimates]
        same = ("moment",) if number == "moment" else ("drag", "lift")
        sizes = [
            float(np.hypot.reduce([getattr(e, name) or 0.0 for name in same]))
            for e, value in zip(self.estimates, values)
            if value is not None
        ]
        return plateau(self.positions, values, bands, float(np.median(sizes))) if sizes else None

    def hints(self) -> list[Hint]:
        """Numbers without a plateau, and members that were refused."""
        out = []
        refused = [(x, e.refused) for x, e in zip(self.positions, self.estimates) if e.refused]
        if refused:
            message = (
                f"{self.body}, {len(refused)} of {len(self.positions)} members, at {refused[0][0]:.4g}: "
            )
            out.append(Hint("route-refused", message + refused[0][1]))
        for number in ("drag", "lift"):
            known = [getattr(e, number) for e in self.estimates if getattr(e, number) is not None]
            if len(known) >= LEAST and self.plateau(number) is None:
                out.append(
                    Hint(
                        "no-plateau",
                        f"{self.body}: {number} over {self.family} runs from {min(known):.5g} to "
                        f"{max(known):.5g} and is level nowhere",
                    )
                )
        return out

    def to_dict(self) -> dict[str, Any]:
        """One entry of ``sweeps`` in the result file."""
        from dataclasses import asdict

        levels = {name: self.plateau(name) for name in ("drag", "lift", "moment")}
        return {
            "body": self.body,
            "family": self.family,
            "positions": list(self.positions),
            "forces": [asdict(estimate) for estimate in self.estimates],
            "plateau": {name: None if found is None else asdict(found) for name, found in levels.items()},
        }
