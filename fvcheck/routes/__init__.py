"""Forces on bodies by independent routes, side by side."""

from fvcheck.routes.estimate import Estimate, Reference
from fvcheck.routes.forcing import forces
from fvcheck.routes.found import Forces

__all__ = ["Estimate", "Forces", "Reference", "forces"]
