"""What a proposal would do to the ledgers."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

from fvcheck.balancing import balance_all, default_surfaces
from fvcheck.diagnosis.cause import Told
from fvcheck.errors import SetupError, SurfaceError
from fvcheck.flow import Flow
from fvcheck.ledger import Result
from fvcheck.overlay.overlay import lay_over
from fvcheck.surfaces import ControlSurface


def try_cause(
    flow: Flow,
    told: Told,
    surfaces: Sequence[ControlSurface] | None = None,
    laws: Sequence[str] | None = None,
    **settings: Any,
) -> tuple[Result, Result]:
    """The ledgers before, and with the proposal applied; ``settings`` are those of `balance_all`.

    SetupError where no setting expresses the proposal.
    """
    if told.change is None:
        raise SetupError("the proposal cannot be tried", where=told.cause, mend=told.setting)
    surfaces = surfaces or [*default_surfaces(flow), *_quarters(flow)]
    before = balance_all(flow, surfaces, laws, **settings)
    return before, balance_all(told.change(flow), surfaces, laws, **settings)


def _quarters(flow: Flow) -> list[ControlSurface]:
    """The quarters of the domain: by symmetry, the whole may be balanced where its parts are not."""
    x0, y0, x1, y1 = flow.mesh.bounds
    x, y = 0.5 * (x0 + x1), 0.5 * (y0 + y1)
    boxes = {
        "lower-left": (x0, y0, x, y),
        "lower-right": (x, y0, x1, y),
        "upper-left": (x0, y, x, y1),
        "upper-right": (x, y, x1, y1),
    }
    out = []
    for name, box in boxes.items():
        surface = ControlSurface.box(*box, name=name)
        try:
            lay_over(flow.mesh, surface.resolve(flow.mesh))
        except SurfaceError:
            continue  # no fluid there
        out.append(surface)
    return out
