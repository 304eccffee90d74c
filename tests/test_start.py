"""What a command loads: no library and no array that it does not use."""

import subprocess
import sys
from pathlib import Path

import numba
import numpy as np
import pytest
from scipy.spatial import cKDTree

from fvcheck.kernels.polygons import shape_measures, sound_triangles
from fvcheck.kernels.vicinity import crowds

SAMPLES = Path(__file__).parent / "samples"


@pytest.mark.parametrize("spread", [1.0, 0.0])
def test_points_near_places_are_counted_as_a_tree_counts_them(spread):
    rng = np.random.default_rng(5)
    points = rng.uniform(-3.0, 2.0, (400, 2)) * [1.0, spread]  # also all of them on a line
    places = rng.uniform(-4.0, 3.0, (300, 2))
    radius = rng.uniform(0.0, 1.0, 300) ** 4 * 5.0
    found = crowds(*np.ascontiguousarray(points.T), *np.ascontiguousarray(places.T), radius)
    expected = cKDTree(points).query_ball_point(places, radius, return_length=True)
    assert np.array_equal(found, expected)


def test_a_balance_of_one_file_loads_neither_scipy_s_algebra_nor_its_trees():
    told = ["-s", "circle(0.5, 0.5, 0.2)", "--density", "1", "--viscosity", "0.01", "-q"]
    code = (
        "import sys; from fvcheck.cli.app import run; "
        f"run({['balance', str(SAMPLES / 'mixed_point_inline_zlib.vtu'), *told]!r}); "
        "print([name for name in ('scipy.linalg', 'scipy.spatial', 'scipy.sparse') if name in sys.modules])"
    )
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout.splitlines()[-1] == "[]", run.stdout


def test_a_user_s_own_loop_still_has_linear_algebra():
    matrix = np.arange(9.0).reshape(3, 3)
    assert np.array_equal(numba.njit(lambda a, b: np.dot(a, b))(matrix, np.eye(3)), matrix)


def test_triangles_pass_at_once_exactly_where_the_tables_of_their_measures_find_no_fault():
    rng = np.random.default_rng(8)
    offsets, eps = np.array([0, 3]), np.finfo(float).eps
    passed = []
    for thin in 10.0 ** np.arange(-18.0, 1.0):
        for _ in range(20):
            points = rng.uniform(1.0, 2.0, (3, 2)) * [1.0, 0.0] + rng.uniform(-1.0, 1.0, (3, 2)) * [0.0, thin]
            nodes = rng.integers(0, 3, 3)
            area, length, size = (part[0] for part in shape_measures(points, offsets, nodes))
            quick = sound_triangles(points, offsets, nodes, eps)
            limit = 2.0 * eps * size * length
            passed.append(quick)
            # The sums are in another order, hence the margin.
            assert quick or area < limit * (1 + 1e-9) or len(set(nodes)) < 3
            assert not quick or area > limit * (1 - 1e-9)
    assert 20 < sum(passed) < 200
    assert not sound_triangles(np.eye(4, 2), np.array([0, 4]), np.arange(4), eps)
