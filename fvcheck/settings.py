"""What is to be done with an export: a check file, and what is told beside it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from fvcheck.errors import SetupError, SurfaceError

if TYPE_CHECKING:
    from fvcheck.checkmodel import CheckFile
    from fvcheck.sources import Source
    from fvcheck.surfaces import ControlSurface

# Properties that are numbers or arrays: told as a property, they replace an array of the same role.
PROPERTIES = ("density", "viscosity", "conductivity")


@dataclass(frozen=True)
class Told:
    """What is told beside a check file, and wins over it; empty or None where nothing is.

    case : keys of [case]: plane, cell_values, symmetry, axis, depth, step, laws, about
    fluid : arguments of `Fluid`
    fields : role -> array
    walls : patch -> motion, as `open_flow` takes it
    surfaces : in place of those of the check file
    tolerance, scale : by law
    """

    case: Mapping[str, Any] = field(default_factory=dict)
    fluid: Mapping[str, Any] = field(default_factory=dict)
    fields: Mapping[str, str] = field(default_factory=dict)
    walls: Mapping[str, Any] = field(default_factory=dict)
    surfaces: Sequence[ControlSurface] = ()
    tolerance: Mapping[str, float] = field(default_factory=dict)
    scale: Mapping[str, float] = field(default_factory=dict)


@dataclass(frozen=True)
class Settings:
    """What stands in the arguments of `open_flow` (``reading``) and `balance_all`, and the file.

    step : "last", "all" or the number of a step; it is not in ``reading``
    steady : several states are iterations, whatever times they carry
    surfaces, laws : None for the default ones
    bodies : name -> reference of those in the check file
    moment_points : name -> point of the moment of those that have one of their own
    wakes : name -> line across the wake, of those that have one
    """

    file: Path
    reading: dict[str, Any]
    step: int | str
    steady: bool
    surfaces: tuple[ControlSurface, ...] | None
    laws: list[str] | None
    tolerance: dict[str, float]
    scale: dict[str, float]
    sources: tuple[Source, ...]
    about: tuple[float, float]
    bodies: dict[str, dict[str, float] | None]
    moment_points: dict[str, tuple[float, float]]
    wakes: dict[str, ControlSurface]

    @property
    def judged(self) -> dict[str, Any]:
        """What `balance_all`, `history` and `study` take beside surfaces and laws."""
        return {
            "tolerance": self.tolerance,
            "scale": self.scale,
            "sources": self.sources,
            "about": self.about,
        }

    def moment_about(self, bodies: Sequence[str] | None) -> Any:
        """What `fvcheck.forces` takes as ``about`` for these bodies: each one's own point, or one for all."""
        if not self.moment_points or bodies is None:
            return self.about
        return {name: self.moment_points.get(name, self.about) for name in bodies}


def load_check(path: Path | None) -> CheckFile:
    """A check file whose laws are known; the empty one for None."""
    from fvcheck.checkfile import load
    from fvcheck.checkmodel import CheckFile

    if path is None:
        return CheckFile()
    from fvcheck.laws import law_names

    return load(path, laws=law_names())


def settled(file: Path, check: CheckFile, told: Told | None = None) -> Settings:
    """What is told over the check file over defaults; SetupError or SurfaceError where it cannot be used."""
    told = told or Told()
    case = check.case
    laws = told.case.get("laws", None if case.laws is None else list(case.laws))
    tolerance = check.law_tolerances() | check.tolerance | dict(told.tolerance)
    _check_laws(laws, tolerance, told.scale)
    # Told for all, the point of moments is nobody's own.
    own_points = {} if "about" in told.case else {b.name: b.about for b in check.body if b.about is not None}
    return Settings(
        file=file,
        reading=_reading(check, told),
        step=told.case.get("step", case.step),
        steady=case.steady,
        surfaces=tuple(told.surfaces) or check.control_surfaces() or None,
        laws=laws,
        tolerance=tolerance,
        scale=dict(told.scale),
        sources=_sources(check),
        about=told.case.get("about", case.about),
        bodies={b.name: None if b.reference is None else b.reference.model_dump() for b in check.body},
        moment_points=own_points,
        wakes=_wakes(check),
    )


def _check_laws(laws: list[str] | None, tolerance: dict[str, float], scale: Mapping[str, float]) -> None:
    """The laws exist, and what is told of them can be used: found out before a large file is read."""
    from fvcheck.balancing import check_tolerance
    from fvcheck.laws import find_law

    for name in [*(laws or ()), *scale]:
        find_law(name)
    check_tolerance(tolerance)
    for name, value in scale.items():
        if not value > 0:
            raise SetupError(f"the scale of {name} is {value:g}", mend="Give a positive reference flux.")


def _reading(check: CheckFile, told: Told) -> dict[str, Any]:
    from fvcheck.fluid import Fluid

    fields: dict[str, Any] = check.law_fields() | dict(check.fields)
    for role in PROPERTIES:
        if role in told.fluid:
            fields.pop(role, None)
    properties = check.fluid.model_dump(exclude_unset=True) | dict(told.fluid)
    properties["diffusivity"] = (
        check.law_diffusivities() | check.fluid.diffusivity | told.fluid.get("diffusivity", {})
    )
    walls: dict[str, Any] = dict.fromkeys(check.patches.wall, (0.0, 0.0))
    for name, motion in check.patches.moving_wall.items():
        walls[name] = motion if isinstance(motion, tuple) else motion.model_dump()
    names = ("plane", "cell_values", "symmetry", "axis", "depth")
    return {
        "fluid": Fluid(**properties),
        "fields": fields | dict(told.fields),
        "walls": walls | dict(told.walls),
        **{name: told.case.get(name, getattr(check.case, name)) for name in names},
    }


def _sources(check: CheckFile) -> tuple[Source, ...]:
    from fvcheck.sources import Source
    from fvcheck.surfaces import ControlSurface

    return tuple(
        Source(entry.law, ControlSurface.parse(entry.shape, base=check.folder), entry.rate)
        for entry in check.source
    )


def _wakes(check: CheckFile) -> dict[str, ControlSurface]:
    from fvcheck.surfaces import ControlSurface

    out = {}
    for entry in check.body:
        if entry.wake is None:
            continue
        try:
            out[entry.name] = ControlSurface.parse(entry.wake, base=check.folder)
        except SurfaceError as error:
            where = f"{check.path}, [[body]] {entry.name}, wake"
            raise SurfaceError(error.what, where=where, mend=error.mend) from None
    return out
