"""Exact flows on trial meshes are what the closed forms say."""

from __future__ import annotations

import exact
import numpy as np
import pytest
from exact_data import KINDS, flow_data, mesh_for


def resolved(flow):
    """A cell size of some hundred cells."""
    x0, y0, x1, y1 = flow.domain
    return (x1 - x0) / 14 if flow.name == "suction-layer" else np.sqrt((x1 - x0) * (y1 - y0)) / 14


# a jump, or a singularity next to coarse cells, leaves no order to measure
SMOOTH = [f for f in exact.all_flows() if f.jump is None and (f.hole is None or f.name == "cylinder")]


@pytest.mark.parametrize("flow", SMOOTH, ids=lambda f: f.name)
def test_averages_and_values_at_centres_differ_by_second_order_only(flow):
    gap = []
    for shrink in (1.0, 0.5):
        cells = mesh_for(flow, "triangles", shrink * resolved(flow))
        average = flow_data(flow, cells, "average")["velocity"]
        centre = flow_data(flow, cells, "centroid")["velocity"]
        gap.append(np.sqrt(np.mean((average - centre) ** 2)))
    # halving the size divides a second-order gap by 4; 2.5 leaves room for layers just resolved.
    # The suction layer's heights do not shrink with the length of its cells.
    if flow.name != "suction-layer":
        assert gap[1] < gap[0] / 2.5 or gap[1] < 1e-13
    assert gap[1] < 0.02 * flow.speed


@pytest.mark.parametrize("kind", KINDS)
def test_every_kind_of_mesh_carries_the_mean_of_the_field(kind):
    flow = exact.kovasznay()
    cells = mesh_for(flow, kind, 0.1)
    mean = cells.areas @ flow_data(flow, cells, "average")["velocity"]
    # over two waves the cosine and sine vanish: only the unit stream is left
    assert np.allclose(mean, [3.0, 0.0], atol=1e-9)


def test_gas_averages_conserve_mass_momentum_and_energy():
    flow = exact.oblique_shock()
    cells = mesh_for(flow, "triangles", 0.1)
    data = flow_data(flow, cells, "average")
    # the shock leaves the domain through its right side x = 1, at y = tan β
    behind = 0.5 * np.tan(flow.jump[2])
    rho_after = float(flow.rho(np.array(0.9), np.array(0.1)))
    mass = (1.5 - behind) + behind * rho_after
    assert cells.areas @ data["density"] == pytest.approx(mass, rel=1e-12)
    p_after, v_after = (float(f(np.array(0.9), np.array(0.1))) for f in (flow.p, flow.v))
    momentum = cells.areas @ (data["density"] * data["velocity"][:, 1])
    assert momentum == pytest.approx(behind * rho_after * v_after, rel=1e-12)
    assert data["pressure"].min() > 0 and data["pressure"].max() < 1.2 * p_after


def test_what_does_not_exist_is_refused():
    with pytest.raises(ValueError, match="hole"):
        mesh_for(exact.cylinder(), "quads", 0.5)
    with pytest.raises(ValueError, match="kind"):
        mesh_for(exact.kovasznay(), "hexagons", 0.5)
    with pytest.raises(ValueError, match="where"):
        flow_data(exact.kovasznay(), mesh_for(exact.kovasznay(), "quads", 0.5), "face")
