"""Bands by hand-made numbers, the precision of stored data, the table of verdicts."""

from __future__ import annotations

import itertools

import exact
import numpy as np
import pytest
import trial_meshes as tm
from core_cases import flow_on

import fvcheck
from fvcheck import ControlSurface
from fvcheck.bands import Crosswise, bands
from fvcheck.sampling.precision import stored_precision
from fvcheck.verdict import CLOSED, EXIT_STATUS, MESH_LIMITED, OPEN, UNDECIDED, VERDICTS, judge, worst


def arrays(*steps):
    """Contributions by degree 1, 2, 3 from (d12, d23) per piece, degree 1 being zero."""
    d12, d23 = np.array(steps, float).T
    return np.zeros(len(d12)), d12, d12 + d23


def test_the_net_change_counts_where_errors_have_one_sign():
    # Σ d23 = 4, 3 √Σ d23² = 3 √(16 · 0.0625) = 3; Σ|d12| = 32
    band = bands(*arrays(*[(2.0, 0.25)] * 16), 0.0)
    assert band.sampling == pytest.approx(4.0)
    assert band.resolution == pytest.approx(3 * 32.0)


def test_three_times_the_root_sum_counts_where_errors_cancel():
    band = bands(*arrays((3, 1), (-3, -1), (3, 1), (-3, -1)), 0.0)
    assert band.sampling == pytest.approx(3 * np.sqrt(4))
    assert band.resolution == pytest.approx(3 * 2 * np.sqrt(36))  # design: factor 3, twice the root sum


def test_nothing_cancels_where_the_series_of_degrees_does_not_settle():
    # Σ|d23| = 4 is more than half of Σ|d12| = 7
    band = bands(*arrays((2, 1), (-2, -1), (2, 1), (-1, -1)), 0.0)
    assert band.sampling == pytest.approx(4.0)
    assert band.resolution >= band.sampling


def test_the_resolution_band_is_never_below_the_sampling_band():
    band = bands(*arrays((0.0, 1.0), (0.0, -1.0)), 0.25)
    assert band.sampling == pytest.approx(2.0 + 0.25)
    assert band.resolution == band.sampling


def test_rounding_adds_to_the_sampling_band():
    plain, rough = (bands(*arrays((1, 0.1), (1, -0.1)), r) for r in (0.0, 0.5))
    assert rough.sampling == pytest.approx(plain.sampling + 0.5)
    assert rough.rounding == 0.5


def test_where_values_are_extrapolated_errors_add_up():
    steps = arrays((4, 0.5), (-4, -3.0), (8, 0.25), (-8, -0.25))
    band = bands(*steps, 0.0, reaching=np.array([True, True]))
    # the larger of |d23| and |d12| at the first two, 4 + 4; 3 √(2 · 0.0625) of the others
    assert band.sampling == pytest.approx(8.0 + 3 * np.sqrt(0.125))
    # 3 × (2 √(2 · 64) + 2 √(2 · 16)), the two kinds apart
    assert band.resolution == pytest.approx(6 * (np.sqrt(128) + np.sqrt(32)))


def test_where_the_degree_fell_the_larger_step_counts():
    first, second, third = arrays((8, 0.25), (-8, -0.25), (6, 0.5))
    chosen = np.array([third[0], third[1], first[2]])
    band = bands(first, second, third, 0.0, chosen)
    # three times the root sum of squares of 0.25 and -0.25, and the whole larger step at the jump
    assert band.sampling == pytest.approx(3 * np.sqrt(0.125) + 6.0)


def test_what_cubics_differ_from_one_another_takes_the_place_of_two_of_three_parts():
    first, second, third = arrays((3, 0.5), (-3, -0.5), (3, 0.5))
    band = bands(
        first, second, third, 0.0, cross=Crosswise(third[:2] + np.array([0.1, -0.1]), np.zeros(2, bool))
    )
    # once 0.5 at the first two, three times at the last, which has no second opinion; 3 √(2 · 0.01)
    assert band.sampling == pytest.approx(np.sqrt(2 * 0.25 + 9 * 0.25) + 3 * np.sqrt(0.02))


def test_beside_the_boundary_cubics_are_not_relied_on_alone():
    first, second, third = arrays((3, 0.5), (-3, -0.5))
    cross = Crosswise(third + np.array([0.1, -0.1]), np.array([True, False]))
    band = bands(first, second, third, 0.0, cross=cross)
    # 0.5 three times in the cell on the boundary, once in the other
    assert band.sampling == pytest.approx(np.sqrt(9 * 0.25 + 0.25) + 3 * np.sqrt(0.02))


def test_cubics_that_differ_with_one_sign_count_half_as_much_again():
    first, second, third = arrays(*[(8.0, 0.0)] * 16)
    cross = Crosswise(third + 0.25, np.zeros(16, bool))
    # their sum is 4, three times the root sum of squares is 3
    assert bands(first, second, third, 0.0, cross=cross).sampling == pytest.approx(1.5 * 4.0)


def test_where_values_are_extrapolated_both_differences_count_twice():
    first, second, third = arrays((4, 0.5), (-4, -0.25))
    reaching = np.array([True, True])
    cross = Crosswise(third + np.array([0.125, -0.25]), reaching)
    band = bands(first, second, third, 0.0, None, reaching, cross)
    assert band.sampling == pytest.approx(2 * (0.5 + 0.25 + 0.125 + 0.25))


