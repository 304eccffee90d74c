"""Verdicts and [[expect]] tables against a result file: plain dictionaries in, findings out."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from typing import TYPE_CHECKING, Any

from fvcheck.errors import nearest
from fvcheck.gating.outcome import MISSED, PASSED, UNUSABLE, Finding
from fvcheck.verdict import EXIT_STATUS, MEANING

if TYPE_CHECKING:
    from fvcheck.checklimits import Expectation, Limit
    from fvcheck.checkmodel import CheckFile

Result = Mapping[str, Any]

_SIGNED = {"imbalance", "imbalance_percent"}
"""Numbers of either sign of which a ``max`` alone limits the size: a deficit is no better than a surplus."""


def row_label(row: Mapping[str, Any]) -> str:
    """Law and component in one word."""
    return str(row["law"]) if row["component"] is None else f"{row['law']}-{row['component']}"


def estimates_of(result: Result, body: str, method: str | None = None) -> list[Mapping[str, Any]]:
    """Forces on a body, in their order; of one route where it is named."""
    return [
        e for e in result.get("forces", ()) if e["body"] == body and (method is None or e["method"] == method)
    ]


def estimate_label(estimate: Mapping[str, Any]) -> str:
    """Body and route, with what tells several of one route apart."""
    more = estimate.get("surface") or ""
    if not more and isinstance(estimate.get("distance"), float) and estimate["method"] == "control-surface":
        more = f"{estimate['distance']:.4g}"
    return " ".join(filter(None, (estimate["body"], estimate["method"], more)))


def verdicts(check: CheckFile, result: Result, state: str = "") -> list[Finding]:
    """Every row's verdict, unless an [[expect]] names that verdict or bounds the imbalance."""
    spoken_of = {
        (e.surface, e.law, e.component)
        for e in check.expect
        if e.verdict is not None
        or any(
            e.limits[key].max is not None or e.limits[key].value is not None
            for key in _SIGNED & e.limits.keys()
        )
    }
    out = []
    for ledger in result["surfaces"]:
        for row in ledger["laws"]:
            name = ledger["name"], row["law"]
            if row["verdict"] is None or spoken_of & {(*name, row["component"]), (*name, None)}:
                continue
            text = f"{row['verdict']}: {MEANING[row['verdict']]}"
            if row["imbalance_percent"] is not None:
                text = f"{row['imbalance_percent']:.3g} % of the scale, {text}"
            out.append(
                Finding(
                    "row",
                    f"{state}{ledger['name']}, {row_label(row)}",
                    EXIT_STATUS[row["verdict"]],
                    text,
                    row["imbalance_percent"],
                )
            )
    return out


def expectations(check: CheckFile, result: Result, state: str = "") -> list[Finding]:
    """Every [[expect]] against every row or estimate it speaks of; at least one finding for each."""
    out: list[Finding] = []
    for number, expect in enumerate(check.expect, start=1):
        found = list(_of_surface(expect, result) if expect.surface is not None else _of_body(expect, result))
        for name, status, message, value in found:
            out.append(Finding("expectation", f"[[expect]] {number}: {state}{name}", status, message, value))
    return out


_Judged = tuple[str, int, str, float | None]


def _of_surface(expect: Expectation, result: Result) -> Iterator[_Judged]:
    label = f"{expect.surface}, {expect.law}" + (f"-{expect.component}" if expect.component else "")
    ledger = next((one for one in result["surfaces"] if one["name"] == expect.surface), None)
    if ledger is None:
        yield _missing(label, "surface", expect.surface, [one["name"] for one in result["surfaces"]])
        return
    rows = [
        row
        for row in ledger["laws"]
        if row["law"] == expect.law and expect.component in (None, row["component"])
    ]
    if not rows:
        yield _missing(label, "row", label, [row_label(row) for row in ledger["laws"]])
    for row in rows:
        name = f"{expect.surface}, {row_label(row)}"
        yield from _limits(name, expect.limits, row, row["unit"])
        if expect.verdict is not None:
            kept = row["verdict"] == expect.verdict
            yield (
                f"{name}: verdict",
                PASSED if kept else MISSED,
                f"the verdict is {row['verdict'] or 'none'}"
                + ("" if kept else f", expected is {expect.verdict}"),
                None,
            )


def _of_body(expect: Expectation, result: Result) -> Iterator[_Judged]:
    label = f"{expect.body} {expect.method or ''}".strip()
    bodies = list(dict.fromkeys(e["body"] for e in result.get("forces", ())))
    found = estimates_of(result, str(expect.body), expect.method)
    if expect.body not in bodies:
        yield _missing(label, "body", expect.body, bodies)
    elif not found:
        yield _missing(
            label, "route", expect.method, [e["method"] for e in estimates_of(result, str(expect.body))]
        )
    for estimate in found:
        yield from _limits(estimate_label(estimate), expect.limits, estimate, "", estimate.get("refused", ""))


def _limits(
    name: str, limits: Mapping[str, Limit], numbers: Mapping[str, Any], unit: str, why: str = ""
) -> Iterator[_Judged]:
    for quantity, limit in limits.items():
        value = numbers.get(quantity)
        unit_of_it = "%" if quantity.endswith("percent") else unit
        if value is None:
            message = f"there is no {quantity}, expected is {told(limit)}"
            yield f"{name}: {quantity}", MISSED, message + (f": {why}" if why else ""), None
            continue
        size_only = quantity in _SIGNED and limit.min is None and limit.value is None
        kept = limit.holds(abs(value) if size_only else value)
        message = f"{quantity} is {value:.6g} {unit_of_it}".rstrip()
        message += f", {'as' if kept else 'not as'} expected: {told(limit)}{' in size' if size_only else ''}"
        yield f"{name}: {quantity}", PASSED if kept else MISSED, message, value


def _missing(name: str, what: str, wanted: object, have: Sequence[str]) -> _Judged:
    names = list(dict.fromkeys(have))
    mend = nearest(str(wanted), names) or f"There are: {', '.join(names) or 'none'}."
    return name, UNUSABLE, f"there is no {what} {str(wanted)!r}. {mend}", None


def told(limit: Limit) -> str:
    """A limit in words: "1.2 within 2 %", "at most 0.1"."""
    parts = []
    if limit.value is not None:
        within = f"{limit.tolerance:g}" if limit.tolerance is not None else f"{limit.tolerance_percent:g} %"
        parts.append(f"{limit.value:g} within {within}")
    if limit.min is not None:
        parts.append(f"at least {limit.min:g}")
    if limit.max is not None:
        parts.append(f"at most {limit.max:g}")
    return ", ".join(parts)
