"""Fields and their roles: which array of an export is the velocity, the pressure, …"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from fvcheck.arrays import LOCATIONS, Arrays, Candidate, Data, Field, Location
from fvcheck.errors import FieldError, nearest
from fvcheck.fieldnames import ROLES, SUSPECTS, WHOLE, group_parts, is_role, is_vector, key, slot_of
from fvcheck.hints import Hint

__all__ = ["ROLES", "ArrayRow", "Field", "choose_fields", "describe"]

Array = np.ndarray


@dataclass(frozen=True)
class ArrayRow:
    """One array as ``fvcheck inspect`` lists it.

    low, high : smallest and largest finite value over all components, None
        where there is none
    role : ``-`` for none; with ``?`` where the array may play it but is not
        taken without being told
    """

    name: str
    location: Location
    components: int
    dtype: str
    low: float | None
    high: float | None
    role: str


def choose_fields(
    point_data: Data,
    cell_data: Data,
    told: Mapping[str, str | Sequence[str]] | None = None,
    *,
    n_points: int | None = None,
    n_cells: int | None = None,
) -> tuple[dict[str, Field], tuple[Hint, ...]]:
    """Role -> field, by what the user told, else by well-known names.

    ``told`` maps a role (also ``scalar:NAME``, ``rate:ROLE``) to an array name,
    ``"VX,VY"`` or a list for components, with ``point:`` or ``cell:`` in front
    for a location. An array of one name at points and at cells is taken at the
    cells, with a hint. A name that could mean two things is left alone, with a
    hint. FieldError where two arrays claim a role, or a told one is missing, of
    the wrong shape or length (``n_points``, ``n_cells``), or no numbers.
    """
    data = Arrays(point_data, cell_data, n_points, n_cells)
    told = told or {}
    hints: list[Hint] = []
    chosen = {role: _told(data, role, spelling, hints) for role, spelling in told.items()}
    spoken_for = {name for candidate in chosen.values() for name in candidate.names}
    for role, candidates in _candidates(data, spoken_for).items():
        if role not in chosen:
            chosen[role] = _only_one(data, role, candidates, hints)
    fields = {role: data.field(role, candidate, hints) for role, candidate in chosen.items()}
    hints += _suspicions(data, set(chosen), spoken_for)
    return fields, tuple(hints)


def describe(
    point_data: Data, cell_data: Data, told: Mapping[str, str | Sequence[str]] | None = None
) -> list[ArrayRow]:
    """Every array with its range and role; unlike `choose_fields` it does not fail on two claims."""
    data = Arrays(point_data, cell_data)
    roles: dict[tuple[str, str], str] = {}
    ignored: list[Hint] = []
    told_candidates = {role: _told(data, role, spelling, ignored) for role, spelling in (told or {}).items()}
    spoken_for = {name for candidate in told_candidates.values() for name in candidate.names}
    for location, name, role in _suspects(data, spoken_for):
        roles[location, name] = f"{role}?"
    for role, candidates in _candidates(data, spoken_for).items():
        if role in told_candidates:
            continue
        mark = "?" if len(candidates) > 1 and not _all_equal(data, role, candidates) else ""
        for candidate in candidates:
            roles.update({(candidate.location, name): role + mark for name in candidate.names})
    for role, candidate in told_candidates.items():
        roles.update({(candidate.location, name): role for name in candidate.names})
    return [
        _row(name, location, np.asarray(values), roles.get((location, name), "-"))
        for location in LOCATIONS
        for name, values in data.at(location).items()
    ]


def _told(data: Arrays, role: str, spelling: str | Sequence[str], hints: list[Hint]) -> Candidate:
    _check_role(role)
    location, names = _split(data, [spelling] if isinstance(spelling, str) else list(spelling))
    places = (location,) if location else LOCATIONS
    there = [place for place in places if all(name in data.at(place) for name in names)]
    if not there:
        raise _missing(data, role, names, location)
    if len(there) == 2:
        hints.append(_cell_hint(",".join(names), role))
    return Candidate(there[0], names, _slots(data, role, there[0], names))


def _split(data: Arrays, spellings: Sequence[str]) -> tuple[Location | None, tuple[str, ...]]:
    """Location told, if any, and array names of ``["VX", "VY"]``, ``["cell:VX,VY"]`` and the like."""
    location: Location | None = None
    names: list[str] = []
    for text in spellings:
        # An array may really be called "a,b" or "cell:U": such a name goes first.
        if data.where(text):
            names.append(text)
            continue
        for part in [text] if data.where(text.partition(":")[2]) else text.split(","):
            name = part.strip()
            for place in LOCATIONS:
                if not data.where(name) and name.startswith(f"{place}:"):
                    location, name = place, name.removeprefix(f"{place}:")
            names.append(name)
    return location, tuple(names)


def _slots(data: Arrays, role: str, location: Location, names: tuple[str, ...]) -> tuple[int, ...]:
    counts = [data.components(location, name) for name in names]
    if 0 in counts:
        return ()  # no numbers: the values themselves say so
    if not is_vector(role):
        if counts != [1]:
            raise FieldError(
                f"The {role} is a scalar, but {','.join(names)!r} has {sum(counts)} components",
                mend=f"Give one scalar array: --field {role}=NAME.",
            )
        return ()
    if len(counts) == 1 and counts[0] in (2, 3):
        return tuple(range(counts[0]))
    if len(counts) in (2, 3) and set(counts) == {1} and len(set(names)) == len(names):
        # U_x,U_z of a run in the x-z plane: the names show the gap. They never change the order told.
        marks = [mark for name in names if (mark := slot_of(name)) is not None]
        if len(marks) == len(names) and marks == sorted(set(marks)):
            return tuple(marks)
        return tuple(range(len(names)))
    raise FieldError(
        f"The {role} is a vector, but {','.join(names)!r} has {'+'.join(map(str, counts))} component(s)",
        mend=f"Give one vector array or its components: --field {role}=VX,VY.",
    )


def _check_role(role: str) -> None:
    if not is_role(role):
        close = nearest(role.removeprefix("rate:"), ROLES)
        known = f"Roles: {', '.join(ROLES)}, scalar:NAME, rate:ROLE."
        raise FieldError(f"There is no role {role!r}", mend=f"{close} {known}")


def _missing(data: Arrays, role: str, names: tuple[str, ...], location: Location | None) -> FieldError:
    places = (location,) if location else LOCATIONS
    known = sorted({name for place in places for name in data.at(place)})
    absent = next((name for name in names if name not in known), None)
    if absent is None:
        return FieldError(f"{', '.join(names)} do not lie at one location", where=f"role {role}")
    place = f"{location} array" if location else "array"
    return FieldError(
        f"There is no {place} {absent!r} for the role {role}",
        where=f"{place}s: {', '.join(known) or 'none'}",
        mend=nearest(absent, known),
    )


def _candidates(data: Arrays, spoken_for: set[str]) -> dict[str, list[Candidate]]:
    """Role -> arrays whose names claim it; those at points left out where the cells have the same names."""
    found: dict[str, list[Candidate]] = {}
    for location in LOCATIONS:
        names = [name for name in data.at(location) if name not in spoken_for]
        scalars = [name for name in names if data.components(location, name) == 1]
        for name in names:
            role, count = WHOLE.get(key(name)), data.components(location, name)
            if role and count in ((2, 3) if is_vector(role) else (1,)):
                slots = tuple(range(count)) if is_vector(role) else ()
                found.setdefault(role, []).append(Candidate(location, (name,), slots))
        for parts in group_parts(scalars):
            if parts.complete:
                slots = tuple(sorted(parts.slots))
                names_of_parts = tuple(parts.slots[slot] for slot in slots)
                found.setdefault(parts.role, []).append(Candidate(location, names_of_parts, slots))
    for role, candidates in found.items():
        at_cells = {candidate.names for candidate in candidates if candidate.location == "cell"}
        found[role] = [c for c in candidates if c.location == "cell" or c.names not in at_cells]
    return found


def _only_one(data: Arrays, role: str, candidates: list[Candidate], hints: list[Hint]) -> Candidate:
    first = candidates[0]
    names = ", ".join(f"{c.location} array {c.name!r}" for c in candidates)
    if len(candidates) > 1:
        if not _all_equal(data, role, candidates):
            settle = " or ".join(f"--field {role}={c.location}:{c.name}" for c in candidates)
            raise FieldError(
                f"More than one array claims the role {role}", where=names, mend=f"Give {settle}."
            )
        hints.append(Hint("same-values", f"{names} hold the same values; the first one is the {role}."))
    if first.location == "cell" and all(name in data.at("point") for name in first.names):
        hints.append(_cell_hint(first.name, role))
    return first


def _all_equal(data: Arrays, role: str, candidates: list[Candidate]) -> bool:
    first, *others = candidates
    return all(
        other.location == first.location
        and np.array_equal(data.values(role, first), data.values(role, other), equal_nan=True)
        for other in others
    )


def _suspects(data: Arrays, spoken_for: set[str]) -> list[tuple[Location, str, str]]:
    """(location, name, role) of arrays that may play a role but are not taken."""
    return [
        (location, name, SUSPECTS[key(name)][0])
        for location in LOCATIONS
        for name in data.at(location)
        if name not in spoken_for
        and key(name) in SUSPECTS
        and (data.components(location, name) in (2, 3)) == is_vector(SUSPECTS[key(name)][0])
    ]


def _suspicions(data: Arrays, taken: set[str], spoken_for: set[str]) -> list[Hint]:
    hints: dict[str, Hint] = {}
    for _, name, role in _suspects(data, spoken_for):
        if role not in taken:
            code = "reduced-pressure" if key(name) == "prgh" else "ambiguous-field"
            why = SUSPECTS[key(name)][1]
            hints[name] = Hint(code, f"Array {name!r} {why}; to take it: --field {role}={name}.")
    for location in LOCATIONS:
        scalars = [n for n in data.at(location) if n not in spoken_for and data.components(location, n) == 1]
        for parts in group_parts(scalars):
            if not parts.complete and parts.role not in taken:
                names = ", ".join(repr(name) for name in parts.slots.values())
                hints[names] = Hint(
                    "lone-component",
                    f"{names} may be part of the {parts.role}, but the other components are not there "
                    f"under like names; to take it: --field {parts.role}=VX,VY.",
                )
    return list(hints.values())


def _cell_hint(name: str, role: str) -> Hint:
    return Hint(
        "cell-data-preferred",
        f"{name!r} ({role}) is stored at points and at cells; the cell values are used. "
        f"For the others: --field {role}=point:{name}.",
    )


def _row(name: str, location: Location, values: Array, role: str) -> ArrayRow:
    components = 1 if values.ndim < 2 else int(np.prod(values.shape[1:]))
    low = high = None
    if values.dtype.kind in "fiu":
        finite = values[np.isfinite(values)]
        if finite.size:
            low, high = float(finite.min()), float(finite.max())
    return ArrayRow(name, location, components, str(values.dtype.newbyteorder("=")), low, high, role)
