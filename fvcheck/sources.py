"""What enters a volume otherwise: heaters, injectors, fans, told by the user."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

from fvcheck.errors import SetupError
from fvcheck.mesh.mesh import Mesh
from fvcheck.surfaces import ControlSurface


@dataclass(frozen=True)
class Source:
    """A rate [in the law's unit] spread evenly over a closed, drawn shape; two numbers for a vector law.

    SetupError where the shape is none that a rate can be spread over.
    """

    law: str
    shape: ControlSurface
    rate: float | tuple[float, float]

    def __post_init__(self) -> None:
        if not self.shape.closed or self.shape.kind == "domain":
            raise SetupError(
                "a source needs a closed shape to be spread over",
                where=f"{self.law} source, {self.shape.text}",
                mend="Draw it, such as box(x0, y0, x1, y1).",
            )

    def along(self, component: str | None) -> float:
        """The rate of one component of its law; SetupError where the law has another number of them."""
        if isinstance(self.rate, tuple) != (component is not None):
            form = "takes two numbers, [x, y]" if component else "takes one number"
            raise SetupError(f"the rate of a {self.law} source {form}", where=self.shape.text)
        return self.rate["xy".index(str(component))] if isinstance(self.rate, tuple) else self.rate


def share_inside(source: Source, surface: ControlSurface, mesh: Mesh, axis: int | None = None) -> float:
    """Share of a source's shape that lies inside a resolved control surface, 0 to 1.

    axis : coordinate along the axis of an axisymmetric run; shares are then of the body of revolution
    """
    if surface.kind == "domain":
        return 1.0
    inside, shape = outline(surface), outline(source.shape.resolve(mesh))
    return _size(inside.intersection(shape), axis) / _size(shape, axis)


def _size(shape: Any, axis: int | None) -> float:
    """Area, or what it sweeps around the axis but for 2π (second theorem of Pappus)."""
    if axis is None or shape.area == 0.0:
        return float(shape.area)
    return float(shape.area * (shape.centroid.y if axis == 0 else shape.centroid.x))


def outline(surface: ControlSurface) -> Any:
    """The drawn area as a shapely geometry."""
    import shapely

    # Exterior rings run counter-clockwise, holes clockwise: symmetric difference puts both right.
    shape: Any = shapely.Polygon()
    for ring in surface.rings:
        shape = shape.symmetric_difference(shapely.Polygon(ring))
    return shape
