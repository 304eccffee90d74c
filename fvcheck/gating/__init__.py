"""Check files as a yes or no: expectations, baselines, and what pipelines read."""

from fvcheck.gating.outcome import Finding, Outcome
from fvcheck.gating.suite import GateResult, gate

__all__ = ["Finding", "GateResult", "Outcome", "gate"]
