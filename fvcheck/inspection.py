"""What is in an export: mesh, arrays and their roles, patches, steps, suspicions."""

from __future__ import annotations

import shlex
from collections.abc import Mapping, Sequence
from contextlib import suppress
from dataclasses import asdict, dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np

from fvcheck.errors import FieldError
from fvcheck.fields import ArrayRow, describe
from fvcheck.flow import Flow, flow_of_export, step_number
from fvcheck.flowfields import mesh_arrays
from fvcheck.hints import Hint
from fvcheck.mesh.assemble import Assembly, assemble
from fvcheck.mesh.mesh import Mesh
from fvcheck.mesh.piece import Export, Piece
from fvcheck.notebook import html_hints, html_line, html_table
from fvcheck.plausible import STILL, field_hints
from fvcheck.version import __version__

Array = np.ndarray

SCHEMA = "fvcheck-inspection/1"

_KINDS = {
    4: "line", 5: "triangle", 6: "strip", 7: "polygon", 8: "quadrangle", 9: "quadrangle", 12: "hexahedron",
    11: "hexahedron", 13: "wedge", 16: "prism", 22: "quadratic triangle", 23: "quadratic quadrangle",
    28: "quadratic quadrangle", 30: "quadratic quadrangle", 34: "quadratic triangle", 36: "quadratic polygon",
    42: "polyhedron",
}  # fmt: skip
"""VTK cell type -> what it is called here."""


@dataclass(frozen=True)
class ArrayFacts:
    """One array as `ArrayRow` has it, and how many of its values are no finite numbers."""

    row: ArrayRow
    not_finite: int


@dataclass(frozen=True)
class PatchFacts:
    """One patch of the boundary.

    bounds : (x0, y0, x1, y1)
    normal : mean outward unit normal; of length 1 on a straight patch, 0 on a closed loop
    through : mean velocity through it [m/s], outward positive; None where unknown
    stillness : root-mean-square speed on it over that of the field; None where unknown
    """

    name: str
    edges: int
    length: float
    bounds: tuple[float, float, float, float]
    normal: tuple[float, float]
    kind: str
    body: bool
    wall: bool
    through: float | None
    stillness: float | None


@dataclass(frozen=True)
class Inspection:
    """What `inspect_file` found.

    cell_kinds : kind of cell as stored -> number of mesh cells that come from it
    thickness : of an export one cell thick, else 0
    times : of the stored states; empty for a single state without a time
    """

    file: str
    format: str
    step: int
    steps: int
    times: tuple[float, ...]
    plane: str
    thickness: float
    cells: int
    points: int
    cell_kinds: dict[str, int]
    bounds: tuple[float, float, float, float]
    area: float
    edge_lengths: tuple[float, float]
    arrays: tuple[ArrayFacts, ...]
    patches: tuple[PatchFacts, ...]
    bodies: tuple[str, ...]
    hints: tuple[Hint, ...]

    def to_dict(self) -> dict[str, Any]:
        """Plain types, for JSON."""
        data = asdict(self)
        data["arrays"] = [asdict(facts.row) | {"not_finite": facts.not_finite} for facts in self.arrays]
        return {"schema": SCHEMA, "version": __version__} | data

    def _repr_html_(self) -> str:
        head = html_line(self.file, self.format, f"{self.cells} cells", f"{self.points} points")
        arrays = html_table(
            ("array", "at", "components", "role", "least", "most"),
            [
                (f.row.name, f.row.location, f.row.components, f.row.role or "", f.row.low, f.row.high)
                for f in self.arrays
            ],
            "arrays",
        )
        patches = html_table(
            ("patch", "edges", "length", "velocity through it", "", ""),
            [(p.name, p.edges, p.length, p.through, p.kind, "body" if p.body else "") for p in self.patches],
            "patches",
        )
        return head + arrays + patches + html_hints(self.hints)


