"""Where an imbalance sits, and which set-up error would close the ledger."""

from fvcheck.diagnosis.diagnosing import diagnose
from fvcheck.diagnosis.result import Diagnosis
from fvcheck.diagnosis.trying import try_cause

__all__ = ["Diagnosis", "diagnose", "try_cause"]
