"""What enters a volume otherwise: heaters, injectors, fans, told by the user."""

from __future__ import annotations

from dataclasses import dataclass

from fvcheck.mesh.mesh import Mesh
from fvcheck.surfaces import ControlSurface


@dataclass(frozen=True)
class Source:
    """A rate [in the law's unit] spread evenly over a closed shape."""

    law: str
    shape: ControlSurface
    rate: float


def share_inside(source: Source, surface: ControlSurface, mesh: Mesh) -> float:
    """Share of a source's shape that lies inside a resolved control surface, 0 to 1."""
    if surface.kind == "domain":
        return 1.0
    inside, shape = outline(surface), outline(source.shape.resolve(mesh))
    return float(inside.intersection(shape).area / shape.area)


def outline(surface: ControlSurface):  # type: ignore[no-untyped-def]
    """The drawn area as a shapely geometry."""
    import shapely

    # Exterior rings run counter-clockwise, holes clockwise: symmetric difference puts both right.
    shape = shapely.Polygon()
    for ring in surface.rings:
        shape = shape.symmetric_difference(shapely.Polygon(ring))
    return shape
