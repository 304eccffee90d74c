"""The bundled case: air past a heated bar in a channel, at a few iterations and converged."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from fvcheck.errors import FormatError
from fvcheck.ledger import Result
from fvcheck.verdict import CLOSED, OPEN

EARLY, CONVERGED, CHECK = "demo-coarse-0020.vtu", "demo-coarse.vtu", "demo.toml"
WAKE = (0.0195, 0.002, 0.034, 0.014)
"""Corners of the box behind the bar [m]. It touches no wall: on so coarse a mesh the first cells at
a wall leave wide bands, and the demo is to show a run, not a mesh."""
TOLERANCE = {"mass": 0.5, "momentum": 1.0, "heat": 2.0}
"""Law -> percent of its scale."""


@dataclass(frozen=True)
class Demo:
    """Both states over the same surface."""

    early: Result
    converged: Result

    @property
    def as_expected(self) -> bool:
        """The early iteration is found open, the converged run closed."""
        return self.early.verdict == OPEN and self.converged.verdict == CLOSED


def folder() -> Path:
    """Where the files of the demo are: beside the package in a checkout, in it when installed."""
    here = Path(__file__).parent
    for place in (here / "meshes", here.parent / "meshes"):
        if (place / CHECK).is_file():
            return place
    raise FormatError(
        "the files of the demo are missing",
        where=here / "meshes",
        mend="Install fvcheck again, or run it from a checkout.",
    )


def run_demo(place: Path | None = None) -> Demo:
    """Balance the wake in the early and in the converged state, read as the demo's check file says."""
    from fvcheck.balancing import balance_all
    from fvcheck.checkfile import load
    from fvcheck.flow import open_flow
    from fvcheck.fluid import Fluid
    from fvcheck.surfaces import ControlSurface

    place = place or folder()
    check = load(place / CHECK)
    fluid = Fluid(**check.fluid.model_dump(exclude_unset=True))
    results = [
        balance_all(
            open_flow(place / name, fluid=fluid, fields=dict(check.fields), walls=check.patches.wall),
            [ControlSurface.box(*WAKE, name="wake")],
            TOLERANCE,
            tolerance=TOLERANCE,
        )
        for name in (EARLY, CONVERGED)
    ]
    return Demo(*results)
