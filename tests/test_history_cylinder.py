"""Vortex shedding in the channel-cylinder benchmark at Re 100, from snapshots of an independent solution.

The solution (general finite-element library, scripts/reference_unsteady.py) lies in tests/data with the
forces of its own residual; published bounds are those of Schäfer & Turek 1996 (recalled from memory).
"""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path

import numpy as np
import pytest
import trial_meshes as tm
from series_cases import export_of

import fvcheck
from fvcheck import ControlSurface, Fluid
from fvcheck.trends import trend_of

DATA = Path(__file__).parent / "data"
FACTS = json.loads((DATA / "cylinder_re100.json").read_text(encoding="utf-8"))
SCALE = 20.0  # of a force in a coefficient: 2 / (rho U² D), U = 1, D = 0.1
SURFACES = {
    "near": ControlSurface.circle(0.2, 0.2, 0.09, name="near"),
    "far": ControlSurface.circle(0.2, 0.2, 0.13, name="far"),
    "box": ControlSurface.box(0.08, 0.06, 0.36, 0.34, name="box"),
}


@cache
def run():
    """The history of all surfaces."""
    stored = np.load(DATA / "cylinder_re100.npz")
    cells = tm.from_table(stored["points"], stored["triangles"].astype(np.int64))
    assert len(cells.points) == len(stored["points"])
    number = {time: k for k, time in enumerate(FACTS["times"])}

    def load(t):
        k = number[t]
        u, v, p = (
            FACTS["scales"][name][0] + FACTS["scales"][name][1] * stored[name][k].astype(float)
            for name in "uvp"
        )
        velocity = np.column_stack([u, v])
        velocity[stored["still"]] = 0.0
        return cells, {"U": velocity, "p": p}

    return fvcheck.history(
        export_of(load, FACTS["times"]),
        list(SURFACES.values()),
        ["momentum"],
        fluid=Fluid(density=1.0, viscosity=FACTS["fluid"]["viscosity"]),
        reference=(0.1, 1.0),
    )


@cache
def forces():
    """surface -> (n, 2) force coefficients from storage and fluxes, and their sampling bands."""
    history = run()
    out = {}
    for name in SURFACES:
        rows = [f"momentum-{c}" for c in "xy"]
        # what the momentum ledger asks of the body: -(storage + flux of the drawn pieces)
        force = -np.column_stack(
            [history.values(name, r, "storage") + history.values(name, r, "flux") for r in rows]
        )
        band = np.column_stack([history.values(name, r, "sampling_band") for r in rows])
        out[name] = SCALE * force, SCALE * band
    return out


def test_the_solution_is_the_published_flow():
    # largest drag 3.22 to 3.24; the finest published series has lift from peak to peak 2.0079. The
    # solver's mesh, coarse in the wake, loses 2 % of that.
    times, lift, drag = (np.array(FACTS[key]) for key in ("times", "cl", "cd"))
    assert 3.20 <= drag.max() <= 3.26 and 1.94 <= np.ptp(lift) <= 2.04
    trend = trend_of("", "cl", "", times, lift, 0.01, reference=(0.1, 1.0))
    assert 0.295 <= trend.strouhal <= 0.305


# The exported triangles grow from a twentieth of the diameter at the cylinder to two fifths: the box,
# which cuts the wake where they are large, measures to its bands only.
CLOSE = ["near", "far"]


@pytest.mark.parametrize("name", CLOSE)
def test_lift_from_snapshots_is_within_one_percent_of_its_amplitude(name):
    force, _ = forces()[name]
    error = force[:, 1] - FACTS["cl"]
    amplitude = np.ptp(FACTS["cl"]) / 2
    # at the first and last snapshot the formula's error is twice that within, by Taylor's series
    assert np.abs(error[1:-1]).max() <= 0.01 * amplitude
    assert np.abs(error).max() <= 0.02 * amplitude


@pytest.mark.parametrize("name", CLOSE)
def test_drag_from_snapshots_is_within_one_percent(name):
    force, _ = forces()[name]
    error = force[:, 0] - FACTS["cd"]
    assert np.abs(error).max() <= 0.01 * np.max(FACTS["cd"])


@pytest.mark.parametrize("name", SURFACES)
def test_both_forces_lie_within_their_bands_at_every_snapshot(name):
    force, band = forces()[name]
    assert np.all(np.abs(force - np.column_stack([FACTS["cd"], FACTS["cl"]])) <= band)


def test_mean_drag_and_strouhal_number_are_those_of_the_solution():
    times = np.array(FACTS["times"])
    drag, lift = (run().trend("far", f"momentum-{c} force") for c in "xy")
    its_lift, its_drag = (
        trend_of("", "", "", times, np.array(FACTS[k]), 0.01, (0.1, 1.0)) for k in ("cl", "cd")
    )
    assert lift.strouhal == pytest.approx(its_lift.strouhal, rel=1e-3)
    assert lift.periods >= 2
    # Drag swings at twice the frequency of lift.
    assert abs(drag.period - lift.period / 2) <= drag.period_band
    band = forces()["far"][1][:, 0].mean()
    assert abs(SCALE * drag.mean - its_drag.mean) <= SCALE * drag.mean_band + band
    assert abs(SCALE * drag.mean - its_drag.mean) <= 0.01 * its_drag.mean
