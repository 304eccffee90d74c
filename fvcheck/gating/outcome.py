"""What a check file was found to say: plain values that pass between processes."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import asdict, dataclass
from typing import Any

PASSED, MISSED, UNUSABLE, UNDECIDED = 0, 1, 2, 3
"""Exit statuses of the contract."""

_WORST_FIRST = (UNUSABLE, MISSED, UNDECIDED, PASSED)


def worst_status(statuses: Iterable[int]) -> int:
    """The one that counts: 2 before 1 before 3 before 0."""
    reached = set(statuses)
    return next((status for status in _WORST_FIRST if status in reached), PASSED)


@dataclass(frozen=True)
class Finding:
    """One thing that was asked.

    kind : "case" (could it be read and balanced), "row" (a verdict),
        "expectation" or "baseline"
    name : what was looked at
    status : 0 passed, 1 missed, 2 could not be looked at, 3 undecided or mesh-limited
    message : one sentence, also where it passed
    value : the number that was found, where it is one
    """

    kind: str
    name: str
    status: int
    message: str
    value: float | None = None

    @property
    def passed(self) -> bool:
        return self.status == PASSED

    def to_dict(self) -> dict[str, Any]:
        """Plain types, with ``passed``."""
        return asdict(self) | {"passed": self.passed}


@dataclass(frozen=True)
class Outcome:
    """What one check file came to.

    check : the check file; baseline : where its baseline is, "" for none
    result : the result file, None where there is none
    diagnosis : what `fvcheck.diagnose` says of open rows, "" where none is
    """

    check: str
    findings: tuple[Finding, ...]
    result: dict[str, Any] | None = None
    seconds: float = 0.0
    diagnosis: str = ""
    baseline: str = ""

    @property
    def status(self) -> int:
        """That of the worst finding; 2 where there is none, since nothing was looked at."""
        if not self.findings:
            return UNUSABLE
        return worst_status(finding.status for finding in self.findings)

    @property
    def failures(self) -> tuple[Finding, ...]:
        """All that did not pass, the worst first."""
        out = [finding for finding in self.findings if not finding.passed]
        return tuple(sorted(out, key=lambda finding: _WORST_FIRST.index(finding.status)))
