"""A later snapshot on a mesh that is known, by those rows of its arrays that compiled volumes need."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np

from fvcheck.fields import Field, choose_fields
from fvcheck.flow import Flow
from fvcheck.flowfields import in_plane
from fvcheck.mesh.piece import Export, Wanted

Array = np.ndarray


def later_flow(first: Flow, export: Export, step: int, needed: Mapping[str, Array | None]) -> Flow | None:
    """The flow of a step whose layout (`RowReader.layout`) is that of the step that ``first`` was read from.

    needed : location -> points or cells of the mesh whose data are wanted; None for all

    Fields hold these rows only, and refuse others (`Field.at`); values are those
    that reading the step whole gives. None where only the whole step can tell
    what a field is: two arrays that claimed one role, an array that is not there
    any more, a velocity out of the plane that begins. Raises FormatError and
    FieldError as `open_flow` does.
    """
    if export.rows is None or any(hint.code == "same-values" for hint in first.hints):
        return None
    names = {role: _array_names(field) for role, field in first.fields.items()}
    sources = {"point": first.assembly.point_source, "cell": first.assembly.cell_source}
    wanted: dict[str, Wanted] = {}
    back: dict[str, Array] = {}
    for location in {field.location for field in first.fields.values()}:
        mine = [name for role, f in first.fields.items() if f.location == location for name in names[role]]
        rows = needed.get(location, np.empty(0, np.int64))
        raw = sources[location] if rows is None else sources[location][rows]
        taken, back[location] = np.unique(raw, return_inverse=True)
        whole = rows is None and len(taken) and taken[-1] == len(taken) - 1
        wanted[location] = Wanted(tuple(dict.fromkeys(mine)), None if whole else taken)
    read = export.rows.read(step, wanted)
    if any(name not in read[location] for location, part in wanted.items() for name in part.names):
        return None
    data = {
        location: {name: values[back[location]] for name, values in part.items()}
        for location, part in read.items()
    }
    told = {
        role: [f"{field.location}:{name}" for name in names[role]] for role, field in first.fields.items()
    }
    chosen, _ = choose_fields(data.get("point", {}), data.get("cell", {}), told)
    fields = {}
    for role, old in first.fields.items():
        new = chosen[role]
        if (new.name, new.location, new.slots) != (old.name, old.location, old.slots):
            return None
        fields[role] = replace(new, values=in_plane(role, new, first.assembly), rows=needed.get(old.location))
    case = replace(first.case, step=step, time=export.times[step] if export.times else None)
    flow = replace(first, fields=fields, case=case, hints=(), beside=None)
    return flow if flow.out_of_plane == first.out_of_plane else None


def _array_names(field: Field) -> tuple[str, ...]:
    return tuple(field.name.split(",")) if field.slots else (field.name,)
