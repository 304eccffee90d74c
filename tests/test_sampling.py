"""Polynomial sampling: exact on polynomials, convergent on smooth fields, and never without an answer."""

from __future__ import annotations

from functools import cache, partial

import numpy as np
import pytest
import trial_meshes as tm
from core_cases import UNIT, mesh_of, meshes

from fvcheck.kernels.triangulate import triangulate_cells
from fvcheck.sampling.compiling import compile_sampler
from fvcheck.sampling.sampler import Known

LAYER = (0.0, 0.0, 10.0, 0.048)
POWERS = [(i, j) for n in range(4) for i, j in ((n - k, k) for k in range(n + 1))]


@cache
def cells_of(kind):
    if kind == "layer of quads":
        return tm.boundary_layer(LAYER, 0.5, 2500)
    if kind == "mixed layer":
        return tm.boundary_layer(LAYER, 0.5, 2500, kind="mixed")
    return meshes()[kind]


@cache
def mesh(kind):
    return mesh_of(cells_of(kind))


KINDS = (*meshes(), "layer of quads", "mixed layer")
READINGS = ("point", "average", "centroid")


class Polynomial:
    """Random coefficients on monomials of size 1 over the mesh's extent."""

    def __init__(self, m, degree, seed=0):
        x0, y0, x1, y1 = m.bounds
        self.middle = np.array([0.5 * (x0 + x1), 0.5 * (y0 + y1)])
        self.half = np.array([0.5 * (x1 - x0), 0.5 * (y1 - y0)])
        rng = np.random.default_rng(seed)
        self.terms = [(i, j, rng.uniform(-1, 1)) for i, j in POWERS if i + j <= degree]

    def local(self, x, y):
        return (x - self.middle[0]) / self.half[0], (y - self.middle[1]) / self.half[1]

    def __call__(self, x, y):
        x, y = self.local(x, y)
        return sum(c * x**i * y**j for i, j, c in self.terms)

    def gradient(self, x, y):
        """(n, 2), in units of the extent: size 1 on both axes of a flat mesh."""
        x, y = self.local(x, y)
        dx = sum(c * i * x ** max(i - 1, 0) * y**j for i, j, c in self.terms) + 0 * x
        dy = sum(c * j * x**i * y ** max(j - 1, 0) for i, j, c in self.terms) + 0 * x
        return np.stack([dx, dy], axis=-1)


def data_on(m, function, reading):
    """Values of a function as an export would hold them on an assembled mesh."""
    cells = tm.Cells(m.points, m.offsets, m.nodes)
    if reading == "point":
        return tm.point_values(function, cells)[:, None]
    if reading == "average":
        return tm.cell_averages(function, cells)[:, None]
    return function(*cells.centroids.T)[:, None]


def compiled(m, reading, centres=None, **more):
    centres = np.arange(m.n_points) if centres is None else centres
    location = "point" if reading == "point" else "cell"
    return compile_sampler(m, centres, location, averages=reading != "centroid", **more)


def places_in(m, count=4, seed=0):
    """Random places in every triangle of the mesh: triangle corners (q, 3), places (q, 2)."""
    table, _ = triangulate_cells(m.points, m.offsets, m.nodes, np.arange(m.n_cells))
    table = np.repeat(table, count, axis=0)
    weights = np.random.default_rng(seed).dirichlet(np.ones(3), len(table))
    return table, np.einsum("qk,qkd->qd", weights, m.points[table])


def sample(m, sampler, degree, data, triangle, places, known=None):
    values, gradients, _ = sampler.evaluate(degree, sampler.apply(degree, data, known), triangle, places)
    x0, y0, x1, y1 = m.bounds
    return values[:, 0], gradients[:, 0] * [0.5 * (x1 - x0), 0.5 * (y1 - y0)]


