"""A force on a body by one route, how sure it is, and what it means in coefficients."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass, field, replace
from typing import Any

from fvcheck.errors import SetupError

Pair = tuple[float | None, float | None]

NOTHING: Pair = (None, None)


@dataclass(frozen=True)
class Reference:
    """What coefficients are made with: velocity [m/s], length [m], density [kg/m³], all positive."""

    velocity: float
    length: float
    density: float

    def __post_init__(self) -> None:
        for name in ("velocity", "length", "density"):
            value = getattr(self, name)
            if not (math.isfinite(value) and value > 0):
                raise SetupError(f"the reference {name} is {value:g}", mend="Give a positive number.")
        if not 0.0 < self.pressure * self.length**2 < math.inf:
            raise SetupError("the reference values are no sizes of a flow", mend="Give them in SI units.")

    @property
    def pressure(self) -> float:
        """Dynamic pressure ½ρU² [Pa]."""
        return 0.5 * self.density * self.velocity**2


@dataclass(frozen=True)
class Estimate:
    """One route's force on one body: what the fluid does to it. None where there is no such number.

    force [N/m, or N with a depth or around an axis] ; moment [N m/m] counter-clockwise about
        ``moment_about``, of an axisymmetric run the torque about the axis
    pressure, viscous : what pressure and friction contribute, at the surface
        where the route measures: on the body itself for ``body-surface`` only
    parts : name -> (x, y), the route's terms; they add up to ``force``
    drag, lift : the force along the direction of the stream, and 90°
        counter-clockwise from it
    sampling_band, resolution_band : half-widths about ``force``
    bands : number -> its half-widths, {"sampling": …, "resolution": …}
    distance : from the body, of the control surface, or (from, to) of the band
    degrees : degree of the sampling polynomials -> share of the surface or cells it was used on
    assumptions : what the route takes for granted
    """

    body: str
    method: str
    force: Pair = NOTHING
    pressure: Pair = NOTHING
    viscous: Pair = NOTHING
    moment: float | None = None
    sampling_band: Pair = NOTHING
    resolution_band: Pair = NOTHING
    drag: float | None = None
    lift: float | None = None
    moment_about: tuple[float, float] = (0.0, 0.0)
    direction: tuple[float, float] = (1.0, 0.0)
    parts: Mapping[str, Any] = field(default_factory=dict)
    bands: Mapping[str, Mapping[str, Any]] = field(default_factory=dict)
    coefficients: Mapping[str, float | None] | None = None
    distance: float | tuple[float, float] | None = None
    surface: str | None = None
    formula: str | None = None
    degrees: Mapping[str, float] = field(default_factory=dict)
    assumptions: str = ""
    refused: str = ""

    def band(self, name: str, kind: str = "sampling") -> float:
        """Half-width of ``drag``, ``lift`` or ``moment``; infinite where unknown."""
        value = self.bands.get(name, {}).get(kind)
        return math.inf if value is None else float(value)

    @property
    def label(self) -> str:
        """The route, with what tells several of one method apart."""
        if self.surface:
            return f"{self.method} {self.surface}"
        if isinstance(self.distance, float) and self.distance > 0:
            return f"{self.method} {self.distance:.4g}"
        return f"{self.method} {self.formula}" if self.formula else self.method

    def with_coefficients(self, reference: Reference | None, area: float | None = None) -> Estimate:
        """With coefficients by ½ρU² and a reference area [m² or m²/m]: the length (times depth) by default.

        ``strouhal_scale`` is L/U: a frequency times it is a Strouhal number.
        """
        if reference is None:
            return self
        area = reference.length if area is None else area
        force, torque = reference.pressure * area, reference.pressure * area * reference.length

        def over(value: float | None, by: float) -> float | None:
            return None if value is None else value / by

        coefficients = {
            "drag": over(self.drag, force),
            "lift": over(self.lift, force),
            "moment": over(self.moment, torque),
            "drag_band": over(self.bands.get("drag", {}).get("sampling"), force),
            "lift_band": over(self.bands.get("lift", {}).get("sampling"), force),
            "moment_band": over(self.bands.get("moment", {}).get("sampling"), torque),
            "strouhal_scale": reference.length / reference.velocity,
        }
        return replace(self, coefficients=coefficients)
