"""Snapshots of a run: one file with several states, or files in natural order."""

from __future__ import annotations

import itertools
import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FormatError, SetupError
from fvcheck.flow import Flow, flow_of_export
from fvcheck.hints import Hint
from fvcheck.laterflow import later_flow
from fvcheck.mesh.assemble import Assembly, assemble
from fvcheck.mesh.mesh import Mesh
from fvcheck.mesh.piece import Export, Piece

Array = np.ndarray

_LINE = 3  # VTK_LINE


@dataclass(frozen=True)
class Snapshot:
    """One stored state: ``step`` of ``export``, its time, or the number of the iteration."""

    export: Export
    step: int
    time: float | None
    number: int


class MeshKeeper:
    """Assembles the mesh of a snapshot, or hands out the last one where nothing has changed.

    Geometry is compared by a digest of its arrays, so no copy of it is kept.
    """

    def __init__(self) -> None:
        self._digest = b""
        self._last: Assembly | None = None
        self.lines = False
        """Whether the last one has line cells, whose data count on the boundary."""

    def __call__(self, pieces: Sequence[Piece], **settings: Any) -> Assembly:
        self.lines = any(bool((piece.types == _LINE).any()) for piece in pieces)
        digest = _digest(pieces, settings)
        if self._last is None or digest != self._digest:
            self._last, self._digest = assemble(pieces, **settings), digest
        return self._last


def _digest(pieces: Sequence[Piece], settings: dict[str, Any]) -> bytes:
    """A digest of all that the mesh and its patches are made of."""
    from hashlib import blake2b

    mix = blake2b(repr(sorted(settings.items())).encode(), digest_size=16)
    for piece in pieces:
        mix.update(repr((piece.name, sorted(piece.patches), sorted(piece.tag_names))).encode())
        arrays = [piece.points, piece.types, piece.offsets, piece.nodes]
        arrays += [piece.ghost] if piece.ghost is not None else []
        if piece.faces is not None:
            arrays += list(vars(piece.faces).values())
        for name in sorted(piece.patches):
            arrays += [piece.patches[name].offsets, piece.patches[name].nodes]
        arrays += [piece.cell_data[name] for name in sorted(piece.tag_names) if name in piece.cell_data]
        for array in arrays:
            mix.update(repr((array.shape, array.dtype.str)).encode())
            mix.update(np.ascontiguousarray(array).view(np.uint8).data if array.size else b"")
    return mix.digest()


