"""Forces on bodies by independent routes, side by side."""

from fvcheck.routes.estimate import Estimate, Reference
from fvcheck.routes.forcing import Forces, forces

__all__ = ["Estimate", "Forces", "Reference", "forces"]
