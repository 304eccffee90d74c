"""Control surfaces: outlines, spelling, files, motion."""

import json
import math

import numpy as np
import pytest
import shapely
from hypothesis import given, settings
from hypothesis import strategies as st

from fvcheck.errors import SurfaceError
from fvcheck.mesh.mesh import Boundary, Mesh
from fvcheck.surfaces import ControlSurface, Motion, parse_all

parse = ControlSurface.parse
number = st.floats(-1e6, 1e6, allow_nan=False)
length = st.floats(1e-3, 1e6)


def signed(ring):
    """Slow twin of the shoelace: one corner after the other."""
    total = 0.0
    for (x0, y0), (x1, y1) in zip(ring, [*ring[1:], ring[0]]):
        total += (x0 - ring[0][0]) * (y1 - ring[0][1]) - (x1 - ring[0][0]) * (y0 - ring[0][1])
    return total / 2


def same(a, b):
    assert (a.name, a.kind, a.closed, a.target, a.distance) == (
        b.name,
        b.kind,
        b.closed,
        b.target,
        b.distance,
    )
    assert a.motion == b.motion
    assert len(a.rings) == len(b.rings)
    for ring, other in zip(a.rings, b.rings):
        np.testing.assert_array_equal(ring, other)


def square_with_hole():
    """The square (0, 3)² of nine unit cells, the middle one left out as body "pier"."""
    points = np.array([[i, j] for j in range(4) for i in range(4)], dtype=float)
    cells = [[4 * j + i, 4 * j + i + 1, 4 * j + i + 5, 4 * j + i + 4] for j in range(3) for i in range(3)]
    del cells[4]
    edges, owner, patch = [], [], []
    for cell, nodes in enumerate(cells):
        for a, b in zip(nodes, [*nodes[1:], nodes[0]]):
            if any(b in c and a in c and c is not nodes for c in cells):
                continue
            edges.append([a, b])
            owner.append(cell)
            ya, yb = points[a, 1], points[b, 1]
            inner = all(1 <= v <= 2 for v in (*points[a], *points[b]))
            patch.append(0 if inner else 1 if ya == yb == 0 else 2)
    boundary = Boundary(np.array(edges), np.array(owner), np.array(patch), ("pier", "floor", "rest"))
    nodes = np.concatenate(cells)
    return Mesh(points, np.arange(0, len(nodes) + 1, 4), nodes, boundary, bodies=("pier",))


# ---- shapes


@given(number, number, length, length)
@settings(max_examples=30, deadline=None)
def test_box_is_counter_clockwise_whatever_corners_are_given(x, y, w, h):
    forth, back = ControlSurface.box(x, y, x + w, y + h), ControlSurface.box(x + w, y + h, x, y)
    np.testing.assert_array_equal(forth.rings[0], back.rings[0])
    # x + w has 16 digits of x: with x up to 1e6 and w down to 1e-3 that leaves 7 digits of w.
    assert forth.area == pytest.approx(w * h, rel=1e-6)
    assert forth.area == pytest.approx(shapely.box(x, y, x + w, y + h).area, rel=1e-6)


@given(st.floats(-100, 100), st.floats(-100, 100), st.floats(0.01, 100), st.floats(0.01, 100), number)
@settings(max_examples=30, deadline=None)
def test_ellipse_has_the_exact_area_and_runs_counter_clockwise(x, y, a, b, degrees):
    surface = ControlSurface.ellipse(x, y, a, b, degrees)
    (ring,) = surface.rings
    # Coordinates up to 200 keep 3e-14; along a side of 0.01 that costs 3e-12.
    assert surface.area == pytest.approx(math.pi * a * b, rel=1e-10)
    assert signed(ring) > 0
    # GEOS multiplies whole coordinates: some 200² times 1e-16 and 720 corners on an area of 3e-4 and more.
    assert shapely.Polygon(ring).area == pytest.approx(math.pi * a * b, rel=1e-8, abs=1e-8)


def test_ellipse_turns_its_first_axis_counter_clockwise():
    (ring,) = ControlSurface.ellipse(1, 2, 3, 1, 90).rings
    # Half a chord (half a degree) of play, and 1.3e-5 of growth.
    np.testing.assert_allclose(np.ptp(ring, axis=0), [2, 6], rtol=1e-4)


