"""The common options, declared once, and how their texts are read.

A command takes whole groups: with `spread`, a parameter whose type is one of
the dataclasses here stands for one option per field.
"""

from __future__ import annotations

import functools
import inspect
import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass, fields, is_dataclass
from pathlib import Path
from typing import Annotated, Any, get_type_hints

from typer import Argument, Option

from fvcheck.errors import SetupError

_READ, _FLUID, _CHECK, _SHOW = "Reading the export", "Fluid (SI or consistent units)", "Checking", "Output"


Completion = Callable[[str], list[str]] | None


def _read(*names: str, metavar: str | None = None, text: str, words: Completion = None) -> Any:
    return Option(*names, metavar=metavar, help=text, rich_help_panel=_READ, autocompletion=words)


def _fluid(metavar: str, text: str, words: Completion = None) -> Any:
    return Option(metavar=metavar, help=text, rich_help_panel=_FLUID, autocompletion=words)


def _check(*names: str, metavar: str, text: str, words: Completion = None) -> Any:
    return Option(*names, metavar=metavar, help=text, rich_help_panel=_CHECK, autocompletion=words)


def _show(*names: str, metavar: str | None = None, text: str) -> Any:
    return Option(*names, metavar=metavar, help=text, rich_help_panel=_SHOW)


def _run(metavar: str, text: str, **more: Any) -> Any:
    return Option(metavar=metavar, help=text, rich_help_panel="Running", **more)


def _one_of(*words: str) -> Completion:
    """What the shell offers for an option of few words."""
    return lambda incomplete: [word for word in words if word.startswith(incomplete)]


def _laws(incomplete: str) -> list[str]:
    from fvcheck.pages import topics

    done, comma, name = incomplete.rpartition(",")
    return [done + comma + law for law in topics()["laws"] if law.startswith(name)]


File = Annotated[Path, Argument(metavar="FILE", help="An export in an open format.", show_default=False)]
OptionalFile = Annotated[
    Path | None,
    Argument(metavar="FILE", help="An export; may be left out with -c.", show_default=False),
]
SurfaceList = Annotated[
    list[str] | None,
    _check(
        "-s", "--surface", metavar="SURFACE", text='"NAME=KIND(…)", such as "a=box(0, 0, 1, 1)"; repeatable.'
    ),
]


@dataclass(frozen=True)
class Reading:
    """How the export is read."""

    check: Annotated[
        Path | None, _read("-c", "--check", metavar="CHECK.toml", text="Take the settings from a check file.")
    ] = None
    field: Annotated[
        list[str] | None,
        _read(
            metavar="ROLE=ARRAY", text="Array of a role; velocity=VX,VY; point:NAME, cell:NAME. Repeatable."
        ),
    ] = None
    wall: Annotated[
        list[str] | None,
        _read(
            metavar="NAME[=VX,VY]",
            text='No-slip patch, at rest or moving; "NAME=spin(OMEGA,X,Y)". Repeatable.',
        ),
    ] = None
    cell_values: Annotated[
        str | None,
        _read(
            metavar="average|centroid",
            text="What a cell value is; default average.",
            words=_one_of("average", "centroid"),
        ),
    ] = None
    plane: Annotated[
        str | None,
        _read(
            metavar="auto|xy|xz|yz",
            text="Plane of the run; default auto.",
            words=_one_of("auto", "xy", "xz", "yz"),
        ),
    ] = None
    step: Annotated[str | None, _read(metavar="INDEX|last|all", text="Stored state; default last.")] = None
    axisymmetric: Annotated[bool, _read("--axisymmetric", text="The run is axisymmetric.")] = False
    axis: Annotated[
        str | None, _read(metavar="auto|x|y", text="Its axis; default x, or where radii are not negative.")
    ] = None
    depth: Annotated[str | None, _read(metavar="D", text="Depth; without it results are per metre.")] = None


@dataclass(frozen=True)
class FluidOptions:
    """Properties of the fluid."""

    density: Annotated[str | None, _fluid("VALUE|ARRAY", "Density.")] = None
    viscosity: Annotated[str | None, _fluid("VALUE|ARRAY", "Dynamic viscosity.")] = None
    pressure_kind: Annotated[
        str | None,
        _fluid(
            "KIND",
            "static (default), kinematic (p/rho), or reduced (without the weight).",
            words=_one_of("static", "kinematic", "reduced"),
        ),
    ] = None
    gravity: Annotated[str | None, _fluid("GX,GY", "Gravity, in the plane of the run.")] = None
    gas_constant: Annotated[str | None, _fluid("R", "Of an ideal gas.")] = None
    gamma: Annotated[str | None, _fluid("VALUE", "Ratio of specific heats of an ideal gas.")] = None
    specific_heat: Annotated[str | None, _fluid("VALUE", "At constant pressure.")] = None
    conductivity: Annotated[str | None, _fluid("VALUE|ARRAY", "Thermal conductivity.")] = None
    expansion: Annotated[str | None, _fluid("BETA", "Thermal expansion, for buoyancy.")] = None
    reference_temperature: Annotated[str | None, _fluid("T0", "Where buoyancy vanishes.")] = None
    diffusivity: Annotated[
        list[str] | None, _fluid("NAME=D", "Of a scalar that --field scalar:NAME=… names. Repeatable.")
    ] = None
    turbulent_prandtl: Annotated[
        str | None, _fluid("VALUE", "By which an eddy viscosity mixes heat and scalars; default 0.85.")
    ] = None
    frame_rate: Annotated[
        str | None, _fluid("OMEGA", "Velocities are seen in a frame that turns at this rate, rad/s.")
    ] = None
    frame_centre: Annotated[str | None, _fluid("X,Y", "What the frame turns about; default 0,0.")] = None