@pytest.mark.parametrize("reading", READINGS)
@pytest.mark.parametrize("degree", [1, 2, 3])
@pytest.mark.parametrize("kind", KINDS)
def test_polynomials_of_the_degree_come_back_to_rounding_everywhere(kind, degree, reading):
    m = mesh(kind)
    polynomial = Polynomial(m, degree)
    triangle, places = places_in(m)
    sampler = compiled(m, reading)
    data = data_on(m, polynomial, reading)
    values, slopes = sample(m, sampler, degree, data, triangle, places)
    reached = sampler.fits[degree].reached
    assert np.all(reached == degree)
    # one rounding of the data, amplified by the condition of the fits (a few hundred)
    assert np.abs(values - polynomial(*places.T)).max() < 2e-12
    # differences over a cell: a wall layer of 10⁴ cells a height loses as many digits
    thin = 1e5 if "layer" in kind else 1e2
    assert np.abs(slopes - polynomial.gradient(*places.T)).max() < 2e-12 * thin


@pytest.mark.parametrize("kind", ["triangles", "polygons", "layer of quads", "holed"])
@pytest.mark.parametrize("reading", ["average", "centroid"])
def test_polynomials_still_come_back_where_boundary_values_are_known(kind, reading):
    m = mesh(kind)
    polynomial = Polynomial(m, 3)
    middles = m.points[m.boundary.edges].mean(axis=1)
    known = polynomial(*middles.T)[:, None]
    triangle, places = places_in(m)
    sampler = compiled(m, reading, known=Known(m.boundary.cells, middles))
    values, _ = sample(m, sampler, 3, data_on(m, polynomial, reading), triangle, places, known)
    assert np.abs(values - polynomial(*places.T)).max() < 2e-12


@pytest.mark.parametrize("kind", ["triangles", "mixed", "polygons"])
def test_known_boundary_values_make_the_slope_at_a_wall_far_better(kind):
    m = mesh(kind)
    wave = Polynomial(m, 1)

    def field(x, y):
        return np.sin(2 * wave(x, y))

    middles = m.points[m.boundary.edges].mean(axis=1)
    known = field(*middles.T)[:, None]
    data = data_on(m, field, "average")
    with_values = compiled(m, "average", known=Known(m.boundary.cells, middles))
    table, _ = triangulate_cells(m.points, m.offsets, m.nodes, m.boundary.cells)
    edges = {tuple(edge): k for k, edge in enumerate(m.boundary.edges.tolist())}
    rows, at = [], []
    for row in table:
        for k in range(3):
            if (int(row[k]), int(row[(k + 1) % 3])) in edges:
                rows.append(row)
                at.append(edges[int(row[k]), int(row[(k + 1) % 3])])
    assert len(rows) >= len(edges)
    rows, places = np.array(rows), middles[at]
    told, _ = sample(m, with_values, 3, data, rows, places, known)
    untold, _ = sample(m, compiled(m, "average"), 3, data, rows, places)
    error, plain = (np.sqrt(np.mean((v - field(*places.T)) ** 2)) for v in (told, untold))
    assert error < 0.5 * plain


@pytest.mark.parametrize("degree", [1, 2, 3])
def test_point_values_are_interpolated(degree):
    m = mesh("mixed")
    data = np.random.default_rng(1).uniform(-1, 1, (m.n_points, 1))
    table, _ = triangulate_cells(m.points, m.offsets, m.nodes, np.arange(m.n_cells))
    values, _ = sample(m, compiled(m, "point"), degree, data, table, m.points[table[:, 1]])
    assert np.abs(values - data[table[:, 1], 0]).max() < 1e-13


def test_degree_one_at_points_is_linear_interpolation():
    m = mesh("triangles")
    data = np.random.default_rng(1).uniform(-1, 1, (m.n_points, 1))
    triangle, places = places_in(m)
    values, _ = sample(m, compiled(m, "point"), 1, data, triangle, places)
    a, b, c = (m.points[triangle[:, k]] for k in range(3))
    matrix = np.stack([b - a, c - a], axis=2)
    s, t = np.linalg.solve(matrix, (places - a)[:, :, None])[:, :, 0].T
    f = data[:, 0][triangle]
    assert np.allclose(values, f[:, 0] + s * (f[:, 1] - f[:, 0]) + t * (f[:, 2] - f[:, 0]), atol=1e-13)


# --- one fit, written to be read ---------------------------------------------------------------


