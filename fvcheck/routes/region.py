"""The part of a mesh that the routes to forces look at, told from its boundary alone."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

from fvcheck.errors import SurfaceError
from fvcheck.flow import Flow
from fvcheck.routes.asked import bodies_of
from fvcheck.routes.reach import default_distances, surface_range
from fvcheck.surfaces import ControlSurface
from fvcheck.surfaces.family import Family


def surfaces_near(
    flow: Flow,
    body: str | Sequence[str] | None = None,
    *,
    distances: Sequence[float] | None = None,
    surfaces: Sequence[ControlSurface] | None = None,
    band_between: tuple[float, float] | None = None,
    wake_line: ControlSurface | Mapping[str, ControlSurface] | None = None,
    sweep: Family | None = None,
) -> list[ControlSurface]:
    """What `fvcheck.forces` with these arguments draws on a flow, resolved; bands lie within.

    flow : may lack all cells that are not at the boundary. A surface that cannot be drawn is
        left out: the route then says why. Raises SetupError for unknown bodies.
    """
    out = []
    for name in bodies_of(flow, body):
        between = band_between or surface_range(flow, name)
        away = [*(distances or default_distances(*between)), between[1]]
        around = [ControlSurface.around(name, distance) for distance in dict.fromkeys(away) if distance > 0]
        line = wake_line.get(name) if isinstance(wake_line, Mapping) else wake_line
        lines = [] if line is None else [line]
        out += [ControlSurface.patch(name), *around, *(surfaces or ()), *lines]
    out += [] if sweep is None else sweep.surfaces
    return list(_drawn(flow, out))


def _drawn(flow: Flow, surfaces: Sequence[ControlSurface]) -> Iterator[ControlSurface]:
    for surface in surfaces:
        try:
            yield surface.resolve(flow.mesh)
        except SurfaceError:
            continue