def test_circle_has_the_length_of_its_circumference():
    # A regular 720-gon of equal area has a circumference larger by (π/720)²/6·… < 1e-5.
    assert ControlSurface.circle(0, 0, 2).length == pytest.approx(4 * math.pi, rel=1e-5)


def test_clockwise_polygon_is_turned_and_loses_its_closing_point():
    surface = ControlSurface.polygon([(0, 0), (0, 1), (1, 1), (1, 0), (0, 0)])
    assert surface.rings[0].shape == (4, 2)
    assert surface.area == 1.0
    assert surface.length == 4.0


def test_zero_length_segments_are_removed():
    surface = ControlSurface.polygon([(0, 0), (1, 0), (1, 0), (1, 1), (0, 1), (0, 1)])
    assert len(surface.rings[0]) == 4
    assert len(ControlSurface.line([(0, 0), (0, 0), (1, 0)]).rings[0]) == 2


def test_line_keeps_its_drawn_order_and_has_no_area():
    line = ControlSurface.line([(3, 0), (0, 4)])
    np.testing.assert_array_equal(line.rings[0], [[3, 0], [0, 4]])
    assert (line.length, line.area, line.closed) == (5.0, None, False)


def test_far_from_the_origin_the_area_keeps_its_digits():
    assert ControlSurface.box(1e9, 1e9, 1e9 + 1, 1e9 + 1).area == 1.0


@pytest.mark.parametrize(
    ("call", "words"),
    [
        (lambda: ControlSurface.box(0, 0, 0, 1), "no width"),
        (lambda: ControlSurface.box(0, 1, 2, 1), "no height"),
        (lambda: ControlSurface.box(0, 0, math.nan, 1), "not finite"),
        (lambda: ControlSurface.box(0, 0, 1e300, 1), "too large"),
        (lambda: ControlSurface.circle(0, 0, 0), "above zero"),
        (lambda: ControlSurface.circle(0, 0, -1), "above zero"),
        (lambda: ControlSurface.circle(1e9, 0, 1e-9), "too small"),
        (lambda: ControlSurface.ellipse(0, 0, 1, 0), "above zero"),
        (lambda: ControlSurface.polygon([(0, 0), (1, 1)]), "at least 3"),
        (lambda: ControlSurface.polygon([(0, 0), (1, 1), (2, 2)]), "no area"),
        (lambda: ControlSurface.polygon([(0, 0), (2, 2), (2, 0), (0, 1)]), "Self-intersection"),
        (lambda: ControlSurface.polygon([(0, 0), (1, 0), (1, math.inf)]), "point 3"),
        (lambda: ControlSurface.polygon([(0, 0), (1, 0), (1,)]), "numbers"),
        (lambda: ControlSurface.polygon("abc"), "numbers"),
        (lambda: ControlSurface.polygon([(0, 0, 0), (1, 0, 0), (1, 1, 1)]), "z coordinates"),
        (lambda: ControlSurface.line([(1, 1), (1, 1)]), "at least 2"),
        (lambda: ControlSurface.around("pier", 0), "patch(pier)"),
        (lambda: ControlSurface.box("a", 0, 1, 1), "numbers"),
        (lambda: ControlSurface.box(0, 0, 1, 1, name='a"b'), "named"),
        (lambda: Motion(velocity=(math.inf, 0)), "not finite"),
    ],
)
def test_degenerate_shapes_are_refused_with_their_reason(call, words):
    with pytest.raises(SurfaceError) as error:
        call()
    assert words in str(error.value)
    assert "\n" not in str(error.value)


# ---- motion


def test_spin_moves_points_counter_clockwise_about_its_centre():
    motion = Motion(velocity=(1, 0), omega=2, centre=(1, 1))
    # ω e_z × r: a point one unit to the right moves up with ω, one above moves left.
    np.testing.assert_array_equal(motion.at(np.array([[2, 1], [1, 2], [1, 1]])), [[1, 2], [-1, 0], [1, 0]])


# ---- spelling


