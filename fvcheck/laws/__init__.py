"""The physics: balance laws as triples over a state."""

from fvcheck.laws import builtin  # noqa: F401  (registers the built-in laws)
from fvcheck.laws.law import Law, find_law, law_names, register
from fvcheck.laws.state import MissingData, State
from fvcheck.sampling.sampled import Sampled

__all__ = ["Law", "MissingData", "Sampled", "State", "find_law", "law_names", "register"]