class Series:
    """Snapshots in order of time, else of iteration.

    times : one per snapshot, or None for iterations
    hints : what was noticed on the way
    """

    def __init__(self, snapshots: Sequence[Snapshot], reading: dict[str, Any], hints: Iterable[Hint]) -> None:
        self.snapshots = tuple(snapshots)
        self.reading = reading
        self.hints = tuple(hints)
        self._keeper = MeshKeeper()
        self._recent: dict[int, Flow] = {}
        self._whole: tuple[Export, object, Flow] | None = None

    def __len__(self) -> int:
        return len(self.snapshots)

    @property
    def times(self) -> Array | None:
        """(n,) times, None where the snapshots have none."""
        if any(snapshot.time is None for snapshot in self.snapshots):
            return None
        return np.array([snapshot.time for snapshot in self.snapshots], float)

    def steady(self) -> Series:
        """The same snapshots as iterations towards a steady state."""
        bare = [replace(s, time=None, number=self._iteration(s)) for s in self.snapshots]
        return Series(bare, self.reading, self.hints)

    @staticmethod
    def _iteration(snapshot: Snapshot) -> int:
        time = snapshot.time
        return int(time) if time is not None and float(time).is_integer() else snapshot.number

    def flow(self, number: int, needed: Mapping[str, Array | None] | None = None) -> Flow:
        """The flow of a snapshot; the mesh object is that of the one before where it has not changed.

        needed : where only some rows are of use, which (`SampledVolume.needed`); the
            flow may then hold these only, see `fvcheck.laterflow`

        Raises what `open_flow` does.
        """
        if number in self._recent:
            return self._recent[number]
        snapshot = self.snapshots[number]
        if needed is not None and self._known_mesh(number) is not None:
            assert self._whole is not None
            flow = later_flow(self._whole[2], snapshot.export, snapshot.step, needed)
            if flow is not None:
                return replace(flow, case=replace(flow.case, time=snapshot.time))
        flow = flow_of_export(snapshot.export, step=snapshot.step, assembler=self._keeper, **self.reading)
        flow = replace(flow, case=replace(flow.case, time=snapshot.time))
        if len(self) > 1 and self.times is not None:
            flow = replace(flow, beside=lambda: self.flow(number - 1 if number > 0 else 1))
        # A rate of change, and its error, may look at five neighbours.
        self._recent = dict([*self._recent.items(), (number, flow)][-5:])
        # Values that line cells give on the boundary are believed or not by the whole field.
        judged = self._keeper.lines and any(field.location == "cell" for field in flow.fields.values())
        layout = None if judged else _layout(snapshot)
        self._whole = None if layout is None else (snapshot.export, layout, flow)
        return flow

    def mesh(self, number: int) -> Mesh:
        """The mesh of a snapshot, without reading it where the file tells that it is the known one."""
        if number in self._recent:
            return self._recent[number].mesh
        return self._known_mesh(number) or self.flow(number).mesh

    def _known_mesh(self, number: int) -> Mesh | None:
        """The mesh of the snapshot read whole last, if the file tells that this one has the same layout."""
        snapshot = self.snapshots[number]
        if self._whole is None or snapshot.export is not self._whole[0]:
            return None
        return self._whole[2].mesh if _layout(snapshot) == self._whole[1] else None

    def extended(self, snapshots: Sequence[Snapshot]) -> None:
        """Take more snapshots in, behind those that are there."""
        self.snapshots += tuple(snapshots)

    def remove(self, number: int) -> None:
        """Take a snapshot out again."""
        self.snapshots = self.snapshots[:number] + self.snapshots[number + 1 :]
        self._recent.clear()
        self._whole = None

    def point_velocity(self, number: int) -> Array | None:
        """(n, 2) velocity of the mesh's points, by three snapshots; None at rest, or for other cells."""
        from fvcheck.timeweights import rate_weights, window

        times = self.times
        if times is None or len(self) < 2:
            return None
        near = range(len(self))[window(len(self), number, 3)]
        meshes = [self.mesh(k) for k in near]
        here = meshes[list(near).index(number)]
        same = [(k, mesh) for k, mesh in zip(near, meshes) if mesh is here or same_cells(mesh, here)]
        if len(same) < 2 or all(mesh is here for _, mesh in same):
            return None
        steps = [k for k, _ in same]
        weights = rate_weights(times[steps], steps.index(number))
        return np.sum([w * mesh.points for w, (_, mesh) in zip(weights, same)], axis=0)


def _layout(snapshot: Snapshot) -> object:
    reader = snapshot.export.rows
    return None if reader is None else reader.layout(snapshot.step)


def same_cells(one: Any, other: Any) -> bool:
    """Whether two meshes are the same cells over the same numbers of points, moved or not."""
    return (
        one.n_points == other.n_points
        and np.array_equal(one.offsets, other.offsets)
        and np.array_equal(one.nodes, other.nodes)
    )


def open_series(files: str | Path | Export | Sequence[str | Path], **reading: Any) -> Series:
    """The snapshots of one file, a pattern such as ``run_*.vtu``, or several files.

    Several files come in natural order (run_2 before run_10), by their times
    where each has its own, else as iterations numbered as the files are.
    ``reading`` is that of `open_flow`, ``step`` left out. Raises FormatError for a
    file that cannot be read, SetupError for none at all.
    """
    from fvcheck.formats.registry import open_export

    if isinstance(files, Export):
        return Series(_of_one(files), reading, files.hints)
    paths = file_list(files)
    if len(paths) == 1:
        export = open_export(paths[0])
        return Series(_of_one(export), reading, export.hints)
    return of_exports([open_export(path) for path in paths], reading)