def twin_fit(m, centre, degree, reading, data, rows):
    """Value and gradient at a mesh point, by numpy's least squares on rings of ``rows`` neighbours."""
    cells = [m.nodes[a:b] for a, b in zip(m.offsets[:-1], m.offsets[1:])]
    powers = [(i, j) for i, j in POWERS if i + j <= degree]
    shape = tm.Cells(m.points, m.offsets, m.nodes)
    origin, own = m.points[centre], reading == "point"
    rows = max(rows, int(np.ceil(1.5 * (len(powers) - own))))
    points, chosen, members = {centre}, set(), []
    while len(members) < rows:
        chosen |= {k for k, nodes in enumerate(cells) if points & set(nodes.tolist())}
        points = {n for k in chosen for n in cells[k].tolist()}
        members = sorted(points - {centre}) if own else sorted(chosen)
    at = (m.points if own else shape.centroids)[members] - origin
    variance, axes = np.linalg.eigh(at.T @ at / len(at))
    whiten = (axes / np.sqrt(variance)).T
    # the weights that fits.py states: gentler where the patch lies on one side of the centre
    round_offsets = at @ whiten.T
    one_sided = np.hypot(*round_offsets.mean(axis=0)) > 0.4
    weight = 1 / (np.sum(round_offsets**2, axis=1) + 0.1) ** (1 if one_sided else 2)

    def monomial(x, y, i, j):
        xi, eta = whiten @ (np.stack([x, y]) - origin[:, None])
        return xi**i * eta**j

    columns = []
    for i, j in powers:
        function = partial(monomial, i=i, j=j)
        averages = reading == "average"
        columns.append(tm.cell_averages(function, shape)[members] if averages else function(*(at + origin).T))
    matrix = weight[:, None] * np.stack(columns, axis=1)[:, own:]
    right = data[members, 0]
    if own:
        value = data[centre, 0]
        slope = np.linalg.lstsq(matrix, weight * (right - value), rcond=None)[0][:2]
    else:
        value, *slope = np.linalg.lstsq(matrix, weight * right, rcond=None)[0][:3]
    return value, whiten.T @ slope


@pytest.mark.parametrize("reading", READINGS)
@pytest.mark.parametrize("kind", ["triangles", "polygons", "concave", "mixed layer"])
def test_a_fit_is_that_of_numpys_least_squares(kind, reading):
    m = mesh(kind)
    wave = Polynomial(m, 3)
    data = data_on(m, lambda x, y: np.sin(3 * wave(x, y)), reading)
    sampler = compiled(m, reading)
    rng = np.random.default_rng(0)
    for degree in (2, 3):
        coefficients = sampler.apply(degree, data)[:, :3, 0]
        frames = sampler.fits[degree].frames
        for centre in rng.choice(m.n_points, 6, replace=False):
            # two more rings at most, where the first ones do not determine the fit well
            rows = int(np.diff(sampler.fits[degree].row_first)[centre]) - 1
            value, slope = twin_fit(m, int(centre), degree, reading, data, rows)
            assert coefficients[centre, 0] == pytest.approx(value, abs=1e-11)
            ours = frames[centre].T @ coefficients[centre, 1:3]
            # two solvers of condition some hundred, in units of the largest slope
            assert np.allclose(ours, slope, rtol=1e-9, atol=1e-10 * np.abs(slope).max())


# --- smooth fields ------------------------------------------------------------------------------


def wave(x, y):
    return np.sin(4 * x + 1) * np.cos(3 * y - 0.5)


def wave_gradient(x, y):
    return np.stack(
        [4 * np.cos(4 * x + 1) * np.cos(3 * y - 0.5), -3 * np.sin(4 * x + 1) * np.sin(3 * y - 0.5)], axis=-1
    )


