"""fvcheck: does this 2D flow field conserve mass, momentum and energy?

    import fvcheck

    flow = fvcheck.open_flow("run.vtu", fluid=fvcheck.Fluid(density=1.2, viscosity=1.8e-5))
    outer = fvcheck.ControlSurface.box(0.1, -0.2, 1.4, 0.6, name="outer")
    ledger = fvcheck.balance(flow, outer, laws=["mass", "momentum"])
    ledger["mass"].verdict

Names are loaded when first used, so that ``import fvcheck`` costs nothing.
"""

from __future__ import annotations

from importlib import import_module
from typing import Any

from fvcheck.version import __version__

_HOME = {
    "ControlSurface": "fvcheck.surfaces",
    "Diagnosis": "fvcheck.diagnosis",
    "Estimate": "fvcheck.routes",
    "FieldError": "fvcheck.errors",
    "Flow": "fvcheck.flow",
    "Fluid": "fvcheck.fluid",
    "Forces": "fvcheck.routes",
    "FormatError": "fvcheck.errors",
    "FvcheckError": "fvcheck.errors",
    "GateResult": "fvcheck.gating",
    "History": "fvcheck.timeseries",
    "Inspection": "fvcheck.inspection",
    "Law": "fvcheck.laws",
    "Ledger": "fvcheck.ledger",
    "MeshError": "fvcheck.errors",
    "Motion": "fvcheck.surfaces",
    "Reference": "fvcheck.routes",
    "Report": "fvcheck.reporting",
    "Result": "fvcheck.ledger",
    "Row": "fvcheck.ledger",
    "Series": "fvcheck.series",
    "SetupError": "fvcheck.errors",
    "Source": "fvcheck.sources",
    "State": "fvcheck.laws",
    "Study": "fvcheck.meshstudy",
    "SurfaceError": "fvcheck.errors",
    "balance": "fvcheck.balancing",
    "balance_all": "fvcheck.balancing",
    "diagnose": "fvcheck.diagnosis",
    "follow": "fvcheck.following",
    "forces": "fvcheck.routes",
    "gate": "fvcheck.gating",
    "grid_convergence": "fvcheck.convergence",
    "history": "fvcheck.timeseries",
    "inspect_file": "fvcheck.inspection",
    "open_flow": "fvcheck.flow",
    "open_series": "fvcheck.series",
    "register": "fvcheck.laws",
    "report": "fvcheck.reporting",
    "study": "fvcheck.meshstudy",
}

__all__ = ["__version__", *sorted(_HOME)]  # noqa: PLE0604


def __getattr__(name: str) -> Any:
    if name not in _HOME:
        raise AttributeError(f"module 'fvcheck' has no attribute {name!r}")
    return getattr(import_module(_HOME[name]), name)


def __dir__() -> list[str]:
    return list(__all__)
