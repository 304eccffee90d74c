"""One set of data, one ledger, whatever the format: sample files that other programs wrote."""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path

import pytest

import fvcheck
from fvcheck import ControlSurface, Fluid

SAMPLES = Path(__file__).parent / "samples"
FILES = json.loads((SAMPLES / "samples.json").read_text())["files"]
SURFACES = {
    "box": ControlSurface.box(0.71, 0.43, 1.83, 1.39),
    "over the rim": ControlSurface.polygon([(0.1, 0.1), (1.6, 0.1), (1.9, 1.1), (0.2, 1.3)]),
    "line": ControlSurface.line([(0.5, 0.3), (1.2, 1.5), (2.1, 0.9)]),
}


def kind_of(facts):
    """Mesh and location: the files of one kind hold the same numbers."""
    mesh = facts["mesh"]
    for word, kind in (
        ("quadratic", "tri6"),
        ("curvilinear", "curvilinear"),
        ("rectilinear", "rectilinear"),
        ("polygon", "polygons"),
        ("triangles and quadrilaterals", "mixed"),
        ("triangles", "triangles"),
    ):
        if word in mesh:
            return kind, facts["location"]
    raise AssertionError(f"a mesh of a new kind: {mesh}")


GROUPS: dict = {}
for file, facts in FILES.items():
    GROUPS.setdefault(kind_of(facts), []).append(file)
PAIRS = [(names[0], other) for names in GROUPS.values() for other in names[1:]]


@cache
def rows(name):
    # the first stored state of a series is the one that the other files hold
    flow = fvcheck.open_flow(
        SAMPLES / name, fluid=Fluid(viscosity=0.05, specific_heat=2.0, conductivity=0.1), step=0
    )
    out = {}
    for label, surface in SURFACES.items():
        ledger = fvcheck.balance(flow, surface)
        assert [row.label for row in ledger.rows] == [
            "mass",
            "momentum-x",
            "momentum-y",
            "kinetic-energy",
            "heat",
        ]
        for row in ledger.rows:
            out[label, row.label] = row
    return out


def test_every_sample_is_compared_or_alone_of_its_kind():
    alone = {names[0] for names in GROUPS.values() if len(names) == 1}
    assert {n for pair in PAIRS for n in pair} | alone == set(FILES)
    assert len(PAIRS) > 40
    assert len(alone) <= 4


@pytest.mark.parametrize(("one", "other"), PAIRS)
def test_files_of_the_same_data_give_the_same_ledger(one, other):
    # 1e-10 of the flow where files hold doubles; single precision keeps seven digits, and
    # coordinates printed by meshio and VTK eleven
    digits = 2e-6 if "float32" in one + other else 1e-10
    for key, row in rows(one).items():
        size = max(row.inflow, row.outflow)
        for name in ("inflow", "outflow", "flux", "boundary", "source", "imbalance", "scale"):
            first, second = getattr(row, name), getattr(rows(other)[key], name)
            if first is None:
                assert second is None
            else:
                assert second == pytest.approx(first, abs=digits * size), (key, name)
        assert rows(other)[key].verdict == row.verdict, key


@pytest.mark.parametrize("name", [names[0] for names in GROUPS.values()])
def test_the_ledger_of_each_kind_is_that_of_the_taylor_green_field(name):
    # ∇·u = 0 exactly; the samples hold the closed form on cells of 0.15 to 0.2, 30 a wave
    found = rows(name)
    assert abs(found["box", "mass"].imbalance) < 2e-3 * found["box", "mass"].scale
    assert abs(found["over the rim", "mass"].imbalance) < 1e-2 * found["over the rim", "mass"].scale
