"""Hints: what was noticed beside the result, each with a stable code.

A hint never changes a number. Its code leads to a page of ``fvcheck explain``:
what was seen, why it matters, what to do.
"""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Hint:
    """One remark: ``code`` from `PAGES`, ``message`` with the numbers and the place."""

    code: str
    message: str


@dataclass(frozen=True)
class Page:
    """The explanation of a code: what was seen, why it matters, what to do."""

    seen: str
    why: str
    do: str


PAGES: dict[str, Page] = {
    "xdmf-origin-order": Page(
        "An XDMF grid is given by an origin and a spacing.",
        "They run like the dimensions, the slowest axis first (z, y, x); some writers put x first.",
        "Compare the extent of the domain with the run; if x and y are exchanged, write the geometry as XYZ.",
    ),
    "cell-data-preferred": Page(
        "An array of the same name is stored at points and at cells.",
        "Point copies of a finite-volume run are averages of its cells: they smooth the field, and fluxes "
        "taken from them balance worse than the run itself.",
        "Nothing for a finite-volume run. For one that solves at points: --field ROLE=point:NAME.",
    ),
    "nan-values": Page(
        "An array in use holds values that are NaN or infinite.",
        "Near such a value nothing can be sampled; often they mark blanked cells, or a run that blew up.",
        "Look where they are. If they lie where the surfaces pass, export the field again.",
    ),
    "ambiguous-field": Page(
        "An array has a name with more than one common meaning, and is left alone.",
        "A guess could be wrong without a sign of it: k is a turbulence energy here, a conductivity there.",
        "If it is what the hint says, tell so: --field ROLE=NAME, in the unit of the role.",
    ),
    "reduced-pressure": Page(
        "There is no pressure but an array that may be the pressure less its hydrostatic part.",
        "Taken for the static pressure, it would leave the weight of the fluid out of the momentum balance.",
        "--field pressure=NAME --pressure-kind reduced, with --gravity and --density; or export it.",
    ),
    "same-values": Page(
        "Two arrays that claim one role hold the same values.",
        "It does not matter which is used.",
        "Nothing.",
    ),
    "lone-component": Page(
        "An array looks like one component of a vector whose other components are missing.",
        "A vector is put together only from components with like names.",
        "--field ROLE=VX,VY names them; or export all components.",
    ),
    "one-step-array": Page(
        "An array is stored at one step only, others at several.",
        "Its values are taken at every step. If it changes in time, all steps but one are wrong.",
        "Export every array that changes at each step.",
    ),
    "array-not-read": Page(
        "An array holds values at the corners or at Gauss points of elements.",
        "Such values have no single number per point or cell, so the array is left out.",
        "Export it at points or as one value per cell if a law needs it.",
    ),
    "no-line-end": Page(
        "A text file does not end with a line end.",
        "A file that was cut within its last number reads without an error, but that number is wrong.",
        "Compare its size with the original; export in binary form.",
    ),
}
