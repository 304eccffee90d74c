"""Many check files at once, in processes of their own."""

from __future__ import annotations

import os
from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass, replace
from functools import partial
from glob import glob
from pathlib import Path
from typing import Any

from fvcheck.errors import FvcheckError, SetupError
from fvcheck.gating.outcome import UNUSABLE, Finding, Outcome, worst_status
from fvcheck.gating.running import failed, run_case
from fvcheck.jsonout import dumps
from fvcheck.ledger import SCHEMA
from fvcheck.notebook import html_line, html_table
from fvcheck.tasks import each_done
from fvcheck.verdict import worst
from fvcheck.version import __version__
from fvcheck.wholefile import write_whole

Work = Callable[..., Outcome]


@dataclass(frozen=True)
class GateResult:
    """What `gate` found, one outcome per check file in the order they were named.

    updated : baselines that were written
    """

    outcomes: tuple[Outcome, ...]
    updated: tuple[str, ...] = ()

    @property
    def status(self) -> int:
        """Exit status: 2 (unusable) before 1 (missed) before 3 (undecided) before 0."""
        return worst_status(outcome.status for outcome in self.outcomes) if self.outcomes else UNUSABLE

    @property
    def passed(self) -> bool:
        """Whether everything asked for is met."""
        return self.status == 0

    @property
    def failures(self) -> tuple[tuple[str, Finding], ...]:
        """(check file, finding) of all that did not pass."""
        return tuple((outcome.check, finding) for outcome in self.outcomes for finding in outcome.failures)

    def to_dict(self) -> dict[str, Any]:
        """Strict JSON: of one check file its result file with what was judged; of several, ``cases``."""
        cases = [
            {
                "check": outcome.check,
                "status": outcome.status,
                "seconds": outcome.seconds,
                "findings": [finding.to_dict() for finding in outcome.findings],
                "diagnosis": outcome.diagnosis,
            }
            for outcome in self.outcomes
        ]
        results = [outcome.result for outcome in self.outcomes]
        head: dict[str, Any] = {"schema": SCHEMA, "version": __version__, "status": self.status}
        if len(results) == 1 and results[0] is not None:
            return head | results[0] | {"status": self.status, "cases": cases}
        for case, result in zip(cases, results):
            case["result"] = result
        return head | {
            "verdict": worst(None if result is None else result["verdict"] for result in results),
            "expectations": [
                entry | {"check": outcome.check}
                for outcome in self.outcomes
                for entry in (outcome.result or {}).get("expectations", ())
            ],
            "cases": cases,
            "hints": [],
        }

    def junit(self) -> str:
        """JUnit XML: a suite per check file, a case per finding."""
        from fvcheck.gating.junit import junit_xml

        return junit_xml(self.outcomes)

    def markdown(self) -> str:
        """A summary for a pull request."""
        from fvcheck.gating.markdown import markdown_text

        return markdown_text(self.outcomes)

    def _repr_html_(self) -> str:
        rows = [
            (outcome.check, finding.name, finding.message)
            for outcome in self.outcomes
            for finding in outcome.failures
        ]
        head = html_line("gate", f"{len(self.outcomes)} check files", f"status {self.status}")
        return head + (html_table(("check file", "what", "why"), rows) if rows else "")


