"""What a check file may hold: one model per table, each key with what it expects.

This module needs pydantic from the start; import it inside functions only.
The description of a key is the text that an error shows as "expected".
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Annotated, Literal

from pydantic import Field, PrivateAttr, field_validator

from fvcheck.checklimits import Baseline, Expectation
from fvcheck.checktable import NUMBER, PERCENT, POSITIVE, TEXT, VALUE, Names, Pair, Percent, Positive, Table
from fvcheck.errors import FvcheckError, SetupError, nearest
from fvcheck.fieldnames import ROLES, is_role

if TYPE_CHECKING:
    from fvcheck.surfaces import ControlSurface


class Case(Table):
    """[case]: the export, and how to read it."""

    file: str | Names | None = Field(default=None, description="a path, a pattern, or a list of them")
    plane: Literal["auto", "xy", "xz", "yz"] = Field(default="auto", description='"auto", "xy", "xz" or "yz"')
    cell_values: Literal["average", "centroid"] = Field(
        default="average", description='"average" or "centroid"'
    )
    symmetry: Literal["planar", "axisymmetric"] = Field(
        default="planar", description='"planar" or "axisymmetric"'
    )
    axis: Literal["auto", "x", "y"] = Field(default="auto", description='"auto", "x" or "y"')
    about: Pair = Field(default=(0.0, 0.0), description="a list of two numbers")
    depth: Positive | None = Field(default=None, description=POSITIVE)
    step: Annotated[int, Field(ge=0)] | Literal["last", "all"] = Field(
        default="last", description='a step from 0 on, "last" or "all"'
    )
    steady: bool = Field(default=False, description="true or false")
    laws: Annotated[Names, Field(min_length=1)] | None = Field(
        default=None, description="a list of laws, at least one"
    )


class FluidTable(Table):
    """[fluid]: the keys of `fvcheck.Fluid`; the keys given are ``model_dump(exclude_unset=True)``."""

    model: Literal["constant-density", "ideal-gas"] | None = Field(
        default=None, description='"constant-density" or "ideal-gas"'
    )
    density: float | str | None = Field(default=None, description=VALUE)
    viscosity: float | str | None = Field(default=None, description=VALUE)
    conductivity: float | str | None = Field(default=None, description=VALUE)
    specific_heat: float | None = Field(default=None, description=NUMBER)
    gas_constant: float | None = Field(default=None, description=NUMBER)
    gamma: float | None = Field(default=None, description=NUMBER)
    expansion: float | None = Field(default=None, description=NUMBER)
    reference_temperature: float | None = Field(default=None, description=NUMBER)
    pressure_kind: Literal["static", "kinematic", "reduced"] = Field(
        default="static", description='"static", "kinematic" or "reduced"'
    )
    viscous_heating: bool = Field(default=False, description="true or false")
    gravity: Pair = Field(default=(0.0, 0.0), description="a list of two numbers")
    diffusivity: dict[str, float] = Field(default={}, description="names of scalars with their diffusivity")
    turbulent_prandtl: Positive = Field(default=0.85, description=POSITIVE)
    frame_rate: float = Field(default=0.0, description=NUMBER)
    frame_centre: Pair = Field(default=(0.0, 0.0), description="a list of two numbers")


class SpinEntry(Table):
    """A wall that turns: at ``omega`` [rad/s], counter-clockwise, about ``centre``."""

    omega: float = Field(description=NUMBER)
    centre: Pair = Field(default=(0.0, 0.0), description="a list of two numbers")


class Patches(Table):
    """[patches]: no-slip walls, at rest and moving."""

    wall: Names = Field(default=(), description="a list of patch names")
    moving_wall: dict[str, Pair | SpinEntry] = Field(
        default={},
        description="patch names with their motion, { NAME = [VX, VY] } or "
        "{ NAME = { omega = …, centre = [X, Y] } }",
    )


class LawEntry(Table):
    """[[law]]: a transported scalar; its law is called ``scalar:NAME``."""

    name: str = Field(min_length=1, description="a name for the scalar")
    field: str = Field(description="the name of an array, per mass of fluid")
    diffusivity: Annotated[float, Field(ge=0)] | None = Field(
        default=None, description="a number, zero or more"
    )
    source: str | None = Field(default=None, description="the name of an array, per volume")
    tolerance_percent: Percent | None = Field(default=None, description=PERCENT)


class SurfaceEntry(Table):
    """[[surface]]: a control surface as the command line spells it."""

    name: str = Field("", description=TEXT)
    shape: str = Field(description='a shape such as "box(0, 0, 1, 1)"')


class SourceEntry(Table):
    """[[source]]: what enters a volume otherwise; ``rate`` is the total, in the law's unit."""

    law: str = Field(description="the name of a law")
    shape: str = Field(description='a shape such as "box(0, 0, 1, 1)"')
    rate: float | Pair = Field(description="a number, or a list of two for momentum")


class Reference(Table):
    """Reference values of force coefficients."""

    velocity: Positive = Field(description=POSITIVE)
    length: Positive = Field(description=POSITIVE)
    density: Positive = Field(description=POSITIVE)


