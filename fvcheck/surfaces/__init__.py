"""Control surfaces: what the user draws, and how it is spelled."""

from fvcheck.surfaces.spelling import name_all, parse_all
from fvcheck.surfaces.surface import ControlSurface, Motion

__all__ = ["ControlSurface", "Motion", "name_all", "parse_all"]
