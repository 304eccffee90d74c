"""Fields that share one sampler: which go together, and their data as the fits take them."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from fvcheck.errors import FieldError
from fvcheck.fields import Field, Location
from fvcheck.flow import Flow
from fvcheck.sampling.known import known_values
from fvcheck.sampling.sampler import Known, Sampler

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Group:
    """Fields that share one sampler.

    columns : of each role in ``data`` (n, f), the rows that the sampler uses
    fields : of each role, with the columns that are sampled
    """

    sampler: Sampler
    roles: tuple[str, ...]
    columns: tuple[slice, ...]
    fields: tuple[Field, ...]
    data: Array
    known: Array | None
    places: Known | None


def split_roles(flow: Flow, roles: tuple[str, ...]) -> dict[tuple[Location, str], list[str]]:
    """Roles by what their fits need: (location, role with known values of its own or "")."""
    split: dict[tuple[Location, str], list[str]] = {}
    for role in roles:
        own = role if known_values(flow, role) is not None else ""
        split.setdefault((flow.fields[role].location, own), []).append(role)
    return split


def filled(flow: Flow, sampler: Sampler, names: list[str], known: tuple[Known, Array] | None) -> Group:
    """A group of fields with the data of a flow; FieldError where they are not finite."""
    parts, whole, columns, at = [], [], [], 0
    for role in names:
        field = flow.fields[role]
        field = replace(field, values=_columns(flow, field.values))
        parts.append(np.ascontiguousarray(field.at(sampler.sources), float))
        _check_finite(flow, role, parts[-1], sampler)
        whole.append(field)
        columns.append(slice(at, at + field.values.shape[1]))
        at += field.values.shape[1]
    places, value = (known[0], _columns(flow, known[1])) if known else (None, None)
    return Group(sampler, tuple(names), tuple(columns), tuple(whole), np.hstack(parts), value, places)


def _columns(flow: Flow, values: Array) -> Array:
    """(n, f) columns that are sampled: a velocity out of the plane only where there is one."""
    if values.ndim == 1:
        return values[:, None]
    return values if flow.out_of_plane else values[:, :2]


def _check_finite(flow: Flow, role: str, local: Array, sampler: Sampler) -> None:
    bad = ~np.isfinite(local).all(axis=1)
    if not bad.any():
        return
    source = sampler.sources[np.flatnonzero(bad)[0]]
    if sampler.location == "point":
        place = flow.mesh.points[source]
    else:
        first, last = flow.mesh.offsets[source], flow.mesh.offsets[source + 1]
        place = flow.mesh.points[flow.mesh.nodes[first:last]].mean(axis=0)
    raise FieldError(
        f"{role} (array {flow.fields[role].name!r}) has {int(bad.sum())} values near the control surface "
        "that are no numbers",
        where=f"the first at x {place[0]:.6g}, y {place[1]:.6g}",
        mend="Keep the surface away from them, or export the field again.",
    )
