"""What an imbalance and its bands mean."""

from __future__ import annotations

from collections.abc import Iterable

CLOSED, UNDECIDED, MESH_LIMITED, OPEN = "closed", "undecided", "mesh-limited", "open"

VERDICTS = (CLOSED, UNDECIDED, MESH_LIMITED, OPEN)
"""From best to worst."""

EXIT_STATUS = {CLOSED: 0, OPEN: 1, UNDECIDED: 3, MESH_LIMITED: 3}

MEANING = {
    CLOSED: "balanced to the tolerance, beyond the error of measuring it",
    UNDECIDED: "the band straddles the tolerance: these data cannot decide",
    MESH_LIMITED: "out of tolerance by no more than this mesh explains: refine",
    OPEN: "out of tolerance beyond what the mesh explains: iterate, or look at the set-up",
}


def judge(imbalance: float, sampling: float, resolution: float, tolerance: float) -> str:
    """Verdict on an imbalance; all four in the same unit, the last three not negative."""
    size = abs(imbalance)
    if size + sampling <= tolerance:
        return CLOSED
    if size - sampling <= tolerance:
        return UNDECIDED
    return MESH_LIMITED if size <= resolution else OPEN


def judge_production(amount: float, resolution: float) -> str:
    """Verdict on what may only be made: open where less than nothing is, beyond what the mesh explains."""
    return OPEN if amount < -resolution else CLOSED


def worst(verdicts: Iterable[str | None]) -> str | None:
    """The worst of them; None when none was reached."""
    reached = [v for v in verdicts if v is not None]
    return max(reached, key=VERDICTS.index) if reached else None