@pytest.mark.parametrize(
    "text",
    [
        "box(0.1, -0.2, 1.4, 0.6)",
        "outer=box(0.1, -0.2, 1.4, 0.6)",
        '"far (2 D)"=circle(0, 0, 2)',
        "ring=circle(0.2, 0.2, 0.07) @ velocity(1, -0.5)",
        "ellipse(0, 0, 2, 1, 30) @ spin(3, 0, 1)",
        "ellipse(0, 0, 2, 1) @ velocity(0, 1) @ spin(-3, 0, 1)",
        "tri=polygon(0 0, 1 0, 0.001 1)",
        "cut=line(0 0, 1 0, 1 1)",
        "around(pier, 0.05)",
        "around(rear, upper flap, 0.05)",
        "domain()",
        "patch(inlet (left))",
        "still=domain() @ velocity(0, 0)",
        "MULTIPOLYGON (((0 0, 4 0, 4 4, 0 4, 0 0), (1 1, 1 2, 2 2, 2 1, 1 1)), ((5 5, 6 5, 6 6, 5 5)))",
        "MULTILINESTRING ((0 0, 1 1), (2 2, 3 2, 3 3))",
    ],
)
def test_canonical_text_is_a_fixed_point(text):
    surface = parse(text)
    assert surface.text == text
    same_kind = parse(surface.text)
    same(surface, same_kind)


@given(st.data())
@settings(max_examples=60, deadline=None)
def test_parsing_the_canonical_text_gives_the_same_surface(data):
    draw = data.draw
    name = draw(st.sampled_from(["", "outer", "a b", "x=y", "p(1)", "rot @ 2", "β", " padded ", "it's"]))
    motion = draw(st.none() | st.builds(Motion, st.tuples(number, number), number, st.tuples(number, number)))
    x, y = draw(number), draw(number)
    # A regular star-like outline never crosses itself: sizes vary, angles do not.
    radii = np.array(draw(st.lists(st.floats(1, 10), min_size=3, max_size=9)))
    angles = 2 * np.pi * np.arange(len(radii)) / len(radii)
    star = np.stack([x + radii * np.cos(angles), y + radii * np.sin(angles)], axis=1)
    if draw(st.booleans()):
        star = star[::-1]
    w, h = draw(st.floats(1, 1e6)), draw(st.floats(1, 1e6))
    surface = draw(
        st.sampled_from(
            [
                lambda **k: ControlSurface.box(x, y, x + w, y - h, **k),
                lambda **k: ControlSurface.circle(x, y, w, **k),
                lambda **k: ControlSurface.ellipse(x, y, w, h, y, **k),
                lambda **k: ControlSurface.polygon(star, **k),
                lambda **k: ControlSurface.line(star, **k),
                lambda **k: ControlSurface.around(" odd 'name'", w, **k),
                lambda **k: ControlSurface.patch("'quoted'", **k),
                lambda **k: ControlSurface.from_wkt(shapely.Point(x, y).buffer(w).wkt, **k),
            ]
        )
    )(name=name, motion=motion)
    again = parse(surface.text)
    # One outline from WKT is spelled as a polygon.
    same(
        surface
        if surface.kind != "wkt"
        else ControlSurface.polygon(surface.rings[0], name=name, motion=motion),
        again,
    )
    assert again.text == surface.text
    if surface.kind == "polygon":
        assert signed(surface.rings[0]) > 0
        # Coordinates up to 1e6 keep 1e-10; an area of order 1 to 100 from them, ten times that and more.
        assert surface.area == pytest.approx(shapely.Polygon(star).area, rel=1e-8)


def test_unnamed_surfaces_get_running_numbers_that_avoid_given_names():
    texts = [
        "box(0,0,1,1)",
        "circle(0,0,1)",
        "box-2=box(0,0,2,2)",
        "box(0,0,3,3)",
        "POLYGON ((0 0,1 0,0 1,0 0))",
    ]
    assert [s.name for s in parse_all(texts)] == ["box-1", "circle-1", "box-2", "box-3", "wkt-1"]


def test_a_name_given_twice_is_refused():
    with pytest.raises(SurfaceError, match="'a'"):
        parse_all(["a=domain()", "a=box(0,0,1,1)"])


