"""A short version of the calibration study: closed-form solutions, so every imbalance is an error.

The bounds are those of the whole study (`scripts/calibrate.py`); where fewer surfaces
leave room for chance, the room is stated.
"""

from __future__ import annotations

import json

import calibrate
import numpy as np
import pytest
from calibration.measure import found_each, measure, planted, source_field, trials
from calibration.report import COVERAGE_UNDER, GAIN, GAIN_FINE, WIDTH, misses
from calibration.shapes import random_surfaces
from calibration.suite import UNDER, Setting, flow_of, mesh_of, settings, subjects
from exact import circle_contour

COUNT = 24


@pytest.fixture(scope="module", autouse=True)
def one_thread():
    """One control surface is too little work to share out among threads."""
    import numba

    before = numba.get_num_threads()
    numba.set_num_threads(1)
    yield
    numba.set_num_threads(before)


@pytest.fixture(scope="module")
def subject():
    return subjects()


@pytest.fixture(scope="module")
def records(subject):
    """Mass and momentum of three fields on three kinds of mesh, points and averages."""
    out = []
    for name, kind, size in (
        ("kovasznay", "triangles", "middle"),
        ("kovasznay", "mixed", UNDER),
        ("hiemenz", "mixed", "middle"),
        ("hiemenz", "polygons", "fine"),
        ("jeffery-hamel", "polygons", "middle"),
        ("jeffery-hamel", "triangles", UNDER),
    ):
        for location in ("point", "average"):
            out += measure(Setting(subject[name], kind, location, "float64", size), COUNT, 0)
    out += measure(Setting(subject["kovasznay"], "triangles", "point", "float32", "middle"), COUNT, 0)
    return out


def test_errors_lie_in_the_sampling_band(records):
    # 2 in 100 may be missed by chance in a study of this size; the whole study asks for 1.
    resolved = [r for r in records if r["resolved"]]
    assert sum(r["covered"] for r in resolved) >= 0.98 * sum(r["count"] for r in resolved)
    coarse = [r for r in records if not r["resolved"]]
    assert sum(r["covered"] for r in coarse) >= COVERAGE_UNDER * sum(r["count"] for r in coarse)


def test_no_error_is_far_outside_its_band(records):
    assert max(r["worst_ratio"] for r in records) < 3


def test_no_exact_field_is_called_open(records):
    assert sum(r["open"] for r in records) == 0


def test_degree_three_is_ten_times_better_than_linear_sampling(records):
    gains = [r["gain"] for r in records if r["resolved"] and r["row"] == "mass"]
    assert np.median(gains) > GAIN
    fine = [r["gain"] for r in records if r["size"] == "fine" and r["row"] == "mass"]
    assert np.median(fine) > GAIN_FINE


def test_the_band_is_not_bought_by_width(records):
    # Single medians of 24 scatter by a third; the median over cells does not.
    widths = [r["band_over_error"] for r in records if r["resolved"]]
    assert np.median(widths) < WIDTH
    assert max(widths) < 2 * WIDTH


def test_single_precision_costs_no_coverage(records):
    single = [r for r in records if r["precision"] == "float32"]
    assert all(r["coverage"] > 0.95 for r in single)


def test_a_planted_source_sends_its_rate_through_any_contour_around_it():
    # Gauss's theorem; the ellipse (0.2, 0.1) lies inside the circle, 256 points are spectral there.
    u, v = source_field((0.3, -0.1, 0.2, 0.1), 0.7)
    points, ds = circle_contour(0.25, 0.0, 0.5)
    x, y = points[0].T
    assert np.sum(u(x, y) * ds[0, :, 0] + v(x, y) * ds[0, :, 1]) == pytest.approx(0.7, rel=1e-12)


@pytest.mark.parametrize("location", ["point", "average"])
def test_a_planted_source_is_measured_and_called_open(subject, location):
    setting = Setting(subject["kovasznay"], "triangles", location, "float64", "middle")
    cells = mesh_of(setting)
    flow = flow_of(setting, cells)
    surfaces = random_surfaces(setting.subject, "middle", 12)
    base = trials(setting, flow, surfaces)["mass"]
    for drawn, trial in zip(surfaces, base):
        rate = 0.3 * trial.row.scale
        told = trials(setting, planted(setting, flow, cells, drawn, rate), [drawn])["mass"][0].row
        # The sources of small surfaces vary over a few cells: their own sampling error counts.
        assert told.imbalance == pytest.approx(rate, abs=told.sampling_band + 0.02 * rate)
    assert found_each(setting, flow, cells, surfaces, base, 0.5).all()


@pytest.mark.parametrize("location", ["point", "average"])
def test_half_a_percent_is_open_where_the_mesh_is_able_to_tell(subject, location):
    # on surfaces whose resolution band is less than that; the study wants 95 in 100
    record = measure(Setting(subject["kovasznay"], "triangles", location, "float64", "fine"), 24, 24)[0]
    assert record["planted_able"] >= 18
    assert record["planted_found_able"] >= record["planted_able"] - 1


def test_settings_can_be_picked():
    picked = [s.key for s in settings(("kovasznay", "point", "float32"), ("middle",))]
    assert picked == [
        ("kovasznay", k, "point", "float32", "middle") for k in ("triangles", "mixed", "polygons")
    ]


def test_surfaces_of_every_shape_touch_and_cross_the_domain_boundary(subject):
    drawn = random_surfaces(subject["taylor-green"], "middle", 80, seed=3)
    x0, y0, x1, y1 = subject["taylor-green"].exact.domain
    rings = [d.surface.rings[0] for d in drawn]
    on = [bool(np.any((r == (x0, y0)) | (r == (x1, y1)))) for r in rings]
    beyond = [bool(np.any((r < (x0, y0)) | (r > (x1, y1)))) for r in rings]
    # Three in ten are meant to touch; a quarter of those are boxes.
    assert sum(on) >= 3 and 8 <= sum(beyond) <= 40
    assert {4, 180} < {len(r) for r in rings}


def test_a_miss_is_named_with_its_numbers(records):
    spoilt = [{**r, "covered": 0, "coverage": 0.0} if r["row"] == "mass" else r for r in records]
    found = [text for text in misses(spoilt) if text.startswith("coverage")]
    assert any("kovasznay · triangles · point · mass" in text and "0.0000 < 0.99" in text for text in found)


def test_the_program_writes_its_records(tmp_path, capsys, monkeypatch):
    out = tmp_path / "study.json"
    told = [
        "--only",
        "kovasznay",
        "triangles",
        "point",
        "float64",
        "--size",
        "coarse",
        "--count",
        "6",
        "--plants",
        "4",
    ]
    monkeypatch.setattr("sys.argv", ["calibrate.py", *told, "--json", str(out)])
    assert calibrate.main() == 0
    written = json.loads(out.read_text())["records"]
    assert [r["row"] for r in written] == ["mass", "momentum-x", "momentum-y"]
    assert written[0]["smallest_found"] > 0.005
    assert "momentum-y" in capsys.readouterr().out
