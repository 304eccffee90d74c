"""Pages of the laws."""

from __future__ import annotations

from fvcheck.hints import Page

LAWS: dict[str, Page] = {
    "mass": Page(
        "What flows out less what flows in, plus what is stored, less the sources: rho u.n around the "
        "volume.",
        "Every other law rides on it: with mass open, momentum and energy cannot close.",
        "Needs a velocity and a density. Default tolerance 0.5 % of the throughflow. Sources: an array "
        "of the role mass_source [kg/(m3 s)], or [[source]] in a check file.",
    ),
    "momentum": Page(
        "Net outflow of rho u, with the pressure p n and the friction -tau.n on the border, less weight and "
        "body forces. One row per direction, x and y in the plane of the run.",
        "The boundary entry of a body is the momentum that it takes out of the fluid: the force of the "
        "fluid on it.",
        "Needs velocity, density, pressure; viscosity unless the run is inviscid; --gravity where the "
        "run has weight; --pressure-kind where the export is p/rho or lacks the weight.",
    ),
    "angular-momentum": Page(
        "Net outflow of r x rho u, with the moments of pressure, friction and forces, about the point "
        "--about X,Y (about in [case] of a check file). In an axisymmetric run it is that of the swirl "
        "about the axis, with the torque of its shear.",
        "It gives the torque on a body or a rotor, and sees moments that both rows of momentum miss.",
        "On request, --law angular-momentum; by default in axisymmetric runs with swirl, where no other law "
        "sees the swirl. Needs what momentum needs. The drawn flux is that of all torques outward.",
    ),
    "kinetic-energy": Page(
        "Mechanical power: transport of rho u2/2, work of pressure and friction on the border, less the "
        "work of body forces, of expansion, and plus what friction turns into heat inside "
        "(dissipation).",
        "It tells how much of the pumping power the scheme itself eats: numerical dissipation shows up here "
        "although mass and momentum close.",
        "Needs what momentum needs. Pressure counts from its mean on the border (fvcheck explain datum).",
    ),
    "heat": Page(
        "Transport of rho c T and conduction -k grad T, less heat sources; for fluids of constant density.",
        "At walls all heat passes by conduction through the first cells, where T is steepest: there "
        "bands are widest.",
        "Needs temperature, velocity, --density, --specific-heat and --conductivity. T counts from its "
        "mean on the border (fvcheck explain datum). Friction heat is left out, as most solvers do; "
        "viscous_heating = true in [fluid] of a check file counts it. An eddy viscosity adds c_p mu_t/Pr_t "
        "(--turbulent-prandtl, 0.85) to the conductivity.",
    ),
    "total-energy": Page(
        "Transport of rho E with the work of pressure and friction and with conduction, for an ideal gas.",
        "It holds across shocks, where kinetic energy alone does not.",
        "Needs --gamma, and any two of pressure, temperature, density and rho E beside a velocity or a "
        "momentum; --gas-constant where temperature is one of them.",
    ),
    "entropy": Page(
        "Net outflow of rho s with s = c_v ln(p/rho^gamma), and conduction q.n/T: what is left over is made "
        "inside. An inequality, shown as entropy >= 0: the imbalance is the production.",
        "Friction, conduction and shocks make entropy, nothing destroys it. A production below zero beyond "
        "the resolution band is open: an expansion shock, a wrong heat source. All else is closed, and its "
        "size says how much is lost; the percentage has little meaning where the flow is isentropic.",
        "On request, --law entropy. Needs --gamma and --gas-constant.",
    ),
    "scalar": Page(
        "Transport of rho phi and mixing -Gamma grad phi, Gamma = rho D + mu_t/Sc_t, for each scalar that is "
        "named: the law scalar:NAME. phi is per mass of fluid and counts from its mean on the border.",
        "Concentrations, mixture fractions and the like are conserved as mass is.",
        "--field scalar:NAME=ARRAY --diffusivity NAME=D [m2/s]; a source as --field "
        "scalar_source:NAME=ARRAY [per m3 s]. Or [[law]] in a check file: name, field, diffusivity, source, "
        "tolerance_percent.",
    ),
}
