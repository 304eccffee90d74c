"""What array names mean: the names that are taken as a role, and those that only look like one.

Names are compared without case and separators. Identifiers come from the CGNS
standard (Standard Interface Data Structures, annex A, "Conventions for
Data-Name Identifiers"); the rest are the plain symbols of textbooks. A name
with two common meanings is never taken, only remarked on.
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from dataclasses import dataclass

VECTORS = ("velocity", "momentum", "body_force")
SCALARS = (
    "pressure",
    "density",
    "temperature",
    "total_energy",
    "viscosity",
    "conductivity",
    "eddy_viscosity",
    "kinematic_viscosity",
    "kinematic_eddy_viscosity",
    "turbulence_energy",
    "mass_source",
    "heat_source",
)
ROLES = VECTORS + SCALARS
"""Roles an array may play, beside ``scalar:NAME``, its ``scalar_source:NAME``, and ``rate:ROLE``.

Viscosities are dynamic [Pa s] where not said to be kinematic [m²/s]. Total energy
and momentum are per volume [J/m³, kg/(m² s)], turbulence energy is per mass
[m²/s²], body force [N/m³] and sources [kg/(m³ s), W/m³] are per volume.
"""

# One array with the whole quantity, by key (see `key`).
WHOLE = {
    "velocity": "velocity",
    "vel": "velocity",
    "u": "velocity",
    "velocityvector": "velocity",
    "momentum": "momentum",
    "rhou": "momentum",
    "bodyforce": "body_force",
    "pressure": "pressure",
    "p": "pressure",
    "staticpressure": "pressure",
    "density": "density",
    "rho": "density",
    "temperature": "temperature",
    "t": "temperature",
    "temp": "temperature",
    "statictemperature": "temperature",
    "energystagnationdensity": "total_energy",
    "totalenergydensity": "total_energy",
    "rhoe": "total_energy",
    "viscositymolecular": "viscosity",
    "dynamicviscosity": "viscosity",
    "mu": "viscosity",
    "thermalconductivity": "conductivity",
    "viscosityeddy": "eddy_viscosity",
    "eddyviscosity": "eddy_viscosity",
    "mut": "eddy_viscosity",
    "turbulentenergykinetic": "turbulence_energy",
    "turbulentkineticenergy": "turbulence_energy",
    "turbulencekineticenergy": "turbulence_energy",
    "tke": "turbulence_energy",
    "masssource": "mass_source",
    "heatsource": "heat_source",
}

# Vectors in parts: (family of component marks, key of what remains) -> role.
PARTS = {
    ("xyz", "velocity"): "velocity",
    ("xyz", "vel"): "velocity",
    ("xyz", "u"): "velocity",
    ("012", "velocity"): "velocity",
    ("012", "vel"): "velocity",
    ("012", "u"): "velocity",
    ("uvw", ""): "velocity",
    ("x-", "velocity"): "velocity",
    ("x-", "vel"): "velocity",
    ("xyz", "momentum"): "momentum",
    ("xyz", "rhou"): "momentum",
    ("012", "momentum"): "momentum",
    ("012", "rhou"): "momentum",
    ("uvw", "rho"): "momentum",
    ("x-", "momentum"): "momentum",
    ("xyz", "bodyforce"): "body_force",
    ("012", "bodyforce"): "body_force",
}

# Names with more than one meaning: key -> (role it may be, why it is not taken).
SUSPECTS = {
    "prgh": ("pressure", "may be the pressure less its hydrostatic part; if so add --pressure-kind reduced"),
    "v": ("velocity", "may be a velocity or a volume"),
    "umean": ("velocity", "may be a mean over time, which does not obey the laws of an instant"),
    "velocitymean": ("velocity", "may be a mean over time, which does not obey the laws of an instant"),
    "pmean": ("pressure", "may be a mean over time"),
    "k": ("turbulence_energy", "may be the turbulence energy or a thermal conductivity"),
    "kappa": ("conductivity", "may be a thermal conductivity, a diffusivity or a curvature"),
    "lambda": ("conductivity", "may be a thermal conductivity or a second viscosity"),
    "conductivity": ("conductivity", "may be a thermal or an electrical conductivity"),
    "nu": ("kinematic_viscosity", "may be the kinematic viscosity"),
    "viscosity": ("viscosity", "may be dynamic or kinematic; the role wants the dynamic one"),
    "viscositykinematic": ("kinematic_viscosity", "is the kinematic viscosity"),
    "nut": ("kinematic_eddy_viscosity", "may be the kinematic eddy viscosity"),
    "viscosityeddykinematic": ("kinematic_eddy_viscosity", "is the kinematic eddy viscosity"),
    "e": ("total_energy", "may be inner or total energy, per mass or per volume"),
    "energy": ("total_energy", "may be inner or total energy, per mass or per volume"),
    "totalenergy": ("total_energy", "may be per mass or per volume; the role wants it per volume"),
    "energystagnation": ("total_energy", "is per mass; the role wants it per volume"),
}

_FAMILIES = ("xyz", "012", "uvw")


def is_role(role: str) -> bool:
    """One of `ROLES`, ``scalar:NAME``, ``scalar_source:NAME``, or ``rate:`` before any?"""
    base = role.removeprefix("rate:")
    prefix, _, name = base.partition(":")
    return base in ROLES or (prefix in ("scalar", "scalar_source") and name != "")


def is_vector(role: str) -> bool:
    """Does the role (``rate:`` left aside) stand for a vector?"""
    return role.removeprefix("rate:") in VECTORS


def key(name: str) -> str:
    """The name without case and separators: ``Velocity X``, ``velocity_x`` and ``VelocityX`` are one."""
    return re.sub(r"[\s_\-.:/\[(]+", "", name.strip().rstrip("])")).lower()


@dataclass(frozen=True)
class Parts:
    """Scalar arrays that look like the components of one vector.

    slots : {0: name of the x part, 1: …}; which of the three are there
    """

    role: str
    family: str
    slots: dict[int, str]

    @property
    def complete(self) -> bool:
        """Are they enough for a plane vector? Numbered parts have to start at 0."""
        numbers = sorted(self.slots)
        return len(numbers) > 1 and (self.family != "012" or numbers == list(range(len(numbers))))


def slot_of(name: str) -> int | None:
    """0, 1, 2 for a name that ends in x, y, z (``U_z`` gives 2) or is u, v, w; else None."""
    stem = name.strip().rstrip("])").lower()
    mark = stem[-1:]
    for family in ("xyz", "uvw"):
        if mark and mark in family and (family == "xyz" or key(stem[:-1]) in ("", "rho")):
            return family.index(mark)
    return None


def group_parts(names: Iterable[str]) -> list[Parts]:
    """Component sets among scalar names; spellings of different case or separator stay apart."""
    groups: dict[tuple[str, str, str, bool], dict[int, str]] = {}
    for name in names:
        stem = name.strip().rstrip("])")
        for family, mark, rest in _readings(stem):
            if (family, key(rest)) in PARTS:
                slot = family.replace("x-", "xyz").index(mark.lower())
                groups.setdefault((family, key(rest), rest, mark.isupper()), {})[slot] = name
    return [Parts(PARTS[family, base], family, slots) for (family, base, *_), slots in groups.items()]


def _readings(stem: str) -> Iterable[tuple[str, str, str]]:
    """(family, component mark, what remains) for each way to read a name as a component."""
    if not stem:
        return
    for family in _FAMILIES:
        if stem[-1].lower() in family:
            yield family, stem[-1], stem[:-1]
    if re.match(r"[xyz][\s_\-]", stem, re.IGNORECASE):
        yield "x-", stem[0], stem[1:]
