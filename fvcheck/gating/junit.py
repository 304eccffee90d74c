"""Outcomes as JUnit XML, in the common schema: testsuites, testsuite, testcase, failure, error, skipped."""

from __future__ import annotations

import re
from collections.abc import Sequence
from xml.etree import ElementTree as Tree

from fvcheck.gating.outcome import MISSED, UNDECIDED, UNUSABLE, Finding, Outcome
from fvcheck.verdict import OPEN

# What XML 1.0 cannot hold, however it is escaped.
_FORBIDDEN = re.compile("[^\t\n\r\x20-\ud7ff\ue000-\ufffd\U00010000-\U0010ffff]")


def junit_xml(outcomes: Sequence[Outcome]) -> str:
    """A suite per check file, a case per finding.

    Missed expectations, open rows and drift are failures, what cannot be looked
    at is an error, undecided and mesh-limited rows are skipped: no pass.
    """
    root = Tree.Element("testsuites", {"name": "fvcheck gate"})
    totals = dict.fromkeys(("tests", "failures", "errors", "skipped"), 0)
    for outcome in outcomes:
        findings = outcome.findings or (Finding("case", "case", UNUSABLE, "nothing was looked at"),)
        counts = {
            "tests": len(findings),
            "failures": sum(finding.status == MISSED for finding in findings),
            "errors": sum(finding.status == UNUSABLE for finding in findings),
            "skipped": sum(finding.status == UNDECIDED for finding in findings),
        }
        for key, count in counts.items():
            totals[key] += count
        suite = Tree.SubElement(root, "testsuite", {"name": _clean(outcome.check)})
        suite.attrib.update({key: str(count) for key, count in counts.items()})
        suite.set("time", f"{outcome.seconds:.3f}")
        for number, finding in enumerate(findings):
            _case(suite, outcome, finding, outcome.seconds if number == 0 else 0.0)
    root.attrib.update({key: str(count) for key, count in totals.items()})
    root.set("time", f"{sum(outcome.seconds for outcome in outcomes):.3f}")
    Tree.indent(root)
    return '<?xml version="1.0" encoding="UTF-8"?>\n' + Tree.tostring(root, encoding="unicode") + "\n"


def _case(suite: Tree.Element, outcome: Outcome, finding: Finding, seconds: float) -> None:
    case = Tree.SubElement(
        suite,
        "testcase",
        {
            "classname": _clean(outcome.check),
            "name": _clean(f"{finding.kind}: {finding.name}" if finding.kind == "row" else finding.name),
            "time": f"{seconds:.3f}",
        },
    )
    if finding.passed:
        return
    tag = {MISSED: "failure", UNUSABLE: "error", UNDECIDED: "skipped"}[finding.status]
    inner = Tree.SubElement(case, tag, {"message": _clean(finding.message)})
    if tag == "skipped":
        return
    inner.set("type", finding.kind)
    text = finding.message
    if finding.kind == "row" and OPEN in finding.message and outcome.diagnosis:
        text += "\n\n" + outcome.diagnosis
    inner.text = _clean(text)


def _clean(text: str) -> str:
    return _FORBIDDEN.sub("?", text)
