"""One check file, from its export to its outcome; runs in another process."""

from __future__ import annotations

import time
from collections.abc import Iterator, Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

import numpy as np

from fvcheck.errors import FvcheckError, SetupError
from fvcheck.gating.baselines import drifts, read_baseline
from fvcheck.gating.expecting import expectations, verdicts
from fvcheck.gating.outcome import PASSED, UNUSABLE, Finding, Outcome
from fvcheck.gating.states import states_of
from fvcheck.verdict import OPEN, worst

if TYPE_CHECKING:
    from fvcheck.checkmodel import CheckFile
    from fvcheck.flow import Flow
    from fvcheck.mesh.mesh import Mesh
    from fvcheck.settings import Settings
    from fvcheck.sources import Source


def run_case(path: str, diagnose_open: bool = True, compare: bool = True) -> Outcome:
    """The outcome of one check file; whatever goes wrong is in it as a finding of status 2.

    compare : with the baseline, where the check file names one
    """
    from fvcheck.settings import load_check, settled

    start = time.perf_counter()
    baseline = ""
    try:
        check = load_check(Path(path))
        if check.baseline is not None:
            baseline = str(check.folder / check.baseline.file)
        files = list(check.case_files())
        settings = settled(files[0], check)
        result, flows = _found(check, files, settings)
        findings = [Finding("case", "case", PASSED, f"{result['case']['file']} could be balanced")]
        findings += list(_judged(check, result))
        if check.baseline is not None and compare:
            findings += _against(Path(baseline), result, check.baseline.tolerance_percent)
        result["expectations"] = [f.to_dict() for f in findings if f.kind == "expectation"]
        words = _diagnosis(result, flows[-1], settings.sources) if diagnose_open else ""
        return Outcome(path, tuple(findings), result, time.perf_counter() - start, words, baseline)
    except FvcheckError as error:
        return failed(path, str(error), time.perf_counter() - start, baseline)
    except MemoryError:
        return failed(path, "the memory does not suffice", time.perf_counter() - start, baseline)
    except OSError as error:
        text = f"{error.strerror or error}{f' ({error.filename})' if error.filename else ''}"
        return failed(path, text, time.perf_counter() - start, baseline)
    except Exception as error:  # a fault of ours in one case must not hide the outcome of the others
        text = f"fvcheck met a fault of its own: {type(error).__name__}: {error}"
        return failed(path, text, time.perf_counter() - start, baseline)


def failed(path: str, message: str, seconds: float = 0.0, baseline: str = "") -> Outcome:
    """The outcome of a check file that could not be run."""
    return Outcome(path, (Finding("case", "case", UNUSABLE, message),), None, seconds, "", baseline)


def _found(check: CheckFile, files: list[Path], settings: Settings) -> tuple[dict[str, Any], list[Flow]]:
    """The result file: of several states the last one, with all of them under ``history``."""
    states = list(states_of(check, files, settings))
    entries = []
    for data, flow in states:
        data["case"]["mesh_digest"] = mesh_digest(flow.mesh)
        data["forces"], hints = _forces(check, settings, flow)
        data["hints"] += [hint for hint in hints if hint not in data["hints"]]
        entries.append(data)
    last = dict(entries[-1])
    if len(entries) > 1:
        last["history"] = [
            {key: entry["case"][key] for key in ("file", "step", "time")}
            | {key: entry[key] for key in ("verdict", "surfaces", "forces")}
            for entry in entries
        ]
    last["verdict"] = worst(entry["verdict"] for entry in entries)
    return last, [flow for _, flow in states]


def mesh_digest(mesh: Mesh) -> str:
    """Of points and cells: equal for runs that are sampled alike."""
    from hashlib import sha256

    mix = sha256()
    for array in (mesh.points, mesh.offsets, mesh.nodes):
        mix.update(repr((array.shape, array.dtype.str)).encode())
        mix.update(np.ascontiguousarray(array).tobytes())
    return mix.hexdigest()


def _forces(
    check: CheckFile, settings: Settings, flow: Flow
) -> tuple[list[dict[str, Any]], list[dict[str, str]]]:
    """Forces on the bodies of the check file, by the usual routes and those that are expected."""
    from fvcheck.routes import forces

    names = list(dict.fromkeys([*settings.bodies, *(e.body for e in check.expect if e.body is not None)]))
    out: list[dict[str, Any]] = []
    hints: list[dict[str, str]] = []
    told = {name: reference for name, reference in settings.bodies.items() if reference is not None}
    for name in names:
        expected = [e.method for e in check.expect if e.body == name and e.method is not None]
        given: dict[str, Any] = {
            "about": settings.moment_about([name]),
            "reference": told or None,
            "wake_line": settings.wakes,
        }
        found = forces(flow, [name], **given)
        have = {estimate.method for estimate in found.estimates}
        out += found.to_dict()["forces"]
        hints += [{"code": hint.code, "message": hint.message} for hint in found.hints]
        for method in dict.fromkeys(expected):
            if method in have:
                continue
            try:
                out += forces(flow, [name], methods=[method], **given).to_dict()["forces"]
            except FvcheckError as error:
                hints.append({"code": "route-left-out", "message": f"{name} {method}: {error}"})
    for estimate in out:
        estimate["arm"] = _arm(flow, estimate)
    return out, hints


def _arm(flow: Flow, estimate: dict[str, Any]) -> float:
    """Mean distance [m] of a body's wall from the point that its moment counts from."""
    edges = flow.mesh.patch_edges(estimate["body"])
    places = flow.mesh.points[edges].reshape(-1, 2) - np.asarray(estimate["moment_about"])
    return float(np.hypot(*places.T).mean()) if len(places) else 0.0


def _judged(check: CheckFile, result: dict[str, Any]) -> Iterator[Finding]:
    """Verdicts and expectations of the state, or of every state of several."""
    states = result.get("history") or [result]
    for number, state in enumerate(states):
        name = f"state {number}, " if len(states) > 1 else ""
        yield from verdicts(check, state, name)
        yield from expectations(check, state, name)


def _against(path: Path, result: dict[str, Any], tolerance_percent: float) -> list[Finding]:
    try:
        return drifts(result, read_baseline(path), tolerance_percent)
    except SetupError as error:
        return [Finding("baseline", "baseline", UNUSABLE, str(error))]


def _diagnosis(result: dict[str, Any], flow: Flow, sources: Sequence[Source]) -> str:
    """What a diagnosis says of the laws of open rows; "" where none is open."""
    from fvcheck.diagnosis.diagnosing import diagnose_open
    from fvcheck.text.diagnosis import diagnosis_text

    rows = [row for ledger in result["surfaces"] for row in ledger["laws"]]
    laws = [row["law"] for row in rows if row["verdict"] == OPEN]
    if not laws:
        return ""
    found, why_not = diagnose_open(flow, laws, sources)
    if found is None:
        return f"no diagnosis: {why_not}" if why_not else ""
    result["diagnosis"] = found.to_dict()["diagnosis"]
    return diagnosis_text(replace(found, hints=()), quiet=True).strip()
