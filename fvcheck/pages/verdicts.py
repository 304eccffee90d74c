"""Pages of the verdicts."""

from __future__ import annotations

from fvcheck.hints import Page

VERDICTS: dict[str, Page] = {
    "closed": Page(
        "The imbalance and its sampling band together stay within the tolerance.",
        "The field conserves this quantity over this volume to the tolerance, beyond the error of "
        "measuring it. That is necessary for a right result, not sufficient: a wrong geometry, boundary "
        "value or turbulence model can balance as well.",
        "Go on to what the run is for. Tighten --tolerance to see how far the balance holds.",
    ),
    "undecided": Page(
        "The sampling band straddles the tolerance: the true imbalance may lie on either side.",
        "From these data the flux cannot be told better. Often the surface passes where the field is steeper "
        "than the mesh, such as a thermal layer or a shear layer two cells wide.",
        "Draw the surface through smoother flow, or larger; tell no-slip patches with --wall; export "
        "cell values of a finite-volume run rather than point copies, in double precision.",
    ),
    "mesh-limited": Page(
        "The imbalance is out of tolerance, but no larger than what a second-order scheme may leave on "
        "this mesh.",
        "More iterations would not remove it: the run may have converged to what this mesh can hold.",
        "Refine where the surface passes, or compare with a finer mesh. If only integral numbers matter, a "
        "larger surface in smoother flow may close.",
    ),
    "open": Page(
        "The imbalance is out of tolerance, and neither sampling nor mesh explains it.",
        "Something is missing or not finished: a run not iterated far enough, a boundary or source not "
        "told to fvcheck, a wrong density, viscosity, pressure kind or gravity.",
        "Iterate further and check again. If it stays: compare the settings with the run's (fvcheck "
        "inspect), tell sources in a check file, and see whether all laws are open or one only: mass "
        "alone points to the export, momentum alone to pressure kind, viscosity or gravity, heat alone "
        "to conductivity or a heat source.",
    ),
}