@dataclass(frozen=True)
class Limits:
    """Which laws, and what counts as balanced."""

    law: Annotated[
        list[str] | None,
        _check(metavar="LAW,…", text="Laws; default every law that the data allow.", words=_laws),
    ] = None
    about: Annotated[
        str | None, _check(metavar="X,Y", text="Point of the angular-momentum law; default 0,0.")
    ] = None
    tolerance: Annotated[
        list[str] | None, _check(metavar="LAW=PERCENT", text="Of the law's scale. Repeatable.")
    ] = None
    scale: Annotated[
        list[str] | None,
        _check(metavar="LAW=VALUE", text="Reference flux in place of the found one. Repeatable."),
    ] = None


@dataclass(frozen=True)
class Output:
    """What is shown, and where."""

    json: Annotated[
        str | None, _show(metavar="PATH", text="Write the result as JSON; - is standard output.")
    ] = None
    quiet: Annotated[bool, _show("-q", "--quiet", text="No tables, the last line only.")] = False


@dataclass(frozen=True)
class Spread:
    """Where long work is done."""

    workers: Annotated[
        int | None,
        _run(metavar="N", min=1, text="Processes of this machine; default none beside this one."),
    ] = None
    scheduler: Annotated[
        str | None,
        _run(metavar="ADDRESS", text="Workers of a Dask scheduler, such as tcp://host:8786."),
    ] = None


def spread(command: Callable[..., int]) -> Callable[..., Callable[[], int]]:
    """The command as the parser sees it: parameters that are dataclasses spread into their fields.

    Called, it does not run but gives what is to be run: parsing ends before
    work begins, so the parser has no say in how errors of the work are told.
    """
    hints = get_type_hints(command, include_extras=True)
    groups = {name: kind for name, kind in hints.items() if isinstance(kind, type) and is_dataclass(kind)}
    flat: list[inspect.Parameter] = []
    for name, parameter in inspect.signature(command).parameters.items():
        if name not in groups:
            flat.append(parameter.replace(annotation=hints[name], kind=parameter.KEYWORD_ONLY))
            continue
        inner = get_type_hints(groups[name], include_extras=True)
        flat += [
            inspect.Parameter(
                item.name, parameter.KEYWORD_ONLY, default=item.default, annotation=inner[item.name]
            )
            for item in fields(groups[name])
        ]

    @functools.wraps(command)
    def flattened(**given: Any) -> Callable[[], int]:
        whole = {
            name: kind(**{item.name: given.pop(item.name) for item in fields(kind)})
            for name, kind in groups.items()
        }
        return functools.partial(command, **given, **whole)

    flattened.__signature__ = inspect.Signature(flat)  # type: ignore[attr-defined]
    flattened.__annotations__ = {parameter.name: parameter.annotation for parameter in flat}
    return flattened


def pairs(texts: Iterable[str] | None, option: str, form: str) -> dict[str, str]:
    """``NAME=TEXT`` texts by name; SetupError for one without both parts, or a name that stands twice."""
    out: dict[str, str] = {}
    for text in texts or ():
        name, equals, value = (part.strip() for part in text.partition("="))
        if not (name and equals and value):
            raise SetupError(f"{option} {text!r} cannot be read", mend=f"Write {option} {form}.")
        if name in out:
            raise SetupError(f"{option} gives {name!r} twice", mend="Keep one of them.")
        out[name] = value
    return out


def numbers(texts: Iterable[str] | None, option: str, form: str) -> dict[str, float]:
    """``NAME=NUMBER`` texts by name."""
    return {
        name: number(value, f"{option} {name}", form) for name, value in pairs(texts, option, form).items()
    }


def number(text: str, what: str, form: str) -> float:
    """A finite number; SetupError otherwise."""
    try:
        value = float(text)
    except ValueError:
        value = math.nan
    if not math.isfinite(value):
        raise SetupError(f"{what}: {text!r} is no finite number", mend=f"Write {form}.")
    return value


def vector(text: str, what: str, form: str) -> tuple[float, float]:
    """Two numbers with a comma between."""
    parts = text.split(",")
    if len(parts) != 2:
        raise SetupError(f"{what}: {text!r} is no pair of numbers", mend=f"Write {form}.")
    return number(parts[0], what, form), number(parts[1], what, form)


def property_value(text: str) -> float | str:
    """A number, else the name of an array."""
    try:
        return float(text)
    except ValueError:
        return text


def words(texts: Iterable[str] | None) -> list[str] | None:
    """Comma-separated words of a repeatable option; None where it was not given."""
    if texts is None:
        return None
    return [word.strip() for text in texts for word in text.split(",") if word.strip()]