def test_polygon_in_capitals_with_one_bracket_is_ours_and_with_two_is_wkt():
    assert parse("POLYGON(0 0, 1 0, 0 1)").kind == "polygon"
    assert parse("polygon((0 0, 1 0, 0 1, 0 0))").kind == "wkt"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("bx(0,0,1,1)", ["'bx'", "'box'", "ellipse"]),
        ("cirle(0,0,1)", ["'circle'"]),
        ("box(0,0,1)", ["4 numbers", "not 3", "box(x0, y0, x1, y1)"]),
        ("box(0,0,1,nan)", ["'nan'", "not a finite"]),
        ("box(0,0,1,1e999)", ["not finite"]),
        ("box(0,0,1,1_0)", ["'1_0'"]),
        ("box(0,0,1,2*3)", ["'2*3'"]),
        ("box(0,0,1,)", ["''"]),
        ("box 0 0 1 1", ["how box is written", "box(x0"]),
        ("box(0,0,1,1", ["how box is written"]),
        ("domain", ["domain()"]),
        ("domain(1)", ["domain()"]),
        ("patch()", ["patch(NAME)"]),
        ("around(pier)", ["around(BODY, distance)"]),
        ("around(pier, far)", ["'far'"]),
        ("around(pier, -1)", ["above zero"]),
        ("polygon(0, 0, 1, 0, 1, 1)", ["space between", "polygon(x y"]),
        ("polygon()", ["space between"]),
        ("circle(0,0,0)", ["above zero", "circle(0,0,0)"]),
        ("box(0,0,1,1) @ speed(1, 0)", ["'speed'", "velocity(wx, wy)"]),
        ("box(0,0,1,1) @ velocity(1)", ["2 numbers"]),
        ("box(0,0,1,1) @ velocity(1,0) @ velocity(1,0)", ["twice"]),
        ("box(0,0,1,1) @ spin(1)", ["3 numbers", "spin(omega, x, y)"]),
        ("POLYGON ((0 0, 1 0, 1 1))", ["WKT"]),
        ("POLYGON ((0 0, 2 2, 2 0, 0 1, 0 0))", ["Self-intersection"]),
        ("POLYGON ((0 0, 1 0, 1 1, nan 0, 0 0))", ["finite"]),
        ("POLYGON ((0 0, 2 2, 2 0, 0 2, 0 0))", ["loops cancel"]),
        ("POLYGON EMPTY", ["empty"]),
        ("POINT (1 2)", ["Point", "no control surface"]),
        ("MULTIPOLYGON (((0 0,2 0,2 2,0 2,0 0)),((1 1,3 1,3 3,1 3,1 1)))", ["overlap"]),
        ("", ["no control surface"]),
        ("=", ["no control surface"]),
        ("file(nowhere.csv)", ["no such file", "nowhere.csv"]),
        ("file()", ["file(PATH)"]),
    ],
)
def test_wrong_spellings_say_what_is_wrong_and_show_the_right_form(text, words):
    with pytest.raises(SurfaceError) as error:
        parse(text)
    for word in words:
        assert word in str(error.value)
    assert "\n" not in str(error.value)


@given(st.text(alphabet='boxplygnLINEMUT()=@," 01.-e', max_size=40))
@settings(max_examples=200, deadline=None)
def test_no_text_gives_anything_but_a_surface_or_a_surface_error(text):
    try:
        surface = parse(text)
    except SurfaceError:
        return
    assert all(np.isfinite(ring).all() for ring in surface.rings)


# ---- files


OUTLINE = {
    "type": "Polygon",
    "coordinates": [[[0, 0], [0, 4], [4, 4], [4, 0], [0, 0]], [[1, 1], [2, 1], [2, 2], [1, 1]]],
}


