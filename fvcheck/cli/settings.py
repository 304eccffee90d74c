"""What a command is to do: its options read, over the check file."""

from __future__ import annotations

import re
from dataclasses import fields
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
from fvcheck.settings import PROPERTIES, Settings, Told, load_check, settled
from fvcheck.walls import Spin

if TYPE_CHECKING:
    from fvcheck.checkmodel import CheckFile


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
    told = Told(
        case=_case_told(reading, limits),
        fluid=_fluid_told(fluid),
        fields=pairs(reading.field, "--field", "ROLE=ARRAY"),
        walls=_walls_told(reading.wall),
        surfaces=parse_all(surfaces) if surfaces else (),
        tolerance=numbers(limits.tolerance, "--tolerance", "LAW=PERCENT"),
        scale=numbers(limits.scale, "--scale", "LAW=VALUE"),
    )
    say_first_use()
    return settled(_file(file, check, reading.check), check, told)


def _file(given: Path | None, check: CheckFile, check_path: Path | None) -> Path:
    if given is not None:
        if given.suffix.lower() == ".toml":
            raise SetupError("a check file is no export", where=given, mend=f"Give it with -c {given}.")
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


def _case_told(reading: Reading, limits: Limits) -> dict[str, Any]:
    told = {
        "plane": reading.plane,
        "cell_values": reading.cell_values,
        "symmetry": "axisymmetric" if reading.axisymmetric else None,
        "axis": reading.axis,
        "depth": None if reading.depth is None else number(reading.depth, "--depth", "--depth METRES"),
        "step": reading.step,
        "laws": words(limits.law),
        "about": None if limits.about is None else vector(limits.about, "--about", "--about X,Y"),
    }
    return {name: value for name, value in told.items() if value is not None}


def _fluid_told(options: FluidOptions) -> dict[str, Any]:
    given = {item.name: getattr(options, item.name) for item in fields(options)}
    told: dict[str, Any] = {name: value for name, value in given.items() if value is not None}
    for name, text in told.items():
        option = f"--{name.replace('_', '-')}"
        if name in PROPERTIES:
            told[name] = property_value(text)
        elif name in ("gravity", "frame_centre"):
            told[name] = vector(text, option, f"{option} {'GX,GY' if name == 'gravity' else 'X,Y'}")
        elif name == "diffusivity":
            told[name] = numbers(text, option, "NAME=VALUE")
        elif name != "pressure_kind":
            told[name] = number(text, option, f"{option} NUMBER")
    return told


def _walls_told(options: list[str] | None) -> dict[str, Any]:
    walls: dict[str, Any] = {}
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