def inspect_file(path: str | Path, *, step: int | str = "last", **settings: Any) -> Inspection:
    """Look into an export; works where roles are ambiguous or no velocity is found.

    ``settings`` are those of `flow_of_export`. Raises FormatError, MeshError,
    FieldError or SetupError for a file or a setting that cannot be used.
    """
    from fvcheck.formats.registry import open_export

    export = open_export(path)
    number = step_number(export, step)
    pieces = export.load(number)
    told = _told(settings)
    flow: Flow | None = None
    try:
        flow = _flow(export, number, pieces, settings)
        assembly, hints = flow.assembly, flow.hints
        arrays = _arrays(pieces, assembly, told)
    except FieldError as error:
        points_only = not any(piece.cell_data for piece in pieces)
        assembly = assemble(pieces, plane=settings.get("plane", "auto"), keep_centres=points_only)
        arrays = _arrays(pieces, assembly, told)
        hints = (*export.hints, *assembly.hints, Hint("unclear-fields", str(error)))
        # What is clear may still show how the flow moves.
        with suppress(FieldError):
            flow = _flow(export, number, _without_unclear(pieces, arrays), settings)
    patches = _patches(assembly.mesh, flow)
    mesh = assembly.mesh
    return Inspection(
        file=str(export.path),
        format=export.format,
        step=number,
        steps=export.steps,
        times=export.times,
        plane=assembly.plane,
        thickness=assembly.thickness,
        cells=mesh.n_cells,
        points=mesh.n_points,
        cell_kinds=_cell_kinds(pieces, assembly),
        bounds=mesh.bounds,
        area=float(mesh.areas.sum()),
        edge_lengths=_edge_lengths(mesh),
        arrays=arrays,
        patches=patches,
        bodies=mesh.bodies,
        hints=(
            *hints,
            *(field_hints(flow) if flow else ()),
            *_suspicions(patches, flow.location if flow else None),
        ),
    )


def _flow(export: Export, step: int, pieces: Sequence[Piece], settings: Mapping[str, Any]) -> Flow:
    """The flow of pieces that are loaded already."""
    return flow_of_export(replace(export, load=lambda _: pieces), step=step, **settings)


def _told(settings: Mapping[str, Any]) -> dict[str, Any]:
    """Role -> array as the user named it, among the fields or as a property of the fluid."""
    fluid = settings.get("fluid")
    named = {role: getattr(fluid, role, None) for role in ("density", "viscosity", "conductivity")}
    return {role: name for role, name in named.items() if isinstance(name, str)} | dict(
        settings.get("fields") or {}
    )


def _without_unclear(pieces: Sequence[Piece], arrays: Sequence[ArrayFacts]) -> list[Piece]:
    """The pieces less the arrays that share a claim to a role."""
    unclear = {(facts.row.location, facts.row.name) for facts in arrays if facts.row.role.endswith("?")}
    return [
        replace(
            piece,
            point_data={name: v for name, v in piece.point_data.items() if ("point", name) not in unclear},
            cell_data={name: v for name, v in piece.cell_data.items() if ("cell", name) not in unclear},
        )
        for piece in pieces
    ]


def _cell_kinds(pieces: Sequence[Piece], assembly: Assembly) -> dict[str, int]:
    types = np.concatenate([piece.types for piece in pieces])[assembly.cell_source]
    found: dict[str, int] = {}
    for kind, count in zip(*np.unique(types, return_counts=True)):
        name = _KINDS.get(int(kind), f"type {int(kind)}")
        found[name] = found.get(name, 0) + int(count)
    return found


def _edge_lengths(mesh: Mesh) -> tuple[float, float]:
    """The shortest and the longest edge."""
    end = np.roll(mesh.nodes, -1)
    end[mesh.offsets[1:] - 1] = mesh.nodes[mesh.offsets[:-1]]
    lengths = np.hypot(*(mesh.points[end] - mesh.points[mesh.nodes]).T)
    return float(lengths.min()), float(lengths.max())


