"""Control surfaces as text: ``NAME=KIND(ARGUMENTS) @ velocity(wx, wy)``."""

from __future__ import annotations

import re
from collections.abc import Iterable, Sequence
from dataclasses import replace
from pathlib import Path
from typing import NoReturn

from fvcheck.errors import SurfaceError, nearest
from fvcheck.surfaces.drawing import WKT_WORD
from fvcheck.surfaces.surface import ControlSurface, Motion

FORMS = {
    "box": "box(x0, y0, x1, y1)",
    "circle": "circle(x, y, r)",
    "ellipse": "ellipse(x, y, a, b) or ellipse(x, y, a, b, degrees)",
    "polygon": "polygon(x y, x y, x y, …)",
    "line": "line(x y, x y, …)",
    "around": "around(BODY, distance)",
    "domain": "domain()",
    "patch": "patch(NAME)",
    "file": "file(PATH)",
}
MOTIONS = {"velocity": "velocity(wx, wy)", "spin": "spin(omega, x, y)"}

_NAME = re.compile(r'\s*(?:"([^"]*)"|([^=("@]+?))\s*=\s*(.*)', re.DOTALL)
_MOTION = re.compile(r"(.*\))\s*@\s*(\w*)\s*\(([^()]*)\)\s*", re.DOTALL)
_SHAPE = re.compile(r"(\w+)\s*\((.*)\)", re.DOTALL)
# float() also takes "nan", "1_000" and digits of other scripts.
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?", re.ASCII)


def parse(text: str, *, name: str = "", base: str | Path | None = None) -> ControlSurface:
    """Surface from its spelling; SurfaceError shows the right form of a wrong one."""
    rest = text.strip()
    text = rest if len(rest) <= 100 else rest[:99] + "…"  # as errors show it
    if found := _NAME.fullmatch(rest):
        name, rest = found[1] or found[2] or "", found[3].strip()
    shape, motion = _take_motion(rest, text)
    if _is_wkt(shape):
        return ControlSurface.from_wkt(shape, name=name, motion=motion)
    call = _SHAPE.fullmatch(shape)
    kind = (call[1] if call else shape).lower()
    if kind not in FORMS:
        word = re.split(r"[\s(]", shape, maxsplit=1)[0]
        if word.lower() in FORMS:
            _wrong_form(word.lower(), text)
        raise SurfaceError(
            f"There is no control surface {word!r}",
            where=text,
            mend=f"{nearest(word, FORMS)} Known: {', '.join(FORMS)}, or WKT text.",
        )
    if call is None:
        _wrong_form(kind, text)
    return _draw(kind, call[2].strip(), text, name, motion, base)


def parse_all(texts: Iterable[str], *, base: str | Path | None = None) -> tuple[ControlSurface, ...]:
    """Surfaces from their spellings, each with a name of its own (see `name_all`).

    A family (`fvcheck.surfaces.family`) gives all its members.
    """
    from fvcheck.surfaces.family import is_family, parse_family

    drawn: list[ControlSurface] = []
    for text in texts:
        drawn += parse_family(text, base=base).surfaces if is_family(text) else [parse(text, base=base)]
    return name_all(drawn)


def name_all(surfaces: Sequence[ControlSurface]) -> tuple[ControlSurface, ...]:
    """The surfaces with unique names: those without one become box-1, box-2, circle-1, …

    SurfaceError if a given name stands twice.
    """
    taken: set[str] = set()
    for surface in surfaces:
        if surface.name and surface.name in taken:
            raise SurfaceError(f"Two surfaces are named {surface.name!r}", mend="Give each its own name.")
        taken.add(surface.name)
    named = []
    for surface in surfaces:
        if not surface.name:
            number = 1
            while f"{surface.kind}-{number}" in taken:
                number += 1
            surface = replace(surface, name=f"{surface.kind}-{number}")
            taken.add(surface.name)
        named.append(surface)
    return tuple(named)


def _is_wkt(shape: str) -> bool:
    # polygon(0 0, …) is ours, POLYGON ((0 0, …)) is WKT: two brackets.
    word = WKT_WORD.match(shape)
    return word is not None and (word[1].lower() != "polygon" or not re.match(r"\w+\s*\(\s*[^\s(]", shape))


