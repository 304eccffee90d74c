"""A flow: the plane mesh of an export, the fields with a role, the fluid."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from functools import cached_property
from pathlib import Path
from typing import Any, Literal

import numpy as np

from fvcheck.errors import FvcheckError, SetupError
from fvcheck.fields import Field
from fvcheck.flowfields import read_fields
from fvcheck.fluid import Fluid
from fvcheck.hints import Hint
from fvcheck.mesh.assemble import Assembly, assemble
from fvcheck.mesh.mesh import Mesh
from fvcheck.mesh.near import Drawn, are_drawn, near_pieces
from fvcheck.mesh.piece import Export, Piece
from fvcheck.revolution import axis_of
from fvcheck.walls import Wall, Walls, settled

Array = np.ndarray
CellValues = Literal["average", "centroid"]
FieldNames = Mapping[str, str | Sequence[str]]


@dataclass(frozen=True)
class Case:
    """Where a flow comes from and how it is read.

    depth : None for results per metre
    axis : of an axisymmetric run, the coordinate (0, 1) along the axis; results
        are then for the whole turn
    """

    file: str
    format: str
    step: int
    steps: int
    time: float | None
    plane: str
    symmetry: str = "planar"
    depth: float | None = None
    cell_values: CellValues = "average"
    axis: int | None = None

    @property
    def per_metre(self) -> bool:
        """Whether results are per metre of depth."""
        return self.depth is None and self.axis is None


@dataclass(frozen=True, eq=False, repr=False)
class Flow:
    """One state of a run, in its plane.

    mesh : the plane mesh
    fields : role -> `Field`, values (n,) for scalars, (n, 3) for vectors in the
        axes of the plane (two in it, one out of it), at points or cells of
        ``mesh``, in the precision of the file
    fluid : properties
    case : where it comes from
    walls : patch -> velocity or spin of a no-slip wall
    hints : what was noticed on the way
    beside : reads the state stored next to this one; None where there is none
    """

    mesh: Mesh
    fields: Mapping[str, Field]
    fluid: Fluid
    case: Case
    walls: Mapping[str, Wall]
    hints: tuple[Hint, ...]
    assembly: Assembly
    beside: Callable[[], Flow] | None = None

    @property
    def location(self) -> str:
        """Where the leading field lives: "point" or "cell"."""
        first = self.fields.get("velocity") or next(iter(self.fields.values()))
        return first.location

    @property
    def out_of_plane(self) -> bool:
        """Whether a velocity out of the plane is there and not negligible."""
        return self._swirl_ratio > 1e-6

    @property
    def has_rates(self) -> bool:
        """Whether the export holds rates of change."""
        return any(role.startswith("rate:") for role in self.fields)

    @cached_property
    def change(self) -> tuple[Case, float] | None:
        """The state stored next to this one, and by what share (rms) its velocity, else momentum, differs.

        None where none is stored, where it cannot be read or is another mesh's, and where nothing moves.
        It is read when this is first asked for.
        """
        role = "velocity" if "velocity" in self.fields else "momentum"
        if self.beside is None or role not in self.fields:
            return None
        try:
            other = self.beside()
        except FvcheckError:
            return None  # that state is not what was asked for
        if role not in other.fields or self.fields[role].values.shape != other.fields[role].values.shape:
            return None
        here, there = (np.asarray(flow.fields[role].values, float) for flow in (self, other))
        size, apart = (float(np.sqrt(np.nanmean(values**2))) for values in (here, here - there))
        return (other.case, apart / size) if size > 0.0 else None

    @cached_property
    def _swirl_ratio(self) -> float:
        field = self.fields.get("velocity") or self.fields.get("momentum")
        if field is None:
            return 0.0
        speed = np.nanmax(np.abs(field.values[:, :2]), initial=0.0)
        normal = np.nanmax(np.abs(field.values[:, 2]), initial=0.0)
        return float(normal / speed) if speed > 0 else float(normal > 0)

    def __repr__(self) -> str:
        of = ", ".join(f"{role}={field.name}" for role, field in self.fields.items())
        return f"<Flow {self.case.file}, step {self.case.step}: {self.mesh!r}, {of}>"

    def _repr_html_(self) -> str:
        from fvcheck.notebook import html_hints, html_line, html_table

        head = html_line(self.case.file, f"{self.mesh.n_cells} cells", self.case.symmetry)
        fields = [(role, field.name, field.location) for role, field in self.fields.items()]
        patches = [(name, "wall" if name in self.walls else "") for name in self.mesh.boundary.names]
        tables = html_table(("role", "array", "at"), fields) + html_table(("patch", ""), patches)
        return head + tables + html_hints(self.hints)

    @classmethod
    def from_arrays(
        cls,
        points: Array,
        cells: Sequence[Sequence[int]] | tuple[Array, Array],
        *,
        point_data: Mapping[str, Array] | None = None,
        cell_data: Mapping[str, Array] | None = None,
        **settings: Any,
    ) -> Flow:
        """A flow from arrays: points (n, 2 or 3); cells a list of point lists, or (offsets, nodes).

        ``settings`` are those of `open_flow`.
        """
        points = np.atleast_2d(np.asarray(points))
        if points.shape[1] == 2:
            points = np.column_stack([points, np.zeros(len(points), points.dtype)])
        if isinstance(cells, tuple) and len(cells) == 2:
            offsets, nodes = (np.asarray(part, np.int64) for part in cells)
        else:
            counts = [len(cell) for cell in cells]
            offsets = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
            nodes = np.concatenate([np.asarray(cell, np.int64) for cell in cells])
        polygon = 7
        piece = Piece(
            points=points,
            types=np.full(len(offsets) - 1, polygon, np.uint8),
            offsets=offsets,
            nodes=nodes,
            point_data={k: np.asarray(v) for k, v in (point_data or {}).items()},
            cell_data={k: np.asarray(v) for k, v in (cell_data or {}).items()},
        )
        return cls._from_piece(piece, "arrays", settings)

    @classmethod
    def from_meshio(cls, mesh: Any, **settings: Any) -> Flow:
        """A flow from a ``meshio.Mesh``; ``settings`` are those of `open_flow`."""
        from fvcheck.formats.objects import piece_from_meshio

        return cls._from_piece(piece_from_meshio(mesh), "meshio", settings)

    @classmethod
    def from_pyvista(cls, dataset: Any, **settings: Any) -> Flow:
        """A flow from a pyvista (or VTK) data set; ``settings`` are those of `open_flow`."""
        from fvcheck.formats.vtk_convert import piece_of

        return cls._from_piece(piece_of(dataset), "VTK object", settings)

    @classmethod
    def _from_piece(cls, piece: Piece, what: str, settings: dict[str, Any]) -> Flow:
        from fvcheck.formats.check import check_piece

        checked = check_piece(piece, what)
        export = Export(path=Path(what), format=what, load=lambda step: [checked])
        return flow_of_export(export, **settings)


def open_flow(path: str | Path, **settings: Any) -> Flow:
    """Read an export.

    Parameters are those of `flow_of_export`. Raises FormatError, MeshError,
    FieldError or SetupError, each saying what is wrong, where, and how to mend it.
    """
    from fvcheck.formats.registry import open_export

    return stored_flow(open_export(Path(path)), **settings)


def stored_flow(export: Export, *, step: int | str = "last", **settings: Any) -> Flow:
    """A flow by `flow_of_export` that can be held against the state stored beside it (`Flow.change`)."""
    number = step_number(export, step)
    flow = flow_of_export(export, step=number, **settings)
    if export.steps < 2:
        return flow

    def same_mesh(pieces: Sequence[Piece], **options: Any) -> Assembly:
        """A mesh that did not change is not made twice."""
        points, cells = (sum(len(getattr(p, name)) for p in pieces) for name in ("points", "types"))
        fits = flow.assembly.point_source.max() < points and flow.assembly.cell_source.max() < cells
        return flow.assembly if fits else assemble(pieces, **options)

    settings = settings | {"assembler": same_mesh, "near": None}
    next_to = number - 1 if number > 0 else 1
    return replace(flow, beside=lambda: flow_of_export(export, step=next_to, **settings))


def flow_of_export(
    export: Export,
    *,
    fluid: Fluid | None = None,
    fields: FieldNames | None = None,
    plane: str = "auto",
    step: int | str = "last",
    cell_values: CellValues = "average",
    walls: Walls | None = None,
    symmetry: str = "planar",
    axis: str = "auto",
    depth: float | None = None,
    assembler: Callable[..., Assembly] = assemble,
    near: Sequence[Drawn] | None = None,
) -> Flow:
    """One step of an opened export as a flow.

    fluid : properties; its strings name arrays of the export
    fields : role -> array name, ``"VX,VY"`` or a list of components, with
        ``point:`` or ``cell:`` in front for a location; the rest by known names
    plane : "auto", "xy", "xz" or "yz"
    step : "last", or the number of a stored state (negative from the end)
    cell_values : a cell value is the "average" over the cell or its value at the "centroid"
    walls : no-slip patches; where they move with a velocity (vx, vy) in the plane, or
        {"omega": …, "centre": (x, y)} (see `fvcheck.walls.settled`)
    symmetry : "planar" or "axisymmetric"; a wedge is recognised as the latter
    axis : of an axisymmetric run, the coordinate along it: "x", "y" or "auto"
        (see `fvcheck.revolution.axis_of`)
    depth : out-of-plane extent of a plane run that results are multiplied by [m]
    assembler : how pieces become a mesh; a series gives one that keeps the last mesh
    near : the drawn surfaces that the flow is for. Of an export in several pieces only the
        cells that these need are then kept, piece by piece; the boundary is whole
    """
    fluid = fluid or Fluid()
    number = step_number(export, step)
    if cell_values not in ("average", "centroid"):
        raise SetupError(f"unknown cell values {cell_values!r}", mend="Use average or centroid.")
    if depth is not None and not depth > 0:
        raise SetupError(f"depth is {depth}", mend="Give a positive depth.")
    pieces, names = _pieces(export, number, near, plane)
    points_only = not any(piece.cell_data for piece in pieces)
    assembly = assembler(pieces, plane=plane, keep_centres=points_only)
    along, axis_hints = axis_of(symmetry, axis, assembly)
    _check_turn(along, depth, fluid)
    told = dict(fields or {}) | _named_properties(fluid, fields or {})
    chosen, field_hints = read_fields(pieces, assembly, told)
    fluid, chosen, hints = _settle(fluid, chosen)
    case = Case(
        file=str(export.path),
        format=export.format,
        step=number,
        steps=export.steps,
        time=export.times[number] if export.times else None,
        plane=assembly.plane,
        symmetry="planar" if along is None else "axisymmetric",
        depth=depth,
        cell_values=cell_values,
        axis=along,
    )
    flow = Flow(
        mesh=replace(assembly.mesh, near=names) if assembly.mesh.left_out else assembly.mesh,
        fields=chosen,
        fluid=fluid,
        case=case,
        walls=settled(walls, assembly.mesh.boundary.names),
        hints=(*export.hints, *assembly.hints, *axis_hints, *field_hints, *hints),
        assembly=assembly,
    )
    if flow.out_of_plane:
        note = Hint(
            "out-of-plane-velocity",
            f"the velocity out of the plane reaches {100 * flow._swirl_ratio:.3g} % of that in it; "
            "it counts for energy and angular momentum",
        )
        flow = replace(flow, hints=(*flow.hints, note))
    return flow


def _pieces(
    export: Export, step: int, near: Sequence[Drawn] | None, plane: str
) -> tuple[Sequence[Piece], tuple[str, ...]]:
    """The pieces of a step, or what surfaces need of them, and the spellings of these surfaces."""
    if export.parts is None or not near or not are_drawn(near):
        return export.load(step), ()
    return list(near_pieces(export.stream(step), near, plane)), tuple(surface.text for surface in near)


def _check_turn(axis: int | None, depth: float | None, fluid: Fluid) -> None:
    """SetupError for what an axisymmetric run cannot have."""
    if axis is None:
        return
    for wrong, what in (
        (depth is not None, "a depth"),
        (fluid.frame_rate != 0.0 and fluid.frame_centre[1 - axis] != 0.0, "a frame that turns off the axis"),
        (fluid.gravity[1 - axis] != 0.0, "gravity across the axis"),
    ):
        if wrong:
            raise SetupError(
                f"an axisymmetric run cannot have {what}", mend="Leave it out, or set the symmetry to planar."
            )


def step_number(export: Export, step: int | str) -> int:
    """Number of the stored state that ``step`` means; SetupError when there is none."""
    if step == "last":
        return export.steps - 1
    try:
        number = int(step)
    except ValueError:
        raise SetupError(f"step is {step!r}", mend="Give the number of a step, or last.") from None
    if not -export.steps <= number < export.steps:
        raise SetupError(
            f"there is no step {number}", where=export.path, mend=f"Steps are 0 to {export.steps - 1}."
        )
    return number % export.steps


def _named_properties(fluid: Fluid, told: FieldNames) -> dict[str, str]:
    """Roles that the fluid gives as names of arrays."""
    out = {}
    for role in ("density", "viscosity", "conductivity"):
        value = getattr(fluid, role)
        if isinstance(value, str):
            if role in told and told[role] != value:
                raise SetupError(
                    f"{role} is given twice", where=f"{value} and {told[role]}", mend="Name one array."
                )
            out[role] = value
    return out


def _settle(fluid: Fluid, chosen: dict[str, Field]) -> tuple[Fluid, dict[str, Field], tuple[Hint, ...]]:
    """One meaning for each property: a told number wins over a field, with a hint."""
    hints = []
    changes: dict[str, Any] = {}
    for role in ("density", "viscosity", "conductivity"):
        value = getattr(fluid, role)
        if isinstance(value, str):
            changes[role] = None
        if isinstance(value, str) or value is None:
            continue
        for spelled in (role, f"kinematic_{role}"):
            if spelled in chosen:
                unused = chosen.pop(spelled).name
                hints.append(
                    Hint("option-over-field", f"{role} = {value:g} as told; the array {unused!r} is not used")
                )
    return replace(fluid, **changes), chosen, tuple(hints)