def gate(
    paths: str | Path | Iterable[str | Path],
    *,
    workers: int | None = None,
    scheduler: str | None = None,
    update_baseline: bool = False,
    diagnosis: bool = True,
    time_limit: float | None = None,
    on_case: Callable[[Outcome, int], None] | None = None,
    work: Work = run_case,
) -> GateResult:
    """Everything that check files ask for: verdicts, [[expect]] tables, baselines.

    paths : check files, or patterns of them
    workers : processes at a time, by default as many as there are processors; 0
        runs all in this process, where a crash of a reader would end it
    scheduler : address of a Dask scheduler whose workers run the cases, in place of ``workers``;
        they see check files by their absolute paths
    update_baseline : write the results as baselines instead of comparing with
        them; all or, where any case could not be run, none
    diagnosis : with what `fvcheck.diagnose` says of open rows
    time_limit : seconds that a case may take; longer, and it is ended and has failed
    on_case : called with each outcome and the number of all, for a progress bar
    work : what is run for each check file, a function of a module

    Raises SetupError for a pattern that meets nothing, for baselines that cannot
    be written, and for a time limit that is none or is given with ``workers`` 0;
    what fails within a case is a finding of its outcome.
    """
    named = check_files(paths)
    if workers is not None and workers < 0:
        raise SetupError(f"{workers} workers are asked for", mend="Give 0 or more.")
    if time_limit is not None and not time_limit > 0:
        raise SetupError(f"a time limit of {time_limit:g} s is given", mend="Give a number above 0.")
    options = (diagnosis, not update_baseline)
    if workers is None and scheduler is None:
        workers = os.cpu_count() or 1
    where = {"workers": workers, "scheduler": scheduler, "limit": time_limit}
    found: dict[str, Outcome] = {}
    for path, outcome in _run(named, options, where, work):
        found[path] = outcome
        if on_case is not None:
            on_case(outcome, len(named))
    outcomes = tuple(found[path] for path in named)
    updated: tuple[str, ...] = ()
    if update_baseline:
        updated = _write_baselines(outcomes)
    return GateResult(outcomes, updated)


def check_files(paths: str | Path | Iterable[str | Path]) -> list[str]:
    """The check files that are meant, patterns expanded; a missing one stays, to be told as a failure."""
    out: list[str] = []
    for path in [paths] if isinstance(paths, str | Path) else paths:
        text = str(path)
        if Path(text).exists() or not any(letter in text for letter in "*?["):
            out.append(text)
            continue
        met = sorted(glob(text, recursive=True))
        if not met:
            raise SetupError(f"the pattern {text!r} meets no check file", mend="Check the path.")
        out += met
    if not out:
        raise SetupError("no check file is given", mend="Name CHECK.toml files.")
    return list(dict.fromkeys(out))


def _run(
    named: Sequence[str], options: tuple[bool, bool], where: dict[str, Any], work: Work
) -> Iterator[tuple[str, Outcome]]:
    """Outcomes as they come; a failure where the process of a case dies again and again."""
    paths = [str(Path(path).absolute()) for path in named] if where["scheduler"] else named
    for number, outcome in each_done(partial(_worked, work, options), paths, **where):
        path = named[number]
        if isinstance(outcome, FvcheckError):
            yield path, failed(path, str(outcome))
        else:
            yield path, replace(outcome, check=path)


def _worked(work: Work, options: tuple[bool, bool], path: str) -> Outcome:
    try:
        return work(path, *options)
    except Exception as error:  # a case that goes wrong in a way nobody thought of fails by itself
        return failed(path, f"{type(error).__name__}: {error}")


def _write_baselines(outcomes: Sequence[Outcome]) -> tuple[str, ...]:
    """Write all of them, or none; SetupError says why none is."""
    wanted = [outcome for outcome in outcomes if outcome.baseline]
    if not wanted:
        raise SetupError("no check file names a baseline", mend='Add [baseline] file = "baseline.json".')
    unusable = next((outcome for outcome in outcomes if outcome.status == UNUSABLE), None)
    if unusable is not None:
        why = unusable.failures[0] if unusable.failures else None
        raise SetupError(
            f"no baseline is written: {why.message if why else 'nothing was found'}", where=unusable.check
        )
    paths = [Path(outcome.baseline).resolve() for outcome in wanted]
    if len(set(paths)) < len(paths):
        raise SetupError("no baseline is written: two check files name the same one")
    texts = [dumps(_numbers_only(outcome.result or {})).encode("utf-8") for outcome in wanted]
    before = [path.read_bytes() if path.is_file() else None for path in paths]
    done: list[int] = []
    try:
        for number, (path, text) in enumerate(zip(paths, texts)):
            write_whole(path, text, "baseline")
            done.append(number)
    except FvcheckError:
        for number in done:
            old = before[number]
            if old is None:
                paths[number].unlink()
            else:
                write_whole(paths[number], old, "baseline")
        raise
    return tuple(outcome.baseline for outcome in wanted)


def _numbers_only(result: dict[str, Any]) -> dict[str, Any]:
    """Without what was judged: a baseline holds numbers, not opinions on them."""
    return {key: value for key, value in result.items() if key not in ("expectations", "diagnosis")}