def file_list(files: str | Path | Sequence[str | Path]) -> list[Path]:
    """The files that are meant, patterns expanded, in natural order; SetupError for a pattern without any."""
    from glob import glob

    out: list[Path] = []
    for name in [files] if isinstance(files, str | Path) else files:
        if Path(name).exists() or not re.search(r"[*?[]", str(name)):
            out.append(Path(name))
            continue
        found = sorted(map(Path, glob(str(name), recursive=True)), key=natural)
        if not found:
            raise SetupError(f"the pattern {str(name)!r} meets no file", mend="Check the path.")
        out += found
    if not out:
        raise SetupError("no export is given", mend="Name at least one FILE.")
    return sorted(dict.fromkeys(out), key=natural)


def natural(path: Path) -> list[tuple[int, int, str]]:
    """A key that puts run_2 before run_10."""
    parts = re.split(r"(\d+)", str(path))
    return [(1, int(part), "") if part.isdigit() else (0, 0, part) for part in parts]


def numbers_in(paths: Sequence[Path]) -> list[int]:
    """The number that sets each file's name apart from the others', else 0, 1, 2, …"""
    found = [[int(part) for part in re.findall(r"\d+", path.stem)] for path in paths]
    if len({len(one) for one in found}) == 1:
        for column in zip(*found):
            if len(set(column)) == len(paths):
                return list(column)
    return list(range(len(paths)))


def _of_one(export: Export) -> list[Snapshot]:
    times: Sequence[float | None] = export.times or (None,)
    _check_order([t for t in times if t is not None], export.path)
    return [Snapshot(export, step, time, step) for step, time in enumerate(times)]


def of_exports(exports: Sequence[Export], reading: dict[str, Any]) -> Series:
    """Several files, one behind the other."""
    paths = [export.path for export in exports]
    if any(export.steps > 1 for export in exports):
        snapshots = [s for export in exports for s in _of_one(export)]
        if any(s.time is None for s in snapshots):
            raise SetupError(
                "some files hold several times, others none", mend="Give files of one kind, or a single one."
            )
        snapshots = _joined(snapshots)
        return Series(snapshots, reading, [hint for export in exports for hint in export.hints])
    times = [export.times[0] if export.times else None for export in exports]
    lacking = [k for k, time in enumerate(times) if time is None]
    if len(lacking) == 1 and len(times) > 1 and all(t > 0 for t in times if t is not None):
        # Readers take a lone time 0 for no time, which is what most writers mean by it.
        times[lacking[0]] = 0.0
    told = [time for time in times if time is not None]
    hints = [hint for export in exports for hint in export.hints]
    if len(set(told)) == len(exports):
        order = np.argsort(np.array(told))
    else:
        if told:
            hints.append(
                Hint("times-unused", "not every file has a time of its own: they are taken as iterations")
            )
        times, order = [None] * len(exports), np.arange(len(exports))
    numbers = numbers_in(paths)
    chosen = [Snapshot(exports[k], 0, times[k], numbers[k]) for k in order.tolist()]
    return Series(chosen, reading, dict.fromkeys(hints))


def _joined(snapshots: Sequence[Snapshot]) -> list[Snapshot]:
    """Restarted runs: where two files overlap, the later file counts."""
    by_time = {s.time: s for s in snapshots}
    ordered = [by_time[time] for time in sorted(by_time, key=lambda t: t or 0.0)]
    return [replace(s, number=k) for k, s in enumerate(ordered)]


def _check_order(times: Sequence[float], where: object) -> None:
    if any(b <= a for a, b in itertools.pairwise(times)):
        raise FormatError(
            "the times of the steps do not increase", where=where, mend="Export each time once, in order."
        )
