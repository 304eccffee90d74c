"""What a command is to do: the check file, and the options that win over it."""

from __future__ import annotations

import re
from collections.abc import Sequence
from dataclasses import dataclass, fields
from pathlib import Path
from typing import TYPE_CHECKING, Any

from fvcheck.cli.options import (
    FluidOptions,
    Limits,
    Reading,
    number,
    numbers,
    pairs,
    property_value,
    vector,
    words,
)
from fvcheck.errors import SetupError
from fvcheck.walls import Spin

if TYPE_CHECKING:
    from fvcheck.checkmodel import CheckFile
    from fvcheck.sources import Source
    from fvcheck.surfaces import ControlSurface

_PROPERTIES = ("density", "viscosity", "conductivity")


@dataclass(frozen=True)
class Settings:
    """What stands in the arguments of `open_flow` (``reading``) and `balance_all`, and the file.

    step : "last", "all" or the number of a step; it is not in ``reading``
    surfaces, laws : None for the default ones
    bodies : name -> reference of those in the check file
    moment_points : name -> point of the moment of those that have one of their own
    """

    file: Path
    reading: dict[str, Any]
    step: int | str
    surfaces: tuple[ControlSurface, ...] | None
    laws: list[str] | None
    tolerance: dict[str, float]
    scale: dict[str, float]
    sources: tuple[Source, ...]
    about: tuple[float, float]
    bodies: dict[str, dict[str, float] | None]
    moment_points: dict[str, tuple[float, float]]

    def moment_about(self, bodies: Sequence[str] | None) -> Any:
        """What `fvcheck.forces` takes as ``about`` for these bodies: each one's own point, or one for all."""
        if not self.moment_points or bodies is None:
            return self.about
        return {name: self.moment_points.get(name, self.about) for name in bodies}


def settle(
    file: Path | None,
    reading: Reading,
    fluid: FluidOptions,
    surfaces: list[str] | None = None,
    limits: Limits | None = None,
    check: CheckFile | None = None,
) -> Settings:
    """Options over check file over defaults; SetupError or SurfaceError where they cannot be used.

    check : the check file of ``reading`` where it has been loaded already
    """
    from fvcheck.cli.progress import say_first_use
    from fvcheck.surfaces import parse_all

    limits = limits or Limits()
    check = load_check(reading.check) if check is None else check
    laws = words(limits.law)
    if laws is None and check.case.laws is not None:
        laws = list(check.case.laws)
    tolerance = (
        check.law_tolerances() | check.tolerance | numbers(limits.tolerance, "--tolerance", "LAW=PERCENT")
    )
    scale = numbers(limits.scale, "--scale", "LAW=VALUE")
    _check_laws(laws, tolerance, scale)
    drawn = parse_all(surfaces) if surfaces else check.control_surfaces()
    say_first_use()
    return Settings(
        file=_file(file, check, reading.check),
        reading=_reading(check, reading, fluid),
        step=reading.step if reading.step is not None else check.case.step,
        surfaces=drawn or None,
        laws=laws,
        tolerance=tolerance,
        scale=scale,
        sources=_sources(check),
        about=check.case.about if limits.about is None else vector(limits.about, "--about", "--about X,Y"),
        bodies={b.name: None if b.reference is None else b.reference.model_dump() for b in check.body},
        moment_points=_moment_points(check, limits),
    )


def _moment_points(check: CheckFile, limits: Limits) -> dict[str, tuple[float, float]]:
    """Told for all by an option, they are nobody's own."""
    return {} if limits.about else {b.name: b.about for b in check.body if b.about is not None}


def load_check(path: Path | None) -> CheckFile:
    """A check file whose laws are known; the empty one for None."""
    from fvcheck.checkfile import load
    from fvcheck.checkmodel import CheckFile

    if path is None:
        return CheckFile()
    from fvcheck.laws import law_names

    return load(path, laws=law_names())


