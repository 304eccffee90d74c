"""What a gate found, as text: a line per check file, and what did not pass."""

from __future__ import annotations

from rich.console import RenderableType
from rich.text import Text

from fvcheck.gating import GateResult
from fvcheck.gating.outcome import MISSED, PASSED, UNDECIDED, UNUSABLE
from fvcheck.text.console import FOLDED, LEFT, heading, paragraph, plain_table, render, rich_characters

WORD = {PASSED: "passed", MISSED: "failed", UNUSABLE: "unusable", UNDECIDED: "undecided"}
_STYLE = {PASSED: "green", MISSED: "bold red", UNUSABLE: "bold red", UNDECIDED: "yellow"}
_MARK = {PASSED: "✓", MISSED: "✗", UNUSABLE: "✗", UNDECIDED: "?"}
_PLAIN_MARK = {PASSED: "=", MISSED: "!", UNUSABLE: "!", UNDECIDED: "?"}


def gate_text(found: GateResult, quiet: bool = False) -> str:
    """The table of check files, all that did not pass, diagnoses, and the last line."""
    parts: list[RenderableType] = []
    if not quiet:
        table = plain_table(("check file", FOLDED), ("outcome", LEFT), "passed", "of", "seconds")
        for outcome in found.outcomes:
            kept = sum(finding.passed for finding in outcome.findings)
            table.add_row(
                outcome.check,
                _marked(outcome.status),
                str(kept),
                str(len(outcome.findings)),
                f"{outcome.seconds:.1f}",
            )
        parts += [table, Text()]
        for outcome in found.outcomes:
            if not outcome.failures:
                continue
            parts.append(heading(outcome.check))
            for finding in outcome.failures:
                head = (f"{_mark(finding.status)} {finding.name}: ", _STYLE[finding.status])
                parts.append(paragraph(head, body=finding.message, indent=2))
            if outcome.diagnosis:
                parts.append(Text())
                parts += [paragraph(body=line, indent=2) for line in _joined(outcome.diagnosis)]
            parts.append(Text())
        parts += [paragraph(("baseline written: ", "dim"), body=path) for path in found.updated]
    passed = sum(outcome.status == PASSED for outcome in found.outcomes)
    last = Text.assemble(
        ("gate ", "bold"), _marked(found.status), f": {passed} of {len(found.outcomes)} passed"
    )
    return render([*parts, last])


def _mark(status: int) -> str:
    return (_MARK if rich_characters() else _PLAIN_MARK)[status]


def _marked(status: int) -> Text:
    return Text(f"{_mark(status)} {WORD[status]}", style=_STYLE[status])


def _joined(text: str) -> list[str]:
    """Paragraphs of a text whose continued lines are indented."""
    out: list[str] = []
    for line in text.splitlines():
        if line.startswith(" ") and out:
            out[-1] += " " + line.strip()
        else:
            out.append(line.strip())
    return out