@pytest.mark.parametrize(
    ("content", "closed", "area"),
    [
        (json.dumps(OUTLINE), True, 15.5),
        (json.dumps({"type": "Feature", "properties": None, "geometry": OUTLINE}), True, 15.5),
        (
            json.dumps({"type": "FeatureCollection", "features": [{"type": "Feature", "geometry": OUTLINE}]}),
            True,
            15.5,
        ),
        ("MULTIPOLYGON (((0 0, 1 0, 1 1, 0 0)),\n ((2 2, 3 2, 3 3, 2 2)))", True, 1.0),
        ("x,y\n0,0\n2,0\n2,2\n0,0\n", True, 2.0),
        ("\ufeffX [m];Y [m]\r\n0;0\r\n2,5;0\r\n2,5;2\r\n0;0\r\n", True, 2.5),
        ("# outline\n0 0\n2\t0\n\n2 2\n", False, None),
        ('"x","y"\n"0","0"\n"1","0"\n', False, None),
        ("LINESTRING (0 0, 1 1)", False, None),
    ],
)
def test_drawings_are_read_from_geojson_wkt_and_csv(tmp_path, content, closed, area):
    (tmp_path / "outline.any").write_text(content, encoding="utf-8")
    surface = parse("o=file(outline.any)", base=tmp_path)
    assert (surface.kind, surface.closed, surface.area) == ("file", closed, area)
    same(surface, parse(surface.text, base=tmp_path))


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (b"", "empty"),
        (b"\xff\xfe\x00", "no text"),
        (b"x,y\n1,2\n1,two\n", "line 3"),
        (b"1,2,3\n", "two numbers"),
        (b"x,y\n", "two-column"),
        (b"0,0\n1,nan\n", "finite"),
        (b'{"type": "Polygon"', "line 1"),
        (b'{"type": "Polygon"}', "coordinates"),
        (b'{"type": "Polygon", "coordinates": 3}', "coordinates"),
        (b'{"type": "Polygon", "coordinates": [3]}', "point"),
        (b'{"type": "MultiPolygon", "coordinates": [3]}', "coordinates"),
        (b'{"type": "Polygon", "coordinates": [[["a", 1]]]}', "numbers"),
        (b'{"type": "Point", "coordinates": [1, 2]}', "Point"),
        (b'{"type": "Feature", "geometry": null}', "GeoJSON"),
        (b'{"type": "FeatureCollection", "features": []}', "empty"),
        (b"[" * 100_000, "nested"),
        (b'{"type": "GeometryCollection", "geometries": [' * 30_000, "nested"),
        (b"POLYGON ((0 0", "WKT"),
    ],
)
def test_damaged_drawings_are_refused_with_the_file_named(tmp_path, content, words):
    (tmp_path / "bad.any").write_bytes(content)
    with pytest.raises(SurfaceError) as error:
        parse("file(bad.any)", base=tmp_path)
    assert words in str(error.value)
    assert "bad.any" in str(error.value)


def test_a_folder_is_no_drawing(tmp_path):
    with pytest.raises(SurfaceError, match="no such file"):
        ControlSurface.from_file(tmp_path)


# ---- on a mesh


def test_around_a_body_is_its_rounded_offset_without_a_hole():
    surface = parse("around(pier, 0.25)").resolve(square_with_hole())
    # Closed form: unit square, four strips, a full circle; 192 chords take 1.8e-4 off the circle.
    assert surface.area == pytest.approx(1 + 4 * 0.25 + math.pi * 0.25**2, rel=1e-4)
    assert len(surface.rings) == 1
    assert signed(surface.rings[0]) > 0
    assert surface.text == "around(pier, 0.25)"


def test_around_a_wall_patch_is_the_offset_of_the_open_chain():
    surface = parse("around(floor, 0.5)").resolve(square_with_hole())
    # Closed form: a strip 3 long and 1 wide with two half circles.
    assert surface.area == pytest.approx(3 + math.pi * 0.25, rel=1e-4)


def test_unknown_patches_are_named_with_the_nearest():
    mesh = square_with_hole()
    for text in ("around(peir, 0.1)", "patch(peir)"):
        with pytest.raises(SurfaceError, match=r"'peir'.*pier, floor, rest.*Did you mean 'pier'"):
            parse(text).resolve(mesh)


def test_domain_and_patch_stay_undrawn_on_a_mesh():
    mesh = square_with_hole()
    domain, floor = parse("domain()").resolve(mesh), parse("patch(floor)").resolve(mesh)
    assert (domain.rings, domain.closed, domain.area, domain.length) == ((), True, None, None)
    assert (floor.rings, floor.closed, floor.target) == ((), False, "floor")
