"""Everything a report is about, computed once: ledgers with their samples, forces, series, diagnosis."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import Any

from fvcheck.balancing import choose_laws, default_surfaces, ledger_of, result_of
from fvcheck.diagnosis import Diagnosis
from fvcheck.diagnosis.diagnosing import diagnose_open
from fvcheck.errors import FieldError, MeshError, SetupError
from fvcheck.evolution import moved
from fvcheck.flow import Flow, flow_of_export, stored_flow
from fvcheck.forceseries import force_series
from fvcheck.hints import Hint
from fvcheck.laws import Law
from fvcheck.ledger import Result
from fvcheck.many import sampled_volumes
from fvcheck.meshstudy import Study, study
from fvcheck.overtime import History
from fvcheck.routes import Forces, forces
from fvcheck.series import Series, file_list, open_series
from fvcheck.sources import Source
from fvcheck.surfaces import ControlSurface, name_all
from fvcheck.timeseries import history, with_forces
from fvcheck.verdict import OPEN
from fvcheck.volume import SampledVolume

KINDS = ("auto", "state", "history", "study")

# Files are taken as meshes of one case where numbers of cells differ by this factor.
_OTHER_MESH = 1.2


@dataclass(frozen=True)
class Question:
    """What is asked; as the parameters of `fvcheck.report`."""

    surfaces: tuple[ControlSurface, ...] | None = None
    laws: tuple[str | Law, ...] | None = None
    tolerance: Mapping[str, float] = field(default_factory=dict)
    scale: Mapping[str, float] = field(default_factory=dict)
    sources: tuple[Source, ...] = ()
    about: tuple[float, float] = (0.0, 0.0)
    bodies: Mapping[str, Any] | None = None
    moment_about: Any = (0.0, 0.0)
    wake_line: Any = None
    step: int | str | None = None
    kind: str = "auto"
    steady: bool = False
    reading: Mapping[str, Any] = field(default_factory=dict)

    @property
    def of_forces(self) -> dict[str, Any]:
        """The settings of `forces`."""
        told = {name: reference for name, reference in (self.bodies or {}).items() if reference is not None}
        return {"about": self.moment_about, "reference": told or None, "wake_line": self.wake_line}

    @property
    def judged(self) -> dict[str, Any]:
        """The settings of `balance_all` and the like."""
        return {
            "tolerance": dict(self.tolerance),
            "scale": dict(self.scale),
            "sources": self.sources,
            "about": self.about,
        }


@dataclass(frozen=True, eq=False)
class Gathered:
    """What was found.

    flow : the state that is shown, of a study that on the finest mesh
    result : its ledgers, of a history those of the last snapshot
    volumes : samples on each surface, in the order of the ledgers; laws of each
    left_out : remarks on what the report leaves out, and why
    """

    question: Question
    flow: Flow
    result: Result
    volumes: tuple[SampledVolume, ...]
    laws: tuple[Law, ...]
    files: tuple[str, ...]
    history: History | None = None
    study: Study | None = None
    forces: Forces | None = None
    diagnosis: Diagnosis | None = None
    left_out: tuple[str, ...] = ()

    @property
    def hints(self) -> tuple[Hint, ...]:
        """Those of all parts, each once."""
        parts = (self.result, self.history, self.study, self.forces, self.diagnosis)
        return tuple(dict.fromkeys(hint for part in parts if part is not None for hint in part.hints))


def gather(
    files: str | Path | Flow | Sequence[str | Path], asked: Question, tell: Callable[[str], None]
) -> Gathered:
    """Compute what a report holds; ``tell`` is called before each part with its name."""
    if asked.kind not in KINDS:
        raise SetupError(f"there is no kind {asked.kind!r} of report", mend=f"Use one of {', '.join(KINDS)}.")
    tell("reading")
    if isinstance(files, Flow):
        return _finish(_of_flow(files, asked, tell), tell)
    named = file_list(files)
    kind = _kind(named, asked)
    if kind == "history":
        return _finish(_of_series(named, asked, tell), tell)
    if kind == "study":
        return _finish(_of_meshes(named, asked, tell), tell)
    if len(named) > 1:
        raise SetupError(
            f"{len(named)} files are given for a report of one state", mend="Name one, or leave the kind out."
        )
    return _finish(_of_flow(_state(named[0], asked), asked, tell), tell)


def _kind(named: Sequence[Path], asked: Question) -> str:
    """What the files are: one state, snapshots of a run, or meshes of one case."""
    from fvcheck.formats.registry import open_export

    if asked.kind != "auto":
        return asked.kind
    if len(named) == 1:
        several = asked.step in (None, "all") and open_export(named[0]).steps > 1
        return "history" if several else "state"
    if asked.step not in (None, "all", "last"):
        return "study"
    ends = [open_export(path) for path in (named[0], named[-1])]
    if any(export.steps > 1 for export in ends):
        return "history" if asked.step != "last" else "study"
    cells = [sum(len(piece.types) for piece in export.load(0)) for export in ends]
    return "study" if max(cells) > _OTHER_MESH * max(min(cells), 1) else "history"


def _state(path: Path, asked: Question) -> Flow:
    from fvcheck.formats.registry import open_export

    step = "last" if asked.step in (None, "all") else asked.step
    return stored_flow(open_export(path), step=step, **asked.reading)


def _of_flow(flow: Flow, asked: Question, tell: Callable[[str], None]) -> Gathered:
    """The numbers of `balance_all`, with the samples kept."""
    chosen = list(asked.surfaces) if asked.surfaces else default_surfaces(flow)
    laws, volumes = _sampled(flow, chosen, asked, tell)
    result = result_of(
        flow,
        [
            ledger_of(v, laws, asked.tolerance, asked.scale, asked.sources, strict=asked.laws is not None)
            for v in volumes
        ],
    )
    return Gathered(asked, flow, result, volumes, laws, (flow.case.file,))


def _sampled(
    flow: Flow, surfaces: Sequence[ControlSurface], asked: Question, tell: Callable[[str], None]
) -> tuple[tuple[Law, ...], tuple[SampledVolume, ...]]:
    laws = choose_laws(flow, asked.laws)
    volumes, coming = [], sampled_volumes(flow, surfaces, laws, asked.about)
    for surface in surfaces:
        tell(f"surface {surface.name or surface.kind}")
        volumes.append(next(coming))
    return tuple(laws), tuple(volumes)


def _of_series(named: Sequence[Path], asked: Question, tell: Callable[[str], None]) -> Gathered:
    series = open_series(named if len(named) > 1 else named[0], **asked.reading)
    if asked.steady:
        series = series.steady()
    found = history(
        series,
        asked.surfaces,
        asked.laws,
        on_step=lambda entry, total: tell(f"snapshot {entry.number}"),
        **asked.judged,
    )
    last_forces: Forces | None = None
    left_out: tuple[str, ...] = ()
    if asked.bodies:
        try:
            more = force_series(
                series, list(asked.bodies), on_step=lambda total: tell("forces"), **asked.of_forces
            )
            found, last_forces = with_forces(found, more), more.found[-1]
        except (FieldError, MeshError) as error:
            left_out = (f"Forces: {error}",)
    flow = series.flow(len(series) - 1)
    chosen = list(asked.surfaces or default_surfaces(series.flow(0)))
    if len({one.name for one in chosen}) < len(chosen) or not all(one.name for one in chosen):
        chosen = list(name_all(chosen))
    laws, volumes = _sampled(flow, [_moved(one, series) for one in chosen], asked, tell)
    files = tuple(dict.fromkeys(str(snapshot.export.path) for snapshot in series.snapshots))
    last = found.entries[-1].result
    result = Result(last.case, last.ledgers, found.hints)
    return Gathered(
        *(asked, flow, result, volumes, laws, files),
        history=found,
        forces=last_forces,
        left_out=left_out,
    )


def _moved(surface: ControlSurface, series: Series) -> ControlSurface:
    """A moving surface where it stands at the last snapshot."""
    times = series.times
    if surface.motion is None or times is None:
        return surface
    return moved(surface, float(times[-1] - times[0]))


def _of_meshes(named: Sequence[Path], asked: Question, tell: Callable[[str], None]) -> Gathered:
    from fvcheck.formats.registry import open_export

    step = "last" if asked.step in (None, "all") else asked.step
    found = study(
        named,
        asked.surfaces,
        asked.laws,
        step=step,
        on_case=lambda result, total: tell(f"mesh of {result.case['cells']} cells"),
        **asked.judged,
        **asked.reading,
    )
    finest = next(p for p in named if str(p) == str(found.results[0].case["file"]))
    flow = _state(finest, replace(asked, step=step))
    first = flow_of_export(open_export(named[0]), step=step, **asked.reading)
    chosen = name_all(asked.surfaces or default_surfaces(first))
    laws, volumes = _sampled(flow, chosen, asked, tell)
    result = found.results[0]
    return Gathered(asked, flow, result, volumes, laws, tuple(map(str, named)), study=found)


def _finish(found: Gathered, tell: Callable[[str], None]) -> Gathered:
    """With forces on the bodies that were named, and a diagnosis where a row is open."""
    asked, flow = found.question, found.flow
    left_out = list(found.left_out)
    if asked.bodies and found.history is None:
        tell("forces")
        try:
            found = replace(found, forces=forces(flow, list(asked.bodies), **asked.of_forces))
        except (FieldError, MeshError) as error:
            left_out.append(f"Forces: {error}")
    open_laws = [row.law for ledger in found.result.ledgers for row in ledger.rows if row.verdict == OPEN]
    if open_laws:
        tell("diagnosis")
        diagnosis, why_not = diagnose_open(flow, open_laws, asked.sources)
        found = replace(found, diagnosis=diagnosis)
        if why_not:
            left_out.append(f"Diagnosis: {why_not}")
    return replace(found, left_out=tuple(left_out))
