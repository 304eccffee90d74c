"""Surfaces taken together have the ledgers that each has alone."""

from dataclasses import asdict

import numpy as np
import pytest
import trial_meshes as tm
from core_cases import UNIT, flow_on, meshes
from exact import oblique_shock, taylor_green

import fvcheck
from fvcheck import ControlSurface, Flow, Fluid, SurfaceError, many

SURFACES = [
    ControlSurface.box(0.11, 0.13, 0.62, 0.71, name="box"),
    ControlSurface.circle(0.5, 0.5, 0.33, name="circle"),
    ControlSurface.box(0.12, 0.14, 0.62, 0.71, name="almost the box"),
    ControlSurface.line([(0.1, 0.2), (0.8, 0.9)], name="line"),
    ControlSurface.box(-0.5, 0.4, 0.7, 2.0, name="over the rim"),
    ControlSurface.domain(name="domain"),
]


def check(flow, laws=None, surfaces=SURFACES):
    """Bit for bit: fits and sums are those of the surface alone, in the same order."""
    together = fvcheck.balance_all(flow, surfaces, laws)
    for surface, ledger in zip(surfaces, together.ledgers, strict=True):
        assert asdict(ledger) == asdict(fvcheck.balance(flow, surface, laws))
    return together


@pytest.mark.parametrize("kind", ["triangles", "mixed", "polygons", "quadtree", "holed"])
@pytest.mark.parametrize("where", ["point", "average"])
def test_ledgers_together_are_those_of_each_surface_alone(kind, where):
    check(flow_on(taylor_green(), meshes()[kind], where))


def test_so_are_those_across_a_shock_which_one_surface_meets_and_another_does_not():
    exact = oblique_shock()
    x0, y0, x1, y1 = exact.domain
    cells = tm.triangles(exact.domain, (x1 - x0) / 40, 3)
    surfaces = [
        ControlSurface.box(x0 + a * (x1 - x0), y0 + b * (y1 - y0), x0 + c * (x1 - x0), y0 + d * (y1 - y0))
        for a, b, c, d in [(0.1, 0.1, 0.9, 0.9), (0.05, 0.6, 0.2, 0.9), (0.5, 0.05, 0.95, 0.3)]
    ]
    together = check(flow_on(exact, cells, "average"), surfaces=surfaces)
    assert len({str(ledger.degrees) for ledger in together.ledgers}) > 1


def test_so_is_the_rounding_band_of_data_in_single_precision():
    cells = meshes()["triangles"]
    x, y = cells.points.T
    data = {"U": np.column_stack([x * y, y - x]).astype(np.float32), "p": np.sin(x).astype(np.float32)}
    flow = Flow.from_arrays(
        cells.points, (cells.offsets, cells.nodes), point_data=data, fluid=Fluid(density=1.2)
    )
    together = check(flow, ["mass"])
    assert together["box"]["mass"].rounding_band > 1e-9


def test_batches_change_nothing_and_bound_what_is_kept(monkeypatch):
    flow = flow_on(taylor_green(), tm.triangles(UNIT, 0.05, 1))
    whole = fvcheck.balance_all(flow, SURFACES)
    sizes = []
    compiled = many.compile_probe
    monkeypatch.setattr(many, "_BATCH", 400)
    monkeypatch.setattr(many, "compile_probe", lambda f, c: sizes.append(len(c)) or compiled(f, c))
    assert fvcheck.balance_all(flow, SURFACES) == whole
    assert len(sizes) > 1


def test_a_surface_outside_is_named():
    outside = ControlSurface.box(3, 3, 4, 4, name="afar")
    with pytest.raises(SurfaceError, match="afar"):
        fvcheck.balance_all(flow_on(taylor_green(), meshes()["quads"]), [*SURFACES, outside])