def _take_motion(rest: str, text: str) -> tuple[str, Motion | None]:
    motion: Motion | None = None
    given: set[str] = set()
    while found := _MOTION.fullmatch(rest):
        rest, word, arguments = found[1].strip(), found[2], found[3]
        if word not in MOTIONS or word in given:
            raise SurfaceError(
                f"The motion {word!r} is {'given twice' if word in given else 'not known'}",
                where=text,
                mend=f"Write @ {' or @ '.join(MOTIONS.values())}.",
            )
        given.add(word)
        values = _split_numbers(arguments, text, (2,) if word == "velocity" else (3,), MOTIONS[word])
        motion = motion or Motion()
        if word == "velocity":
            motion = replace(motion, velocity=(values[0], values[1]))
        else:
            motion = replace(motion, omega=values[0], centre=(values[1], values[2]))
    return rest, motion


def _draw(
    kind: str, arguments: str, text: str, name: str, motion: Motion | None, base: str | Path | None
) -> ControlSurface:
    form = FORMS[kind]
    try:
        match kind:
            case "box":
                x0, y0, x1, y1 = _split_numbers(arguments, text, (4,), form)
                return ControlSurface.box(x0, y0, x1, y1, name=name, motion=motion)
            case "circle":
                x, y, r = _split_numbers(arguments, text, (3,), form)
                return ControlSurface.circle(x, y, r, name=name, motion=motion)
            case "ellipse":
                values = _split_numbers(arguments, text, (4, 5), form)
                return ControlSurface.ellipse(*values, name=name, motion=motion)
            case "polygon":
                return ControlSurface.polygon(_split_points(arguments, text, kind), name=name, motion=motion)
            case "line":
                return ControlSurface.line(_split_points(arguments, text, kind), name=name, motion=motion)
            case "around":
                body, comma, distance = arguments.rpartition(",")
                if not comma or not _unquoted(body):
                    _wrong_form(kind, text)
                return ControlSurface.around(
                    _unquoted(body), _number(distance.strip(), text, form), name=name, motion=motion
                )
            case "patch":
                if not _unquoted(arguments):
                    _wrong_form(kind, text)
                return ControlSurface.patch(_unquoted(arguments), name=name, motion=motion)
            case "file":
                if not _unquoted(arguments):
                    _wrong_form(kind, text)
                return ControlSurface.from_file(_unquoted(arguments), base=base, name=name, motion=motion)
            case _:
                if arguments:
                    _wrong_form(kind, text)
                return ControlSurface.domain(name=name, motion=motion)
    except SurfaceError as error:
        # Shapes know nothing of their spelling: say which of several -s it was.
        raise error if error.where else SurfaceError(error.what, where=text, mend=error.mend) from None


def _split_numbers(arguments: str, text: str, counts: tuple[int, ...], form: str) -> list[float]:
    cells = [cell.strip() for cell in arguments.split(",")] if arguments.strip() else []
    if len(cells) not in counts:
        wanted = " or ".join(map(str, counts))
        raise SurfaceError(
            f"{wanted} numbers are needed, not {len(cells)}", where=text, mend=f"Write {form}."
        )
    return [_number(cell, text, form) for cell in cells]


def _split_points(arguments: str, text: str, kind: str) -> list[list[float]]:
    points = []
    for cell in arguments.split(","):
        words = cell.split()
        if len(words) != 2:
            raise SurfaceError(
                f"A point is two numbers with a space between, not {cell.strip()!r}",
                where=text,
                mend=f"Write {FORMS[kind]}.",
            )
        points.append([_number(word, text, FORMS[kind]) for word in words])
    return points


def _number(word: str, text: str, form: str) -> float:
    if not _NUMBER.fullmatch(word):
        raise SurfaceError(f"{word!r} is not a finite number", where=text, mend=f"Write {form}.")
    return float(word)


def _unquoted(word: str) -> str:
    word = word.strip()
    quoted = len(word) > 1 and word[0] == word[-1] and word[0] in "\"'"
    return word[1:-1] if quoted else word


def _wrong_form(kind: str, text: str) -> NoReturn:
    raise SurfaceError(f"This is not how {kind} is written", where=text, mend=f"Write {FORMS[kind]}.")
