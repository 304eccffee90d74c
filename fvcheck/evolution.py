"""One control volume followed through the snapshots of a run."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace

import numpy as np

from fvcheck.balancing import choose_laws, ledger_of
from fvcheck.content import Change, Content, combined, content_of, rate_of
from fvcheck.errors import FieldError
from fvcheck.flow import Flow
from fvcheck.laws import Law
from fvcheck.ledger import Ledger, Row
from fvcheck.overlay.overlay import lay_over
from fvcheck.sources import Source
from fvcheck.surfaces import ControlSurface, Motion
from fvcheck.timeweights import integral_weights
from fvcheck.verdict import CLOSED, judge, judge_production
from fvcheck.volume import SampledVolume

Array = np.ndarray

# Snapshots whose contents are kept: two on either side settle the rate in the middle.
_REACH = 2


@dataclass(frozen=True)
class Taken:
    """What a snapshot by itself says of one surface: ledger without storage, levels, contents by law."""

    time: float
    ledger: Ledger
    levels: dict[str, float]
    contents: dict[str, Content] | None


@dataclass(frozen=True)
class Total:
    """A law between two times: change of content = time integral of what enters and is made.

    change : of the content; passed : integral of flux + boundary − source;
    imbalance : their sum, zero for an exact run; scale : integral of the scale,
    with half the change; bands as in a `Row`, the integration in time included.
    """

    law: str
    component: str | None
    unit: str
    start: float
    end: float
    change: float
    passed: float
    imbalance: float
    scale: float
    imbalance_percent: float | None
    sampling_band: float
    resolution_band: float
    time_band: float
    tolerance_percent: float
    verdict: str


class Evolution:
    """The ledgers of one surface, snapshot after snapshot.

    Fits and overlay are kept while the mesh and the surface stay where they
    are. With times, a ledger first has no storage; `settled` gives it one as
    soon as the snapshots around it are there.
    """

    def __init__(
        self,
        surface: ControlSurface,
        laws: Iterable[str | Law] | None,
        *,
        tolerance: Mapping[str, float],
        scale: Mapping[str, float],
        sources: Sequence[Source],
        about: tuple[float, float],
        unsteady: bool,
    ) -> None:
        self.surface, self.about, self.unsteady = surface, about, unsteady
        self._names = None if laws is None else list(laws)
        self._settings = (tolerance, scale, sources)
        self._told_scale = set(scale)
        self._volume: SampledVolume | None = None
        self._moved = False  # whether the mesh moved when it was compiled
        self._laws: list[Law] = []
        self.start: tuple[ControlSurface, float] | None = None
        """The surface as it is placed at the first snapshot, and the time of that."""
        self.times: list[float] = []
        self.bare: list[Ledger] = []
        self._contents: dict[int, dict[str, Content]] = {}
        self._levels: list[dict[str, float]] = []
        self.recompiled = 0

    def take(self, flow: Flow, point_velocity: Array | None = None) -> Ledger:
        """The ledger of the next snapshot, without what its neighbours in time have to say."""
        taken = self.measured(flow, point_velocity)
        self.add(taken, f"{flow.case.file}, step {flow.case.step}")
        return taken.ledger

    def measured(self, flow: Flow, point_velocity: Array | None = None) -> Taken:
        """What a snapshot says; it is not taken in."""
        volume = self._sample(flow, point_velocity)
        ledger = ledger_of(volume, self._laws, *self._settings, strict=self._names is not None)
        contents = None
        if self.unsteady and ledger.closed and not volume.has_rates:
            judged = {row.law for row in ledger.rows}
            contents = {law.name: content_of(volume, law) for law in self._laws if law.name in judged}
        time = np.nan if flow.case.time is None else flow.case.time
        levels = {law.name: volume.level(law) or 0.0 for law in self._laws}
        return Taken(time, ledger, levels, contents)

    def add(self, taken: Taken, where: str) -> None:
        """Take in the next snapshot, measured here or elsewhere; FieldError for one with other laws."""
        ledger = taken.ledger
        if self.bare and [row.label for row in ledger.rows] != [row.label for row in self.bare[0].rows]:
            raise FieldError(
                "this snapshot has other fields than the first, so that other laws can be evaluated",
                where=where,
                mend="Name the laws that all of them allow, such as --law mass,momentum.",
            )
        self.times.append(taken.time)
        self.bare.append(ledger)
        self._levels.append(taken.levels)
        if taken.contents is not None:
            number = len(self.bare) - 1
            self._contents[number] = taken.contents
            # The first one stays, for the change over all.
            for old in [k for k in self._contents if 0 < k < number - 2 * _REACH]:
                del self._contents[old]

    def needed(self) -> dict[str, Array | None] | None:
        """`SampledVolume.needed` of the volume compiled last; None before, and for one that moves."""
        moves = self._moved or (self.unsteady and self.surface.motion is not None)
        if self._volume is None or moves:
            return None
        return self._volume.needed()

    def shorten(self, count: int) -> None:
        """Forget all but the first ``count`` snapshots: the next one failed on another surface."""
        del self.times[count:], self.bare[count:], self._levels[count:]
        self._contents = {k: v for k, v in self._contents.items() if k < count}

    def _sample(self, flow: Flow, point_velocity: Array | None) -> SampledVolume:
        old, surface = self._volume, self._placed(flow)
        unmoved = surface.motion is None or not self.unsteady
        at_rest = unmoved and point_velocity is None and not self._moved
        self._moved = point_velocity is not None
        if old is not None and flow.mesh is old.flow.mesh and at_rest:
            self._volume = old.with_flow(flow)
        else:
            self.recompiled += 1
            self._laws = choose_laws(flow, self._names)
            self._volume = SampledVolume(
                flow,
                surface,
                lay_over(flow.mesh, surface),
                self._laws,
                unsteady=self.unsteady,
                point_velocity=point_velocity,
                about=self.about,
            )
        return self._volume

    def _placed(self, flow: Flow) -> ControlSurface:
        """The surface at this time: drawn at the first snapshot, moved on from there."""
        if self.start is None:
            self.start = (self.surface.resolve(flow.mesh), flow.case.time or 0.0)
        placed, start = self.start
        if not self.unsteady:
            return self.surface.resolve(flow.mesh) if self.surface.kind == "around" else placed
        return moved(placed, (flow.case.time or 0.0) - start)

    def settled(self, number: int) -> bool:
        """Whether the rate at a snapshot will not change by those to come."""
        return len(self.bare) > max(number + _REACH, 3)

    def ledger(self, number: int) -> Ledger:
        """The ledger of a snapshot, with storage from the snapshots around it that are kept."""
        bare = self.bare[number]
        if number not in self._contents or len(self.bare) < 2:
            return bare
        kept = [k for k in self._contents if abs(k - number) <= 2 * _REACH]
        times = np.array([self.times[k] for k in kept])
        changes = {}
        for law in self._contents[number]:
            contents = [self._contents[k][law] for k in kept]
            level = self._levels[number][law]
            changes[law] = rate_of(contents, times, kept.index(number), level, self._swing(law))
        rows = [self._with_storage(row, changes[row.law]) for row in bare.rows]
        return replace(bare, rows=tuple(rows))

    def _swing(self, law: str) -> Array:
        """(c,) how far the rate may lie from its mean where there are two snapshots: as the fluxes do."""
        first, last = ([r for r in self.bare[k].rows if r.law == law] for k in (0, -1))
        return np.array([abs((b.imbalance or 0.0) - (a.imbalance or 0.0)) for a, b in zip(first, last)])

    def _with_storage(self, row: Row, change: Change) -> Row:
        assert row.imbalance is not None and row.scale is not None
        c = 0 if row.component is None else "xy".index(row.component)
        value, time = float(change.value[c]), float(change.time[c])
        sampling = row.sampling_band + float(change.sampling[c]) + time
        resolution = max(row.resolution_band + float(change.resolution[c]) + time, sampling)
        # What enters an unsteady volume leaves it or is stored.
        size = row.scale + (
            0.0 if row.law in self._told_scale else 0.5 * float(np.hypot.reduce(change.value))
        )
        imbalance = row.imbalance + value
        nothing = row.imbalance_percent is None and bool(np.all(np.abs(change.value) <= change.floor))
        return replace(
            row,
            storage=value,
            imbalance=imbalance,
            scale=size,
            imbalance_percent=None if nothing or size == 0.0 else 100.0 * imbalance / size,
            sampling_band=sampling,
            resolution_band=resolution,
            rounding_band=row.rounding_band + float(change.rounding[c]),
            time_band=time,
            linear_imbalance=(row.linear_imbalance or 0.0) + float(change.linear[c]),
            verdict=row.verdict if nothing else _judged(row, imbalance, sampling, resolution, size),
        )

    def totals(self, scales: Sequence[Sequence[float]]) -> tuple[Total, ...]:
        """The balance between the first and the last snapshot, row by row.

        scales : per snapshot, those of its rows
        """
        n = len(self.bare)
        if n < 2 or 0 not in self._contents:
            return ()
        times = np.array(self.times)
        fine, coarse = integral_weights(times, 4), integral_weights(times, 3 if n > 3 else 2)
        trapezoid = integral_weights(times, 2)
        out = []
        for number, row in enumerate(self.bare[-1].rows):
            rows = [ledger.rows[number] for ledger in self.bare]
            ends = [self._contents[0][row.law], self._contents[n - 1][row.law]]
            change = combined(ends, np.array([-1.0, 1.0]), self._levels[0][row.law])
            c = 0 if row.component is None else "xy".index(row.component)
            passed = np.array([r.imbalance or 0.0 for r in rows])
            size = float(trapezoid @ [s[number] for s in scales])
            # Through two snapshots the course between them is unknown: half of what the fluxes swing.
            swing = 0.5 * abs(passed[-1] - passed[0]) * (times[-1] - times[0])
            time = float(swing if n == 2 else abs((fine - coarse) @ passed))
            sampling = float(change.sampling[c] + trapezoid @ [r.sampling_band for r in rows]) + time
            resolution = float(change.resolution[c] + trapezoid @ [r.resolution_band for r in rows]) + time
            total = float(change.value[c]) + float(fine @ passed)
            # As in a row: where nothing flows and nothing changes, rounding is not judged.
            nothing = (
                all(r.imbalance_percent is None for r in rows) and abs(change.value[c]) <= change.floor[c]
            )
            out.append(
                Total(
                    law=row.law,
                    component=row.component,
                    unit=row.unit.replace("/s", "").replace("N", "N s").replace("W", "J"),
                    start=float(times[0]),
                    end=float(times[-1]),
                    change=float(change.value[c]),
                    passed=float(fine @ passed),
                    imbalance=total,
                    scale=size,
                    imbalance_percent=None if nothing or size <= 0 else 100.0 * total / size,
                    sampling_band=sampling,
                    resolution_band=max(resolution, sampling),
                    time_band=time,
                    tolerance_percent=row.tolerance_percent or 0.0,
                    verdict=CLOSED
                    if nothing
                    else _judged(row, total, sampling, max(resolution, sampling), size),
                )
            )
        return tuple(out)


def _judged(row: Row, imbalance: float, sampling: float, resolution: float, size: float) -> str:
    if row.inequality:
        return judge_production(imbalance, resolution)
    return judge(imbalance, sampling, resolution, 0.01 * (row.tolerance_percent or 0.0) * size)


def moved(surface: ControlSurface, after: float) -> ControlSurface:
    """A surface carried on by its own motion: turned about its centre, then shifted with it."""
    motion = surface.motion
    if motion is None or after == 0.0:
        return surface
    shift, centre = after * np.array(motion.velocity), np.array(motion.centre)
    c, s = np.cos(motion.omega * after), np.sin(motion.omega * after)
    turn = np.array([[c, s], [-s, c]])
    rings = tuple((ring - centre) @ turn + centre + shift for ring in surface.rings)
    there = Motion(motion.velocity, motion.omega, tuple((centre + shift).tolist()))
    return replace(surface, rings=rings, motion=there)
