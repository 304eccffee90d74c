"""The bundled case: air past a heated bar in a channel, at a few iterations and converged."""

from __future__ import annotations

from dataclasses import dataclass
from pathlib import Path

from fvcheck.errors import FormatError
from fvcheck.ledger import Result
from fvcheck.verdict import CLOSED, OPEN

EARLY, CONVERGED, CHECK = "demo-coarse-0020.vtu", "demo-coarse.vtu", "demo.toml"
LAWS = ("mass", "momentum")
"""What the demo judges, over the first surface of the check file and to its tolerances."""


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
    """Balance the early and the converged state, with the settings of the demo's check file."""
    from fvcheck.balancing import balance_all
    from fvcheck.checkfile import load
    from fvcheck.flow import open_flow
    from fvcheck.fluid import Fluid

    place = place or folder()
    check = load(place / CHECK)
    fluid = Fluid(**check.fluid.model_dump(exclude_unset=True))
    results = [
        balance_all(
            open_flow(place / name, fluid=fluid, fields=dict(check.fields), walls=check.patches.wall),
            check.control_surfaces()[:1],
            LAWS,
            tolerance=check.tolerance,
        )
        for name in (EARLY, CONVERGED)
    ]
    return Demo(*results)