@pytest.mark.parametrize("reading", READINGS)
@pytest.mark.parametrize("kind", ["triangles", "quads", "mixed", "polygons"])
def test_values_converge_by_one_order_more_than_the_degree_and_gradients_by_the_degree(kind, reading):
    errors = {}
    sizes = (0.1, 0.025)
    for h in sizes:
        m = mesh_of(getattr(tm, kind)(UNIT, h))
        inside = np.all(np.abs(m.points - 0.5) < 0.35, axis=1)
        triangle, places = places_in(m, 1)
        keep = inside[triangle].all(axis=1)
        triangle, places = triangle[keep], places[keep]
        a, b, c = (m.points[triangle[:, k]] for k in range(3))
        size = (b - a)[:, 0] * (c - a)[:, 1] - (b - a)[:, 1] * (c - a)[:, 0]
        sampler = compiled(m, reading, np.unique(triangle))
        data = data_on(m, wave, reading)
        for degree in (1, 2, 3):
            values, slopes = sample(m, sampler, degree, data, triangle, places)
            slopes = slopes / 0.5
            value_error = np.sqrt(np.average((values - wave(*places.T)) ** 2, weights=size))
            slope_error = np.sqrt(
                np.average((slopes - wave_gradient(*places.T)) ** 2, axis=0, weights=size).sum()
            )
            errors[h, degree] = value_error, slope_error
    for degree in (1, 2, 3):
        coarse, fine = (np.array(errors[h, degree]) for h in sizes)
        order = np.log(coarse / fine) / np.log(sizes[0] / sizes[1])
        # irregular meshes that are not similar to one another: half an order of slack; a value at
        # the centroid is no average, but the fit takes it for what it is
        assert order[0] > degree + 1 - 0.5
        assert order[1] > degree - 0.5


@pytest.mark.parametrize("reading", READINGS)
def test_errors_at_the_boundary_stay_of_the_size_of_those_inside(reading):
    m = mesh_of(tm.triangles(UNIT, 0.05))
    triangle, places = places_in(m, 2)
    data = data_on(m, wave, reading)
    values, _ = sample(m, compiled(m, reading), 3, data, triangle, places)
    error = np.abs(values - wave(*places.T))
    rim = np.any(np.abs(places - 0.5) > 0.45, axis=1)
    # one-sided fits reach out by a cell or so: bounded by a small factor, corners included
    assert error[rim].max() < 60 * np.percentile(error[~rim], 95)
    assert error.max() < 4e-4


@pytest.mark.parametrize("reading", READINGS)
@pytest.mark.parametrize("rows", [1, 2])
@pytest.mark.parametrize("split", [False, True])
def test_in_a_channel_of_one_or_two_cells_the_degree_falls_and_numbers_stay_finite(rows, split, reading):
    cells = tm.channel(np.linspace(0, 5, 21), np.linspace(0, 0.3, rows + 1))
    if split:
        table = cells.nodes.reshape(-1, 4)
        cells = tm.from_lists(cells.points, [*table[:, [0, 1, 2]], *table[:, [0, 2, 3]]])
    m = mesh_of(cells)
    sampler = compiled(m, reading)
    triangle, places = places_in(m)
    linear = Polynomial(m, 1)
    data = data_on(m, linear, reading)
    lines = 1 if reading != "point" and not split else 2
    for degree in (1, 2, 3):
        values, slopes = sample(m, sampler, degree, data, triangle, places)
        assert np.isfinite(values).all() and np.isfinite(slopes).all()
        if rows == 1 and lines == 1:
            # one row of cell values knows nothing across the channel
            assert sampler.fits[degree].reached.max() == 0
            continue
        assert np.abs(values - linear(*places.T)).max() < 1e-12
        assert np.abs(slopes - linear.gradient(*places.T)).max() < 1e-10
        assert sampler.fits[degree].reached.min() >= 1
    if rows == 1:
        assert sampler.fits[3].reached.max() < 3


@pytest.mark.parametrize("reading", READINGS)
def test_a_mesh_of_one_cell_has_numbers_too(reading):
    m = mesh_of(tm.from_lists(np.array([[0, 0], [1, 0], [1, 1], [0, 1]], float), [[0, 1, 2, 3]]))
    triangle, places = places_in(m)
    data = data_on(m, lambda x, y: 2 + 0 * x, reading)
    for degree in (1, 2, 3):
        values, slopes = sample(m, compiled(m, reading), degree, data, triangle, places)
        assert np.allclose(values, 2) and np.allclose(slopes, 0)


