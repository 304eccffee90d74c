"""Pages of the words that results are written in."""

from __future__ import annotations

from fvcheck.hints import Page

TERMS: dict[str, Page] = {
    "laws": Page(
        "Each law is a balance: storage + flux + boundary - source = imbalance, zero for an exact solution.\n"
        "mass, momentum (x, y), kinetic-energy; heat for constant density; total-energy for an ideal gas; "
        "scalar:NAME for each scalar named. On request: angular-momentum, entropy.",
        "They fail one by one: which of them is open says where to look.",
        "fvcheck explain mass (momentum, …). --law mass,momentum picks; without it every law the data allow.",
    ),
    "axisymmetric": Page(
        "--axisymmetric (symmetry in [case]): one coordinate runs along the axis, the other is the radius. "
        "All fluxes, areas and volumes carry 2 pi r: results are for the whole turn, without /m.\n"
        "The axis is x, or y where only there radii are not negative; --axis x|y settles it. A 3D slice "
        "of a few degrees, one cell thick, is recognised and needs no option.",
        "The row of momentum along the axis is the force along it. That across is the radial sum, which is "
        "no force: its source holds pressure, hoop stress and swirl over r. Velocity out of the plane is "
        "the swirl, and has the row angular-momentum.",
        "Cell values are averages over rings. Surfaces are drawn in the half plane; those that end on the "
        "axis pass nothing there.",
    ),
    "rotating-frame": Page(
        "--frame-rate OMEGA (rad/s, counter-clockwise) and --frame-centre X,Y: the exported velocities are "
        "those seen from a frame that turns; in an axisymmetric run about the axis, right-handed.",
        "Coriolis and centrifugal forces then count as sources of momentum and angular momentum; the "
        "centrifugal one does work.",
        "For a pressure that holds the centrifugal part already, export the static one. A surface that moves "
        "through a frame at rest is another matter: fvcheck explain surfaces.",
    ),
    "verdicts": Page(
        "closed: |imbalance| + sampling band within the tolerance. undecided: the band straddles the "
        "tolerance.\n"
        "mesh-limited: out of it, by no more than the resolution band. open: out of it, and beyond that "
        "band.",
        "They say what to do next: go on; measure better; refine; iterate or correct the set-up. The "
        "verdict of a surface, and of the whole result, is the worst of the rows.",
        "fvcheck explain closed (undecided, mesh-limited, open).",
    ),
    "bands": Page(
        "Each flux is integrated with polynomials of degree 1, 2 and 3 through the same data.\n"
        "Where the data do not support a degree (a shock, a layer thinner than the mesh), it falls there.\n"
        "Sampling band (+-data): what the cubics about neighbouring points still differ by, and what they "
        "change against degree 2: the error of integrating from discrete data; a share for the digits "
        "that the file stores (rounding band) is in it.\n"
        "Resolution band (+-mesh): three times what degree 2 changes against 1, an imbalance that a "
        "second-order scheme may leave on this mesh however long it iterates; never below the sampling "
        "band.",
        "A percentage without them cannot separate the sampling, the mesh and the run.",
        "A wide sampling band: move the surface, tell the walls. A wide resolution band: refine there.",
    ),
    "surfaces": Page(
        "Closed: box(x0, y0, x1, y1), circle(x, y, r), ellipse(x, y, a, b[, degrees]), polygon(x y, x "
        "y, …), around(BODY, distance), domain(). Open, fluxes only: line(x y, x y, …), patch(NAME).\n"
        "file(PATH) reads GeoJSON, WKT or two-column CSV; WKT text works as it is. NAME= in front names "
        "a surface.\n"
        "Moving: @ velocity(wx, wy) or @ spin(omega, x, y) behind.",
        "The volume is the inside of the drawn surface as far as there is fluid: bodies and walls "
        "within it become boundary entries of the ledger. The normal is outward; of a line, to the "
        "right of its direction.",
        'fvcheck balance run.vtu -s "outer=box(0, 0, 1, 1)". Keep surfaces a few cells away from bodies and '
        "out of steep layers, unless they are what you ask about.",
    ),
    "history": Page(
        "The ledger at every snapshot of a run. With times, storage is the rate of change of what the volume "
        "holds, by three snapshots (second order, at both ends too); the step to the next order is its band "
        "in time, part of the sampling band. Below stands the balance from the first to the last time.\n"
        "force: of the fluid on all that a surface encloses, by the momentum ledger.\n"
        "level and drift: over the last quarter; settled: it stays there within a quarter of the tolerance, "
        "or period by period. mean: over whole periods where the number swings, else behind the start-up, "
        "with a 95 % band for correlated values.",
        "One state cannot say whether a run is done, nor close an unsteady balance.",
        "fvcheck history 'run_*.vtu' -s …; --steady for iterations, --follow while the run writes; --forces "
        "for drag, lift and moment by every route, with what is stored around the body; --csv, "
        "--plot.",
    ),
    "study": Page(
        "The same numbers on several meshes. Cell size: root of area over cells. Observed order p, "
        "extrapolated value and grid convergence index (GCI) by the procedure of Celik et al. 2008 from the "
        "three finest meshes; two meshes: order 2 assumed, factor 3 in place of 1.25.\n"
        "+-95 %: the index in the number's own unit, p held between 1/2 and 2; half of it is the standard "
        "uncertainty of ASME V&V 20.",
        "A number without its mesh error cannot be compared, neither with a test nor with another run.",
        "fvcheck study coarse.vtu medium.vtu fine.vtu -s …, runs converged, sizes apart by 1.3 or more.",
    ),
    "diagnose": Page(
        "where: the domain is halved again and again down to six cells, and looked at through round windows "
        "of 2.5 to 16 cells in radius. What is beyond the resolution band there is measured: place, "
        "diameter, amount, sampling band, share of all that stands out.\n"
        "why: sixty blocks of cells give sixty ledgers. Each set-up error has a signature over them (net "
        "pressure, net friction, area, warmth, resistance, rotation, ...); weighted least squares finds its "
        "coefficient. Named is what leaves at most 5 % of the squared imbalances and these within the "
        "bands (0.5 % where up to three bands are left), and all that leave about as little.",
        "An open verdict leaves the question whether the run or the set-up is at fault. A wrong depth "
        "multiplies every flux and cannot be seen in a balance.",
        "fvcheck diagnose run.vtu -c check.toml; --region SHAPE looks at its inside only, "
        "--try balances again with the first proposal, --vtu FILE "
        "writes the imbalance per cell. Exit status 1 where something is beyond what the mesh explains.",
    ),
    "report": Page(
        "One HTML page that holds all it needs, for the file and for others: verdict first, the ledgers, the "
        "field with mesh and surfaces, the flux through each surface drawn along it, forces of the bodies in "
        "the check file, history or study of several files, a diagnosis where a row is open, the set-up as "
        "it was understood, hints with their pages, versions and SHA-256 of the files.\n"
        "Arrows point the way a quantity is carried. Below the flux: the share of both bands that each "
        "stretch of border adds, so it says where to move the surface or to refine; and the imbalances of "
        "the parts of the volume nearest to each stretch, which add up to that of the whole.\n"
        "Several files: snapshots where their meshes are alike, else meshes of one case; --kind settles it. "
        "A file with several states is a series; --step INDEX takes one.",
        "A number in a mail loses its band, its surface and its settings; a page keeps them together.",
        "fvcheck report check.toml -o report.html, or a FILE with the options of fvcheck balance. --figures "
        "DIR: every figure as PNG and SVG. --vtk DIR: surfaces with flux and band densities (VTP), cells "
        "with their imbalance, degrees and shares inside (VTU). Exit status: that of the verdict.",
    ),
    "gate": Page(
        "Everything that check files ask for, in processes of their own: every row's verdict, every "
        "[[expect]], the [baseline]. Without a component or a method, an [[expect]] is about each component, "
        "each route (every control surface of one). Limits are taken as written, but a max alone "
        "limits the size of an imbalance. A row whose verdict an [[expect]] names, or whose imbalance it "
        "bounds, is judged by that instead of its verdict.\n"
        "A number has drifted from the baseline if it changed by more than tolerance_percent (of the row's "
        "scale; of the size of the force; of that at its arm for a moment) and by more than the bands: on "
        "the same mesh (equal digest) errors of sampling are common to both runs, so only rounding counts; "
        "on another mesh the sampling bands of both are added.\n"
        "Several files or steps are snapshots, and every one is judged.",
        "A pipeline needs a yes or no. What is missing is never a yes: a file, a field, a surface, a row, a "
        "number, a baseline of another surface, mesh frame or unit, a process that died.",
        "fvcheck gate check.toml, or several, or a pattern; --update-baseline writes all baselines or none; "
        "--junit, --markdown, --json PATH; --workers N; --time-limit SECONDS ends a case that hangs; "
        "--no-diagnosis leaves out why a row is open. "
        "To begin: fvcheck inspect FILE --start-check CHECK.toml. In pytest: fvcheck.testing.\n"
        "Exit status: the worst, 2 (could not be checked) before 1 (missed, open, drift) before 3 before 0. "
        "In JUnit: error, failure, skipped, none.",
    ),
    "exit": Page(
        "0: closed, or nothing to judge. 1: open. 2: the command, check file or data cannot be used. "
        "3: undecided or mesh-limited.",
        "A pipeline can tell 'not balanced' from 'could not be judged' and from 'could not be read'.",
        "Stopped from the keyboard: 130. Errors go to standard error, one line: what, where, how to mend it.",
    ),
    "units": Page(
        "SI, or any consistent units: nothing is converted. Fluxes of a plane run are per metre of depth "
        "(kg/s/m, N/m, W/m) unless --depth gives one.",
        "An export in millimetres with a velocity in m/s makes friction and gravity wrong by powers of ten.",
        "Compare the extent and ranges in fvcheck inspect with the run.",
    ),
    "signs": Page(
        "Fluxes count outward positive. in and out are magnitudes over the drawn pieces; boundary is the net "
        "over the enclosed walls, bodies, inlets and outlets; sources count into the volume.\n"
        "imbalance = storage + (out - in) + boundary - source.",
        "A positive imbalance of mass: more leaves than enters, fluid appears from nowhere.",
        "--patches splits boundary by patch, and the drawn flux by mechanism.",
    ),
    "scale": Page(
        "The imbalance in percent is of the scale: half the summed |flux| around the volume, the "
        "throughflow.\n"
        "Both rows of momentum share the scale of the vector's magnitude. What no closed surface feels, "
        "the mean pressure and the mean temperature, is taken out before.",
        "A small net flux would make a harmless imbalance look large, a high pressure level a large one "
        "small.",
        "A reference flux of your own: --scale momentum=1.2 (in the law's unit).",
    ),
    "datum": Page(
        "Heat counts from the mean temperature on the border, kinetic energy's pressure work from the "
        "mean pressure.",
        "A shift of level multiplies only the mass imbalance: with a datum far away, the heat row would "
        "mostly show mass again, a hundred times enlarged in kelvin.",
        "The levels are in the result file (datum). To see mass, look at the mass row.",
    ),
    "forces": Page(
        "What the fluid does to a body, by independent routes, each with its bands.\n"
        "body-surface: pressure and friction on the body itself. control-surface: what the momentum ledger "
        "of a surface around it leaves. band: the mean of that ledger over all surfaces between two "
        "distances. wake: the deficit behind it (momentum; betz, jones). circulation: lift = -rho U Gamma.\n"
        "Drag is along --direction, lift 90 degrees counter-clockwise from it; moments count "
        "counter-clockwise about --about (or about in [[body]]). Coefficients: force/(rho U2 L/2), "
        "moment/(rho U2 L2/2), with --reference U,L,RHO; around an axis the area is that of a "
        "disc of diameter L. A frequency times L/U (strouhal_scale) is a Strouhal number.\n"
        "pressure and viscous are those at the surface where the route measures.",
        "+-data is what integrating these data may cost, on a round body with chords for sides too; what "
        "the run itself fails to keep is in +-mesh. "
        "On a coarse mesh the integral over the body is the worst estimate there is, the band the best; "
        "where routes disagree beyond their bands, none is to be trusted. wake and circulation take a "
        "uniform, steady stream for granted and are refused where the data show none.",
        "fvcheck forces run.vtu --body pier --wall pier --reference 1,0.1,1.2. Distances come from the "
        "gap to the next boundary and the cells around the body; --distance, --band and -s replace them.",
    ),
    "families": Page(
        "a .. b in place of a number, and a count as last argument, sweep a surface: "
        "around(pier, 0.2 .. 1.0, 9), line(1 .. 3 0, 1 .. 3 1, 5). Ranges run together in equal steps.",
        "Behind a body, along a duct and around it, fluxes and forces must not depend on where they are "
        "measured. Marked with = is the level stretch: the longest of three or more positions that agree "
        "with their mean to 1 % or their bands.",
        "-s FAMILY with fvcheck balance gives fluxes against position; --sweep FAMILY with fvcheck forces "
        "the force (of lines: the drag by the wake route).",
    ),
}