def _file(given: Path | None, check: CheckFile, check_path: Path | None) -> Path:
    if given is not None:
        return given
    if check_path is None:
        raise SetupError("no export is given", mend="Name a FILE, or a check file with -c.")
    files = check.case_files()
    if len(files) > 1:
        raise SetupError(
            f"the check file names {len(files)} exports",
            where=check_path,
            mend="Give the one that is meant as FILE.",
        )
    return files[0]


def _check_laws(laws: list[str] | None, tolerance: dict[str, float], scale: dict[str, float]) -> None:
    """The laws exist, and what is told of them can be used: found out before a large file is read."""
    from fvcheck.balancing import check_tolerance
    from fvcheck.laws import find_law

    for name in [*(laws or ()), *scale]:
        find_law(name)
    check_tolerance(tolerance)
    for name, value in scale.items():
        if not value > 0:
            raise SetupError(f"the scale of {name} is {value:g}", mend="Give a positive reference flux.")


def _reading(check: CheckFile, reading: Reading, options: FluidOptions) -> dict[str, Any]:
    from fvcheck.fluid import Fluid

    told = _fluid_told(options)
    fields_told: dict[str, Any] = check.law_fields() | dict(check.fields)
    for role in _PROPERTIES:
        if role in told:
            fields_told.pop(role, None)  # the option is of the same meaning, and wins
    fields_told |= pairs(reading.field, "--field", "ROLE=ARRAY")
    case = check.case
    properties = check.fluid.model_dump(exclude_unset=True) | told
    properties["diffusivity"] = (
        check.law_diffusivities() | check.fluid.diffusivity | told.get("diffusivity", {})
    )
    return {
        "fluid": Fluid(**properties),
        "fields": fields_told,
        "plane": reading.plane or case.plane,
        "cell_values": reading.cell_values or case.cell_values,
        "walls": _walls(check, reading.wall),
        "symmetry": "axisymmetric" if reading.axisymmetric else case.symmetry,
        "axis": reading.axis or case.axis,
        "depth": case.depth if reading.depth is None else number(reading.depth, "--depth", "--depth METRES"),
    }


def _fluid_told(options: FluidOptions) -> dict[str, Any]:
    given = {item.name: getattr(options, item.name) for item in fields(options)}
    told: dict[str, Any] = {name: value for name, value in given.items() if value is not None}
    for name, text in told.items():
        option = f"--{name.replace('_', '-')}"
        if name in _PROPERTIES:
            told[name] = property_value(text)
        elif name in ("gravity", "frame_centre"):
            told[name] = vector(text, option, f"{option} {'GX,GY' if name == 'gravity' else 'X,Y'}")
        elif name == "diffusivity":
            told[name] = numbers(text, option, "NAME=VALUE")
        elif name != "pressure_kind":
            told[name] = number(text, option, f"{option} NUMBER")
    return told


def _walls(check: CheckFile, options: list[str] | None) -> dict[str, Any]:
    walls: dict[str, Any] = dict.fromkeys(check.patches.wall, (0.0, 0.0))
    for name, told in check.patches.moving_wall.items():
        walls[name] = told if isinstance(told, tuple) else told.model_dump()
    for text in options or ():
        name, equals, motion = (part.strip() for part in text.rpartition("="))
        walls[name if equals else motion] = _motion(name, motion) if equals else (0.0, 0.0)
    return walls


def _motion(name: str, text: str) -> Any:
    """``VX,VY`` or ``spin(OMEGA, X, Y)``."""
    option, form = f"--wall {name}", "--wall NAME=VX,VY or --wall 'NAME=spin(OMEGA, X, Y)'"
    spin = re.fullmatch(r"spin\s*\((.*)\)", text)
    if spin is None:
        return vector(text, option, form)
    parts = spin[1].split(",")
    if len(parts) not in (1, 3):
        raise SetupError(f"{option}: {text!r} cannot be read", mend=f"Write {form}.")
    return Spin(*(number(part, option, form) for part in parts))


def _sources(check: CheckFile) -> tuple[Source, ...]:
    from fvcheck.sources import Source
    from fvcheck.surfaces import ControlSurface

    return tuple(
        Source(entry.law, ControlSurface.parse(entry.shape, base=check.folder), entry.rate)
        for entry in check.source
    )
