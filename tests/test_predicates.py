"""Orientation signs are exact: Python's fractions are the judge."""

from __future__ import annotations

from fractions import Fraction

import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from fvcheck.kernels.predicates import crosses_ray, orientation, side_of_edge, side_of_segment

ordinary = st.floats(-1e6, 1e6).filter(lambda v: v == 0.0 or abs(v) > 1e-100)
# Tenths and their like are the coordinates of drawn surfaces and of meshes made by hand.
tenths = st.integers(-30, 30).map(lambda k: k / 10)
single = st.floats(-10, 10, width=32).filter(lambda v: v == 0.0 or abs(v) > 1e-30)
coordinate = st.one_of(ordinary, tenths, single)
point = st.tuples(coordinate, coordinate)


def exact_sign(a, b, c):
    ax, ay, bx, by, cx, cy = map(Fraction, (*a, *b, *c))
    value = (bx - ax) * (cy - ay) - (by - ay) * (cx - ax)
    return (value > 0) - (value < 0)


@settings(max_examples=400, deadline=None)
@given(point, point, point)
@example((0.1, 0.1), (0.3, 0.3), (0.7, 0.7))
@example((12.0, 12.0), (24.0, 24.0), (0.5, 0.5000000000000001))
def test_the_sign_of_any_three_points_is_that_of_fractions(a, b, c):
    assert orientation(*a, *b, *c) == exact_sign(a, b, c)


@settings(max_examples=400, deadline=None)
@given(point, point, st.floats(-2, 3), st.integers(-3, 3), st.integers(-3, 3))
def test_the_sign_of_nearly_collinear_points_is_that_of_fractions(a, b, t, ulps_x, ulps_y):
    import math

    def nudged(value, ulps):
        for _ in range(abs(ulps)):
            value = math.nextafter(value, math.inf if ulps > 0 else -math.inf)
        return value if abs(value) > 1e-100 else 0.0

    c = tuple(nudged(p + t * (q - p), u) for p, q, u in zip(a, b, (ulps_x, ulps_y)))
    assert orientation(*a, *b, *c) == exact_sign(a, b, c)


@settings(max_examples=200, deadline=None)
@given(point, point, point)
def test_swapping_two_points_turns_the_sign_and_rotating_keeps_it(a, b, c):
    sign = orientation(*a, *b, *c)
    assert orientation(*b, *a, *c) == -sign
    assert orientation(*a, *c, *b) == -sign
    assert orientation(*b, *c, *a) == sign


@settings(max_examples=200, deadline=None)
@given(point, point, st.sampled_from([0.0, 0.25, 0.5, 1.0, 2.0]), st.sampled_from([1, -1]))
def test_a_point_on_a_line_goes_to_one_side_and_to_the_other_with_the_opposite_shift(a, b, t, shift):
    c = tuple(p + t * (q - p) for p, q in zip(a, b))
    one, other = side_of_edge(*a, *b, *c, shift), side_of_edge(*a, *b, *c, -shift)
    assert one in (-1, 1)
    exact = exact_sign(a, b, c)
    if exact:
        assert one == other == exact
    elif a != b:
        assert one == -other
        # moving the point towards a line is moving the line away from the point
        assert side_of_segment(*a, *b, *c, shift) == -one


@settings(max_examples=200, deadline=None)
@given(point, point, point, st.sampled_from([1, -1]))
def test_a_ray_meets_a_segment_and_its_reverse_with_opposite_sense(a, b, c, shift):
    assert crosses_ray(*a, *b, *c, shift) == -crosses_ray(*b, *a, *c, shift)


@pytest.mark.parametrize("shift", [1, -1])
def test_rays_from_the_corners_of_a_square_agree_with_its_shift(shift):
    corners = [(0.0, 0.0), (1.0, 0.0), (1.0, 1.0), (0.0, 1.0)]
    sides = list(zip(corners, corners[1:] + corners[:1]))
    inside = [sum(crosses_ray(*p, *q, *c, shift) for p, q in sides) for c in corners]
    # The square moves up and right by +0: its old upper right corner is then inside; or the lower left.
    assert inside == ([0, 0, 1, 0] if shift == 1 else [1, 0, 0, 0])
