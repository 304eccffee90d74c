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
    "clockwise-cells": Page(
        "Some cells list their points the other way round than the rest.",
        "Their normals would point inward and their fluxes count backwards, so they are turned.",
        "Nothing for a sound run. Many such cells may mean that a block was mirrored when exported.",
    ),
    "zero-area-cells": Page(
        "Cells of no area were met and left out.",
        "They hold no fluid; fits around them would have no slope across.",
        "Nothing, if they are collapsed cells of the mesh generator.",
    ),
    "hanging-nodes": Page(
        "Points lie on the edges of larger neighbouring cells, as quadtree refinement leaves them.",
        "They are put into those cells as corners, so that both sides share the same edges and no "
        "flux is lost.",
        "Nothing.",
    ),
    "stitched-points": Page(
        "Points of blocks or partitions that lie on one another are merged; the hint says how far "
        "apart they were.",
        "Without it each seam would count as a wall.",
        "Compare the distance with the edge lengths in fvcheck inspect: it should be far smaller.",
    ),
    "kept-apart-points": Page(
        "Points lie on one another and are not merged: two sides of a thin wall, or values that differ.",
        "Merged, they would let the flow pass a wall, or mix two values.",
        "If the blocks should join there, look for a seam in the export where the data jump.",
    ),
    "open-seams": Page(
        "Boundary edges face each other at a small distance, as where blocks do not quite meet.",
        "The gap counts as boundary: what crosses it in the run is missing in the balance.",
        "Export the blocks with coinciding points, or as one mesh.",
    ),
    "narrow-holes": Page(
        "Holes in the domain are far longer than they are wide.",
        "A thin plate looks like this, but so does a gap between blocks that do not quite meet.",
        "Look at the place. If there is no body, export the blocks with coinciding points.",
    ),
    "inner-lines": Page(
        "Line cells lie inside the domain.",
        "A patch is part of the boundary; what is inside can be none.",
        "Nothing, if they are the lines of a baffle or a probe.",
    ),
    "unknown-faces": Page(
        "A named patch lists faces that are no edges of the boundary.",
        "They are left out; the rest of the patch is used.",
        "Nothing for interior face sets. Otherwise compare the patches in fvcheck inspect with the run.",
    ),
    "looks-like-wall": Page(
        "The velocity on a patch nearly vanishes, but the patch is not told to be a no-slip wall.",
        "A cell-centred export holds no values at walls. Told of them, the fits near a wall take "
        "its velocity "
        "as known: friction and heat there come out far better, and the bands are narrower.",
        "If it is a wall: --wall NAME; where it moves --wall NAME=VX,VY or NAME=spin(OMEGA,X,Y). Leave it "
        "if it is not.",
    ),
    "unclear-fields": Page(
        "The roles of the arrays could not all be settled.",
        "A balance with a guessed array would look like any other.",
        "Name the array as the hint says, then inspect again; the same --field serves fvcheck balance.",
    ),
    "inviscid": Page(
        "No viscosity is known, so momentum and energy are balanced without friction.",
        "Near walls and in wakes the missing friction shows up as imbalance.",
        "--viscosity VALUE (dynamic), or --field viscosity=NAME. Nothing for an inviscid run.",
    ),
    "no-conduction": Page(
        "No conductivity is known, so heat is carried by the flow only.",
        "At heated walls all heat passes by conduction: without it the heat row is open by that amount.",
        "--conductivity VALUE, or --field conductivity=NAME.",
    ),
    "law-left-out": Page(
        "A law was not asked for, and the data do not suffice for it.",
        "Its row is missing; the others are not touched.",
        "Give what the hint names, or ask for certain laws with --law to have no hint.",
    ),
    "option-over-field": Page(
        "A property was told as a number while an array of it is in the export.",
        "The told number is used everywhere; the array is not.",
        "Leave the option out to use the array.",
    ),
    "out-of-plane-velocity": Page(
        "The velocity has a part normal to the plane.",
        "It carries energy and angular momentum through the surface, and is counted there; the "
        "mass balance of "
        "a plane run does not feel it.",
        "Nothing for a swirling run. In a run meant to be plane, look at the boundary conditions.",
    ),
    "steady-in-moving-frame": Page(
        "The control surface moves, and no rates of change are known.",
        "What the moving volume holds is taken as constant: right for a run that is steady in the "
        "moving frame.",
        "For a run that is unsteady there, give rates as fields: --field rate:velocity=NAME and so on.",
    ),
    "wedge": Page(
        "A 3D export is one cell thick between two planes that meet in an axis: a slice of an "
        "axisymmetric run.",
        "Its points are turned onto the mid plane, velocities at points with them; coordinates are the axial "
        "and the radial one. Fluxes are for the whole turn, not for the slice.",
        "Draw surfaces in those coordinates; fvcheck inspect shows their ranges.",
    ),
    "axis-taken": Page(
        "The mesh could turn about either coordinate axis, and one is taken.",
        "Every flux carries the weight 2 pi r, so a wrong axis makes every number wrong.",
        "If it is the other one: --axis y (or x).",
    ),
    "gas-law-misfit": Page(
        "The export holds more fields of a gas than are needed, and they do not fit together.",
        "Which of them a law uses then decides its numbers; a wrong gas constant or ratio of specific heats, "
        "or a gauge pressure, shows up like this.",
        "Compare --gas-constant and --gamma with the run's; pressure and temperature must be absolute.",
    ),
    "density-not-constant": Page(
        "The density varies over the domain, while the fluid is taken as one of constant density.",
        "Mass and momentum use the density as it is; heat leaves out what compression does.",
        "For a gas: --gas-constant and --gamma. Nothing for a mixture of liquids.",
    ),
    "wall-with-throughflow": Page(
        "A patch that is called a wall, by you or by its name, lets flow through.",
        "As a no-slip wall its velocity is taken as known, which would hide that flow.",
        "Compare with fvcheck inspect; leave the patch out of --wall if it is none.",
    ),
    "kinematic-pressure": Page(
        "The momentum balance is open, and would close if the pressure were p/rho (or were not).",
        "Many solvers of constant density export the pressure divided by the density.",
        "--pressure-kind kinematic (or static), if that is what the run writes.",
    ),
    "reduced-pressure-likely": Page(
        "The momentum balance is open by just the weight of the fluid.",
        "Some solvers export the pressure without its hydrostatic part, p - rho g.x.",
        "--pressure-kind reduced (or static), if that is what the run writes.",
    ),
    "viscosity-off-by-density": Page(
        "The momentum balance is open, and would close with the viscosity times, or over, the density.",
        "--viscosity is dynamic, in Pa s; many set-ups hold the kinematic one, in m2/s.",
        "Give the dynamic one, or name an array of the other: --field kinematic_viscosity=NAME.",
    ),
    "not-steady": Page(
        "The stored state before (or after) this one is different, and no rates of change are known.",
        "Without them the content of the volume counts as constant: what it stores shows up as imbalance.",
        "fvcheck history takes the rates from the states; or give them as fields: "
        "--field rate:velocity=NAME. If the states are iterations, the run was still moving.",
    ),
    "patch-values": Page(
        "The file gives values on a patch itself, in line cells, that are not copies of the cells behind.",
        "They are taken as known there: fits near the patch lean on them instead of reaching out "
        "of their data, "
        "so wall heat and friction are far surer.",
        "Nothing, if they are the boundary values of the run. If they are not, export without line cells.",
    ),
    "degree-fell": Page(
        "Somewhere on the surface the data jump: a shock, a contact, a layer thinner than the cells.",
        "A polynomial across a jump overshoots. There, values are interpolated linearly within the "
        "range of the "
        "data around, and the band takes the larger of the two steps between degrees.",
        "Nothing for a shock. For a thin layer, refine there, or draw the surface where the flow is smooth. "
        "On a coarse mesh a cell beside an axis or a corner may be taken for a jump: its band holds that.",
    ),
    "times-unused": Page(
        "Several files were given, and not each of them has a time of its own.",
        "Without times nothing is known of how fast the content of a volume changes, so there is no storage.",
        "Nothing for iterations of a steady run. Else export with times, or as one series (PVD, XDMF, …).",
    ),
    "time-or-iteration": Page(
        "The times of the steps are whole numbers.",
        "Some writers put the number of the iteration where a time belongs; storage would then be wrong.",
        "For iterations of a steady run: --steady. Else nothing.",
    ),
    "rates-over-series": Page(
        "The export holds rates of change (rate:ROLE) and several times.",
        "Both could give the storage; the rates of the run itself are surer than differences of snapshots.",
        "Leave --field rate:ROLE=NAME out to have the snapshots differenced.",
    ),
    "few-snapshots": Page(
        "There are fewer than three times.",
        "A rate of change from two of them is right halfway between, not at either; its band is as wide as "
        "the fluxes change.",
        "Export one more time. Over the whole interval the balance is as good as with many.",
    ),
    "forces-at-rest": Page(
        "Forces over time are asked for, and the mesh is another one at each snapshot, or its points move.",
        "What the fluid around a body stores is taken from the data of a few snapshots at the same places.",
        "Follow a surface around the body: its momentum row keeps account of a moving mesh.",
    ),
    "mesh-moves": Page(
        "The points of the mesh move from one snapshot to the next, its cells stay the same.",
        "The domain boundary then moves with it, and what it sweeps counts; drawn surfaces stay where they "
        "are drawn, or move as told.",
        "Nothing, if the run has a moving mesh.",
    ),
    "mesh-changes": Page(
        "A snapshot has other cells than the one before.",
        "Everything is prepared anew for it, and errors of sampling in what a volume holds no longer cancel "
        "between the two: bands of storage are wider.",
        "Nothing, if the run adapts its mesh. Else look whether the files belong to one run.",
    ),
    "snapshot-left-out": Page(
        "A file of a run that is watched could not be read, and did not change any more.",
        "It was cut off, or is no export; the history goes on without it.",
        "fvcheck inspect FILE says what is wrong with it.",
    ),
    "two-meshes": Page(
        "A study has two meshes.",
        "Two values show a difference but no order, so second order is assumed, and the factor of safety is "
        "3 in place of 1.25 (Roache 1998).",
        "Run a third mesh, coarser or finer by 1.3 or more.",
    ),
    "close-meshes": Page(
        "Two meshes of a study are close in cell size.",
        "Differences between them are small against noise of the mesh, and the observed order is uncertain.",
        "Use meshes whose cell sizes differ by a factor of 1.3 or more.",
    ),
    "no-convergence": Page(
        "Values differ more between the finer meshes than between the coarser ones.",
        "Nothing can be extrapolated; the band given is three times the range of the values.",
        "See that each run is converged in its iterations, and that the meshes are refined alike everywhere.",
    ),
    "study-within-bands": Page(
        "Values on two meshes differ by less than the bands of reading them from the data.",
        "Order and extrapolation are then those of noise; the number itself is as good as its sampling band.",
        "Nothing, if the band is small enough. Else move the surface, or tell the walls.",
    ),
    "study-incomplete": Page(
        "A quantity could be had on some meshes only, such as the flux of a patch of another name.",
        "Over fewer meshes it would say less than it seems to; the exit status is 2.",
        "Give the meshes the same patches and fields, or restrict the study with -s and --law.",
    ),
    "routes-disagree": Page(
        "Two routes give a force on a body that differs by more than their resolution bands.",
        "All routes measure the same force of an exact solution. So large a gap is not the mesh alone: the "
        "run is not done, the flow is not steady, or a setting (viscosity, pressure, wall) is wrong.",
        "fvcheck balance with a surface around the body shows which law is open; trust no route before.",
    ),
    "routes-differ": Page(
        "Two routes differ by more than their sampling bands and by more than 1 % of the force, but "
        "within the resolution bands.",
        "The gap is what this mesh is worth: the run conserves only to the order of its scheme.",
        "Take the band, which averages over many surfaces; refine around the body to narrow the gap.",
    ),
    "route-refused": Page(
        "A route to the force on a body could not be gone; its entry has no numbers.",
        "A control surface has to hold the whole body and lie in the fluid; the wake and circulation "
        "formulas hold under assumptions only, which are checked as far as the data show them.",
        "Do what the hint says, or leave the route out with --method.",
    ),
    "body-no-wall": Page(
        "The data lie in cells, and the body is not told to be a no-slip wall.",
        "The velocity on its surface is then extrapolated, and friction by the body-surface route with it.",
        "--wall NAME where it is one. The control-surface and band routes hardly feel it.",
    ),
    "open-body": Page(
        "The patch does not close around a body: it is a part of a wall, say.",
        "Its force then contains the pressure level times its projected length, and control surfaces "
        "around it also hold parts of its neighbours.",
        "Give a pressure that counts from the level you mean, or all patches of the body as one.",
    ),
    "other-patch-inside": Page(
        "Control surfaces around a body also hold parts of other patches.",
        "What acts on these is taken off by integrating p and friction along them, which is less sure than "
        "fluxes through the fluid; the bands say by how much.",
        "Smaller distances (--distance, --band), where the gap allows any.",
    ),
    "no-reference": Page(
        "No reference velocity, length and density are told.",
        "Coefficients of drag, lift and moment need them; forces do not.",
        "--reference VELOCITY,LENGTH,DENSITY, or reference = { … } in [[body]] of the check file.",
    ),
    "reference-far-off": Page(
        "A reference velocity, length or density differs from what is in the data by a factor above 50.",
        "Coefficients are made with it; a length in millimetres makes them a thousand times too small.",
        "Tell it in the units of the run. If it is meant so, nothing.",
    ),
    "storage-unknown": Page(
        "An imbalance that no setting explains was found in a single state.",
        "In an unsteady run, what the volumes store is missing from each ledger; one state cannot show it.",
        "Diagnose a file with several states and their times, or take fvcheck history.",
    ),
    "too-few-cells": Page(
        "The mesh has too few cells for many control volumes of a dozen cells or more.",
        "Causes are told apart by how they differ from volume to volume.",
        "Diagnose a finer export.",
    ),
    "no-plateau": Page(
        "A number swept over positions is level nowhere: no three neighbours agree to 1 % or their bands.",
        "Where a momentum balance closes, the force does not depend on the surface.",
        "Sweep over distances at which the mesh is fine; if it drifts there too, the run is not done.",
    ),
}