class BodyEntry(Table):
    """[[body]]: a body whose forces are wanted."""

    name: str = Field(description="the name of a patch")
    reference: Reference | None = Field(default=None, description="{ velocity = …, length = …, density = … }")
    about: Pair | None = Field(default=None, description="the point of its moment, a list of two numbers")
    wake: str | None = Field(default=None, description='a line across its wake, "line(x y, x y)"')


class CheckFile(Table):
    """A whole check file; paths in it are relative to its own folder."""

    case: Case = Field(default=Case(), description="a table")
    fluid: FluidTable = Field(default=FluidTable(), description="a table")
    fields: dict[str, str | Names] = Field(
        default={}, description="the name of an array, or a list of components"
    )
    patches: Patches = Field(default=Patches(), description="a table")
    surface: tuple[SurfaceEntry, ...] = Field(default=(), description="[[surface]] tables", strict=False)
    law: tuple[LawEntry, ...] = Field(default=(), description="[[law]] tables", strict=False)
    source: tuple[SourceEntry, ...] = Field(default=(), description="[[source]] tables", strict=False)
    body: tuple[BodyEntry, ...] = Field(default=(), description="[[body]] tables", strict=False)
    tolerance: dict[str, Percent] = Field(default={}, description=PERCENT)
    expect: tuple[Expectation, ...] = Field(default=(), description="[[expect]] tables", strict=False)
    baseline: Baseline | None = Field(default=None, description="a table")
    _path: Path = PrivateAttr(Path())

    @field_validator("fields")
    @classmethod
    def _roles_exist(cls, told: dict[str, str | tuple[str, ...]]) -> dict[str, str | tuple[str, ...]]:
        for role in told:
            if not is_role(role):
                known = f"roles: {', '.join(ROLES)}, scalar:NAME, rate:ROLE"
                raise ValueError(f"there is no role {role!r}; {nearest(role, ROLES) or known}")
        return told

    @property
    def path(self) -> Path:
        """The check file itself."""
        return self._path

    @property
    def folder(self) -> Path:
        """Where relative paths start."""
        return self._path.parent

    def law_fields(self) -> dict[str, str]:
        """Role -> array of the scalars in [[law]], and of their sources."""
        out = {f"scalar:{law.name}": law.field for law in self.law}
        return out | {f"scalar_source:{law.name}": law.source for law in self.law if law.source}

    def law_diffusivities(self) -> dict[str, float]:
        """Scalar -> diffusivity of [[law]], where told."""
        return {law.name: law.diffusivity for law in self.law if law.diffusivity is not None}

    def law_tolerances(self) -> dict[str, float]:
        """Law -> percent of [[law]], where told."""
        return {
            f"scalar:{law.name}": law.tolerance_percent
            for law in self.law
            if law.tolerance_percent is not None
        }

    def case_files(self) -> tuple[Path, ...]:
        """Exports named by [case] file, patterns expanded, run_2 before run_10.

        SetupError if there is none, or a pattern meets nothing.
        """
        given = self.case.file
        spellings = () if given is None else (given,) if isinstance(given, str) else given
        if not spellings:
            raise SetupError(
                "No export is named", where=f"{self._path}, [case]", mend='Add file = "run.vtu" or the like.'
            )
        return tuple(path for spelling in spellings for path in self._expand(spelling))

    def _expand(self, spelling: str) -> Iterator[Path]:
        from glob import glob

        path = self.folder / spelling
        if path.exists() or not re.search(r"[*?[]", spelling):
            yield path  # a missing file is the reader's error
            return
        found = sorted(map(Path, glob(str(path), recursive=True)), key=_natural)
        if not found:
            raise SetupError(f"The pattern {spelling!r} meets no file", where=f"{self._path}, [case] file")
        yield from found

    def control_surfaces(self) -> tuple[ControlSurface, ...]:
        """The [[surface]] entries drawn, each with a name of its own; SurfaceError names the entry.

        A family (`fvcheck.surfaces.family`) gives all its members.
        """
        from fvcheck.surfaces import ControlSurface, name_all
        from fvcheck.surfaces.family import is_family, parse_family

        drawn: list[ControlSurface] = []
        for number, entry in enumerate(self.surface, start=1):
            try:
                if is_family(entry.shape):
                    shape = f"{entry.name}={entry.shape}" if entry.name else entry.shape
                    drawn += parse_family(shape, base=self.folder).surfaces
                    continue
                surface = ControlSurface.parse(entry.shape, base=self.folder)
                drawn.append(replace(surface, name=entry.name) if entry.name else surface)
            except FvcheckError as error:
                where = f"{self._path}, [[surface]] {number}: {error.where or entry.shape}"
                raise type(error)(error.what, where=where, mend=error.mend) from None
        return name_all(drawn)


def _natural(path: Path) -> list[tuple[int, str]]:
    """Sort key that takes runs of digits as numbers."""
    return [(int(part), "") if part.isdecimal() else (0, part) for part in re.split(r"(\d+)", str(path))]
