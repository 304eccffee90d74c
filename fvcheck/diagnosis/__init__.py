"""Where an imbalance sits, and which set-up error would close the ledger."""

from fvcheck.diagnosis.diagnosing import Diagnosis, diagnose, try_cause

__all__ = ["Diagnosis", "diagnose", "try_cause"]
