"""What flows: properties as told, and what the pressure of the export means."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, fields
from typing import Literal

from fvcheck.errors import LARGEST, SetupError, nearest

PressureKind = Literal["static", "kinematic", "reduced"]
Value = float | str | None
PRESSURE_KINDS = ("static", "kinematic", "reduced")
MODELS = ("constant-density", "ideal-gas")

_POSITIVE = ("density", "gas_constant", "specific_heat", "turbulent_prandtl")
_NOT_NEGATIVE = ("viscosity", "conductivity")


@dataclass(frozen=True)
class Fluid:
    """Properties in SI or any consistent units; None where not told.

    density [kg/m³], viscosity (dynamic) [Pa s], conductivity [W/(m K)] :
        a number, or the name of an array of the export
    specific_heat [J/(kg K)] : at constant pressure
    pressure_kind : "static" (p), "kinematic" (p/ρ) or "reduced" (p − ρ g·x, so
        without the weight of the fluid)
    gravity [m/s²] : its two components in the plane of the run
    gas_constant R [J/(kg K)], gamma : of an ideal gas, p = ρRT
    expansion β [1/K], reference_temperature T₀ [K] : Boussinesq buoyancy, body
        force ρ g (1 − β (T − T₀))
    diffusivity D [m²/s] : name of a scalar -> a number; its flux is −ρD∇φ
    turbulent_prandtl : Prandtl and Schmidt number of turbulence, by which an eddy
        viscosity μ_t mixes heat (c_p μ_t/Pr_t) and scalars (μ_t/Pr_t)
    frame_rate Ω [rad/s], frame_centre : the velocities are those seen in a frame
        that turns counter-clockwise about that point; in an axisymmetric run about the
        axis, right-handed
    viscous_heating : count the dissipation as a heat source in the heat law
        (solvers leave it out unless asked, and in most flows it is negligible)
    model : "constant-density" or "ideal-gas"; by default the latter when a gas
        constant or gamma is told

    Raises SetupError for values that no fluid has.
    """

    density: Value = None
    viscosity: Value = None
    conductivity: Value = None
    specific_heat: float | None = None
    pressure_kind: PressureKind = "static"
    gravity: tuple[float, float] = (0.0, 0.0)
    gas_constant: float | None = None
    gamma: float | None = None
    expansion: float | None = None
    reference_temperature: float | None = None
    diffusivity: Mapping[str, float] = field(default_factory=dict, hash=False)
    turbulent_prandtl: float = 0.85
    frame_rate: float = 0.0
    frame_centre: tuple[float, float] = (0.0, 0.0)
    viscous_heating: bool = False
    model: str | None = None

    def __post_init__(self) -> None:
        for item in fields(self):
            value = getattr(self, item.name)
            if isinstance(value, int | float) and not abs(value) < LARGEST:
                raise SetupError(f"{item.name} is {value}", mend="Give a finite number, of a flow's size.")
        for name in _POSITIVE + _NOT_NEGATIVE:
            value = getattr(self, name)
            if isinstance(value, int | float) and (value < 0 or (value == 0 and name in _POSITIVE)):
                raise SetupError(f"{name} is {value:g}", mend="Give a positive number.")
        if self.gamma is not None and self.gamma <= 1:
            raise SetupError(f"gamma is {self.gamma:g}", mend="The ratio of specific heats is above 1.")
        _one_of("pressure kind", self.pressure_kind, PRESSURE_KINDS)
        if self.model is not None:
            _one_of("fluid model", self.model, MODELS)
        for scalar, value in self.diffusivity.items():
            if not 0.0 <= value < LARGEST:
                raise SetupError(f"the diffusivity of {scalar} is {value:g}", mend="Give a positive number.")
        for name, form in (("gravity", "GX,GY"), ("frame_centre", "X,Y")):
            pair = getattr(self, name)
            if len(pair) != 2 or not all(abs(part) < LARGEST for part in pair):
                what = name.replace("_", " ")
                raise SetupError(f"{what} is {pair}", mend=f"Give its two components {form}.")
            object.__setattr__(self, name, (float(pair[0]), float(pair[1])))

    @property
    def ideal_gas(self) -> bool:
        """Whether pressure, density and temperature are tied by p = ρRT."""
        if self.model is not None:
            return self.model == "ideal-gas"
        return self.gas_constant is not None or self.gamma is not None


def _one_of(what: str, value: str, known: tuple[str, ...]) -> None:
    if value not in known:
        raise SetupError(
            f"unknown {what} {value!r}", mend=nearest(value, known) or f"Known: {', '.join(known)}."
        )