def _arrays(pieces: Sequence[Piece], assembly: Assembly, told: Mapping[str, Any]) -> tuple[ArrayFacts, ...]:
    point_data, cell_data = mesh_arrays(pieces, assembly)
    out = []
    for row in describe(point_data, cell_data, told):
        values = (point_data if row.location == "point" else cell_data)[row.name]
        bad = int(np.count_nonzero(~np.isfinite(values))) if values.dtype.kind == "f" else 0
        out.append(ArrayFacts(row, bad))
    return tuple(out)


def _patches(mesh: Mesh, flow: Flow | None) -> tuple[PatchFacts, ...]:
    through, stillness = _motion(flow) if flow is not None else ({}, {})
    out = []
    for name in mesh.boundary.names:
        ends = mesh.points[mesh.patch_edges(name)]
        step = ends[:, 1] - ends[:, 0]
        length = float(np.hypot(*step.T).sum())
        net = step.sum(axis=0) / length
        low, high = ends.min(axis=(0, 1)), ends.max(axis=(0, 1))
        out.append(
            PatchFacts(
                name=name,
                edges=len(ends),
                length=length,
                bounds=(float(low[0]), float(low[1]), float(high[0]), float(high[1])),
                normal=(float(net[1]), float(-net[0])),
                kind=mesh.kinds.get(name, ""),
                body=name in mesh.bodies,
                wall=flow is not None and name in flow.walls,
                through=through.get(name),
                stillness=stillness.get(name),
            )
        )
    return tuple(out)


def _motion(flow: Flow) -> tuple[dict[str, float], dict[str, float]]:
    """Patch -> mean velocity through it, and speed on it over that of the field.

    Values at the boundary come from fits of degree 2, without regard to walls
    that were told: this is what the data say.
    """
    from fvcheck.overlay.overlay import lay_over
    from fvcheck.sampling.compiling import compile_sampler
    from fvcheck.sampling.quadrature import PER_PIECE, along
    from fvcheck.surfaces import ControlSurface

    field = flow.fields.get("velocity")
    if field is None:
        return {}, {}
    whole = field.values[:, :2].astype(float)
    overlay = lay_over(flow.mesh, ControlSurface.domain())
    places, weights = along(overlay.start, overlay.end)
    triangle = np.repeat(overlay.triangle, PER_PIECE, axis=0)
    averages = flow.case.cell_values == "average"
    sampler = compile_sampler(
        flow.mesh, np.unique(triangle), field.location, averages=averages, axis=flow.case.axis
    )
    if not np.isfinite(whole[sampler.sources]).all():
        return {}, {}  # no numbers at the boundary: nothing can be said
    velocity = sampler.evaluate(2, sampler.apply(2, whole), triangle, places)[0]
    whole = whole[np.isfinite(whole).all(axis=1)]
    typical = float(np.sqrt(np.mean(np.sum(whole**2, axis=1)))) if len(whole) else 0.0
    through, stillness = {}, {}
    patch = np.repeat(overlay.patch, PER_PIECE)
    weight = (overlay.lengths[:, None] * weights).ravel()
    normal = (overlay.normals[:, None, :] * weights[None, :, None]).reshape(-1, 2)
    for number, name in enumerate(flow.mesh.boundary.names):
        here = patch == number
        length = weight[here].sum()
        through[name] = float(np.einsum("qi,qi->", velocity[here], normal[here]) / length)
        if typical > 0:
            mean_square = float((np.sum(velocity[here] ** 2, axis=1) * weight[here]).sum() / length)
            stillness[name] = float(np.sqrt(mean_square)) / typical
    return through, stillness


def _suspicions(patches: Sequence[PatchFacts], location: str | None) -> list[Hint]:
    still = [
        patch
        for patch in patches
        if location is not None
        and patch.stillness is not None
        and patch.stillness < STILL[location]
        and not patch.wall
    ]
    if not still:
        return []
    names = ", ".join(patch.name for patch in still)
    told = " ".join(f"--wall {shlex.quote(patch.name)}" for patch in still)
    most = 100 * max(patch.stillness or 0.0 for patch in still)
    return [
        Hint(
            "looks-like-wall",
            f"on {names} the speed is at most {most:.2g} % of the field's; if no-slip walls: {told}",
        )
    ]
