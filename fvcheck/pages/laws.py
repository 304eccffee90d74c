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
        "viscous_heating = true in [fluid] of a check file counts it.",
    ),
    "total-energy": Page(
        "Transport of rho E with the work of pressure and friction and with conduction, for an ideal gas.",
        "It holds across shocks, where kinetic energy alone does not.",
        "Needs --gamma, and --gas-constant unless density and pressure (or rho E) are in the export.",
    ),
}
