"""Outcomes as Markdown, short enough for a pull request."""

from __future__ import annotations

import re
from collections.abc import Sequence

from fvcheck.gating.outcome import MISSED, PASSED, UNDECIDED, UNUSABLE, Outcome, worst_status

_WORD = {
    PASSED: "✅ passed",
    MISSED: "❌ failed",
    UNUSABLE: "⛔ could not be checked",
    UNDECIDED: "❔ undecided",
}


def markdown_text(outcomes: Sequence[Outcome]) -> str:
    """One line per check file, then whatever did not pass, then diagnoses."""
    status = worst_status(outcome.status for outcome in outcomes) if outcomes else UNUSABLE
    lines = [f"## Conservation: {_WORD[status]}", ""]
    lines += ["| check file | outcome | passed | seconds |", "| --- | --- | ---: | ---: |"]
    for outcome in outcomes:
        kept = sum(finding.passed for finding in outcome.findings)
        lines.append(
            f"| {_cell(outcome.check)} | {_WORD[outcome.status]} | {kept} of {len(outcome.findings)} "
            f"| {outcome.seconds:.1f} |"
        )
    for outcome in outcomes:
        if not outcome.failures:
            continue
        lines += ["", f"### {_cell(outcome.check)}", "", "| what | outcome | why |", "| --- | --- | --- |"]
        for finding in outcome.failures:
            lines.append(f"| {_cell(finding.name)} | {_WORD[finding.status]} | {_cell(finding.message)} |")
        if outcome.diagnosis:
            lines += ["", *(f"> {_cell(line)}" for line in outcome.diagnosis.splitlines())]
    return "\n".join(lines) + "\n"


def _cell(text: str) -> str:
    """One line in which no letter of the text acts as Markdown or HTML."""
    line = " ".join("".join(c if c.isprintable() else " " for c in text).split())
    return re.sub(r"([\\`*_|<>\[\]])", r"\\\1", line)
