"""Closed-form flow fields: yardsticks that fvcheck did not make itself.

``all_flows()`` gives one of each; the functions take parameters. Names of books and
papers stand in each docstring.
"""

from exact.compressible import isentropic_vortex, oblique_shock, uniform_gas
from exact.flow import ExactFlow, box_contour, circle_contour, fluxes, gradient, polygon_contour
from exact.gas_dynamics import diamond, expansion_fan, normal_shock, nozzle, rayleigh
from exact.potential import cylinder, rankine_half_body, source
from exact.revolved import (
    burgers_vortex,
    hagen_poiseuille,
    heated_pipe,
    landau_force,
    landau_jet,
    spherical_source,
    stokes_sphere,
)
from exact.similarity import hiemenz, hiemenz_profile, jeffery_hamel, jeffery_hamel_profile
from exact.viscous import (
    couette,
    cylindrical_couette,
    kovasznay,
    lamb_oseen,
    linear,
    poiseuille,
    shear_layer,
    suction_layer,
    taylor_green,
    uniform,
)

__all__ = [
    "ExactFlow",
    "all_flows",
    "box_contour",
    "burgers_vortex",
    "circle_contour",
    "couette",
    "cylinder",
    "cylindrical_couette",
    "diamond",
    "expansion_fan",
    "fluxes",
    "gradient",
    "hagen_poiseuille",
    "heated_pipe",
    "hiemenz",
    "hiemenz_profile",
    "isentropic_vortex",
    "jeffery_hamel",
    "jeffery_hamel_profile",
    "kovasznay",
    "lamb_oseen",
    "landau_force",
    "landau_jet",
    "linear",
    "normal_shock",
    "nozzle",
    "oblique_shock",
    "poiseuille",
    "polygon_contour",
    "rankine_half_body",
    "rayleigh",
    "shear_layer",
    "source",
    "spherical_source",
    "stokes_sphere",
    "suction_layer",
    "taylor_green",
    "uniform",
    "uniform_gas",
]


def all_flows() -> tuple[ExactFlow, ...]:
    """One of each field, with default parameters."""
    return (
        kovasznay(),
        taylor_green(),
        poiseuille(),
        couette(),
        hiemenz(),
        jeffery_hamel(),
        jeffery_hamel(degrees=-5.0),
        lamb_oseen(),
        shear_layer(),
        suction_layer(),
        cylinder(),
        source(),
        source(stream=1.0),
        rankine_half_body(),
        isentropic_vortex(),
        isentropic_vortex(stream=(0.5, 0.3)),
        oblique_shock(),
        uniform_gas(),
        uniform(),
        linear(),
    )
