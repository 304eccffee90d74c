"""The physics: balance laws as triples over a state."""

# The modules of laws register what they hold, in the order in which laws are shown.
from fvcheck.laws import builtin, energy, scalars  # noqa: F401
from fvcheck.laws.law import Law, find_law, law_names, register
from fvcheck.laws.state import MissingData, State
from fvcheck.sampling.sampled import Sampled

__all__ = ["Law", "MissingData", "Sampled", "State", "find_law", "law_names", "register"]