@pytest.mark.parametrize("scale", [1e-12, 1e12])
def test_bands_scale_with_the_contributions(scale):
    one = bands(*arrays((3, 1), (-2, 0.2), (1, -0.1)), 0.1)
    other = bands(*(scale * a for a in arrays((3, 1), (-2, 0.2), (1, -0.1))), 0.1 * scale)
    assert np.allclose(np.array(other), scale * np.array(one), rtol=1e-12)


def values(n=400):
    rng = np.random.default_rng(3)
    return rng.uniform(-1, 1, n) * 10.0 ** rng.uniform(-3, 3, n)


def test_doubles_singles_and_text_are_told_apart():
    v = values()
    assert stored_precision(v) == 2.0**-53
    assert stored_precision(v.astype(np.float32)) == 2.0**-24
    assert stored_precision(v.astype(np.float32).astype(float)) == 2.0**-24
    for digits in (6, 8, 11):
        text = np.array([float(f"{x:.{digits - 1}e}") for x in v])
        assert stored_precision(text) == pytest.approx(0.5 * 10.0 ** (1 - digits))
        # the precision bounds what the rounding did
        assert np.max(np.abs(text - v) / np.abs(v)) <= stored_precision(text)


@pytest.mark.parametrize("data", [np.zeros(10), np.full(10, 0.1), np.empty(0), np.array([np.nan, 1.0])])
def test_data_without_digits_to_judge_by_count_as_double(data):
    assert stored_precision(data) == 2.0**-53


def test_numbers_of_few_digits_are_meant_exactly():
    assert stored_precision(np.arange(1, 100) / 8) == 2.0**-53
    assert stored_precision(np.array([0.0, 0.5, -1.25, 3.0, np.nan])) == 2.0**-53


@pytest.mark.parametrize("reading", ["point", "average"])
def test_the_rounding_band_holds_what_single_precision_and_six_digits_do(reading):
    flow = exact.kovasznay()
    cells = tm.triangles(flow.domain, 0.1)
    surfaces = [ControlSurface.box(-0.3, -0.2 + 0.1 * k, 0.8, 0.9 + 0.1 * k) for k in range(4)]
    case = flow_on(flow, cells, reading)
    for stored in (lambda v: v.astype(np.float32), six_digits):
        rough = fvcheck.Flow.from_arrays(
            cells.points,
            (cells.offsets, cells.nodes),
            fluid=case.fluid,
            **{
                f"{case.location}_data": {
                    f.name: stored(f.values[:, :2] if f.values.ndim == 2 else f.values)
                    for f in case.fields.values()
                }
            },
        )
        inside = []
        for surface in surfaces:
            one, other = (fvcheck.balance(c, surface, ["mass", "momentum"]) for c in (case, rough))
            for a, b in zip(one.rows, other.rows):
                inside.append(abs(a.imbalance - b.imbalance) <= b.rounding_band)
                # and is not a blanket: below a thousandth of the flow
                assert b.rounding_band < 1e-3 * b.scale
                assert a.rounding_band < 1e-12 * a.scale
        assert np.mean(inside) >= 0.9  # three standard deviations, estimated from eight shakes


def plane(values):
    return values[:, :2] if values.ndim == 2 else values


def six_digits(v):
    return np.array([float(f"{x:.5e}") for x in v.ravel()]).reshape(v.shape)


@pytest.mark.parametrize(
    ("imbalance", "sampling", "resolution", "tolerance", "verdict"),
    [
        (0.2, 0.1, 1.0, 0.5, CLOSED),
        (-0.2, 0.1, 1.0, 0.5, CLOSED),
        (0.5, 0.0, 0.0, 0.5, CLOSED),  # the tolerance itself is in tolerance
        (0.25, 0.25, 1.0, 0.5, CLOSED),
        (0.3, 0.25, 1.0, 0.5, UNDECIDED),
        (0.75, 0.25, 1.0, 0.5, UNDECIDED),  # the band touches the tolerance
        (0.0, 2.0, 9.0, 0.5, UNDECIDED),  # nothing left, but nothing known either
        (0.75, 0.125, 0.75, 0.5, MESH_LIMITED),  # as much as the mesh explains
        (-0.75, 0.125, 0.8, 0.5, MESH_LIMITED),
        (0.75, 0.125, 0.7, 0.5, OPEN),
        (-3.0, 0.1, 0.2, 0.5, OPEN),
        (0.0, 0.0, 0.0, 0.0, CLOSED),
        (1e-30, 0.0, 0.0, 0.0, OPEN),
    ],
)
def test_the_table_of_verdicts(imbalance, sampling, resolution, tolerance, verdict):
    assert judge(imbalance, sampling, resolution, tolerance) == verdict


def test_verdicts_follow_the_rules_of_the_table_everywhere():
    steps = np.linspace(0, 2, 9)
    seen = set()
    for i, s, r, t in itertools.product(steps, repeat=4):
        r = max(r, s)
        rules = {
            CLOSED: i + s <= t,
            UNDECIDED: i - s <= t < i + s,
            MESH_LIMITED: i - s > t and i <= r,
            OPEN: i - s > t and i > r,
        }
        assert sum(rules.values()) == 1  # every case has one verdict
        found = judge(i, s, r, t)
        assert rules[found]
        assert judge(-i, s, r, t) == found
        seen.add(found)
    assert seen == set(VERDICTS)


def test_the_worst_verdict_decides_and_the_exit_status_follows_it():
    assert worst([CLOSED, None, MESH_LIMITED, UNDECIDED]) == MESH_LIMITED
    assert worst([OPEN, CLOSED]) == OPEN
    assert worst([None]) is None
    assert [EXIT_STATUS[v] for v in VERDICTS] == [0, 3, 3, 1]