@pytest.mark.parametrize("reading", READINGS)
def test_fits_do_not_depend_on_the_unit_of_length_nor_on_the_numbering(reading):
    cells = meshes()["polygons"]
    m = mesh("polygons")
    probe = m.points.mean(axis=0) + 0.2 * np.random.default_rng(0).uniform(-1, 1, (30, 2))

    def at_probe(m, scale):
        table, _ = triangulate_cells(m.points, m.offsets, m.nodes, np.arange(m.n_cells))
        a, b, c = (m.points[table[:, k]] for k in range(3))
        owner = []
        for p in probe * scale:
            sides = [_cross(v - u, p - u) for u, v in ((a, b), (b, c), (c, a))]
            owner.append(np.argmax(np.min(sides, axis=0)))
        data = data_on(m, lambda x, y: wave(x / scale, y / scale), reading)
        values, _ = sample(m, compiled(m, reading), 3, data, table[owner], probe * scale)
        return values

    expected = at_probe(m, 1.0)
    assert np.allclose(at_probe(mesh_of(tm.shuffled(cells, 7)), 1.0), expected, atol=1e-12)
    for scale in (1e-6, 1e6):
        moved = mesh_of(tm.mapped(cells, lambda p, s=scale: p * s))
        assert np.allclose(at_probe(moved, scale), expected, atol=1e-12)


def _cross(u, v):
    return u[:, 0] * v[:, 1] - u[:, 1] * v[:, 0]


@pytest.mark.parametrize("reading", READINGS)
def test_crosswise_is_the_blend_with_the_weights_of_the_others(reading):
    # The readable twin: each corner's cubic by itself, then Σ ½(1 − L_i) p_i; gradients by differences.
    m = mesh("triangles")
    sampler = compiled(m, reading)
    data = data_on(m, lambda x, y: np.sin(3 * x) * np.cos(2 * y), reading)
    triangle, places = places_in(m, count=1)
    fit, frames = sampler.apply(3, data), sampler.fits[3].frames
    middles = m.points[triangle].mean(axis=1)
    places = 0.5 * (places + middles)  # well inside, for the differences

    def weights(x):
        a, b, c = (m.points[triangle[:, k]] for k in range(3))
        second = np.linalg.solve(np.stack([b - a, c - a], axis=2), (x - a)[:, :, None])[:, :, 0]
        return np.column_stack([1 - second.sum(axis=1), second])

    def twin(x):
        total = np.zeros(len(x))
        for k, share in enumerate(weights(x).T):
            row = sampler.centre_of[triangle[:, k]]
            u, v = np.einsum("qij,qj->iq", frames[row], x - m.points[triangle[:, k]])
            terms = [1 + 0 * u, u, v, u * u / 2, u * v, v * v / 2]
            terms += [u**3 / 6, u * u * v / 2, u * v * v / 2, v**3 / 6]
            total += 0.5 * (1 - share) * np.einsum("tq,qt->q", np.array(terms), fit[row, :, 0])
        return total

    values, gradients, _ = sampler.evaluate(3, fit, triangle, places)
    value, gradient = sampler.crosswise(fit, (values, gradients), triangle, places)
    assert np.allclose(value[:, 0], twin(places), atol=1e-12)
    step = 1e-6
    for axis, shift in enumerate(step * np.eye(2)):
        slope = (twin(places + shift) - twin(places - shift)) / (2 * step)
        # central differences keep half the digits
        assert np.allclose(gradient[:, 0, axis], slope, atol=1e-6)


@pytest.mark.parametrize("reading", ("point", "average"))
def test_crosswise_tells_the_error_of_cubics_by_its_size(reading):
    m = mesh("triangles")
    sampler = compiled(m, reading)

    def function(x, y):
        return np.sin(3 * x) * np.cos(2 * y)

    triangle, places = places_in(m, count=2)
    fit = sampler.apply(3, data_on(m, function, reading))
    values, gradients, _ = sampler.evaluate(3, fit, triangle, places)
    value, _ = sampler.crosswise(fit, (values, gradients), triangle, places)
    error = np.abs(values[:, 0] - function(*places.T))
    # both of fourth order; the others' cubics reach out by a cell and are off by more
    ratio = np.median(np.abs(value - values)) / np.median(error)
    assert 0.5 < ratio < 20
