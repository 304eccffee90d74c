"""The check file: what it takes, and how it refuses."""

import re
import subprocess
import sys
import tomllib

import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fvcheck.checkfile import load
from fvcheck.errors import SetupError, SurfaceError

FULL = """
[case]
file = "run.vtu"
plane = "auto"
cell_values = "average"
symmetry = "planar"
depth = 1.0
step = "last"

[fluid]
model = "constant-density"
density = 1.2
viscosity = 1.8e-5
pressure_kind = "static"
gravity = [0.0, -9.81]

[fields]
velocity = "U"
momentum = ["MX", "MY"]
"scalar:dye" = "C"
"rate:velocity" = "dUdt"

[patches]
wall = ["pier"]
moving_wall = { belt = [0.4, 0.0] }

[[surface]]
name = "outer"
shape = "box(0.1, -0.2, 1.4, 0.6)"

[[surface]]
shape = "circle(0, 0, 1)"

[[source]]
law = "heat"
shape = "box(0.4, 0.0, 0.5, 0.1)"
rate = 120.0

[[body]]
name = "pier"
reference = { velocity = 1.0, length = 0.1, density = 1.2 }

[tolerance]
mass = 0.5
momentum = 1
heat = 1.0

[[expect]]
surface = "outer"
law = "mass"
imbalance_percent = { max = 0.1 }

[[expect]]
body = "pier"
method = "control-surface"
drag = { value = 1.23, tolerance_percent = 2.0 }

[baseline]
file = "baseline.json"
tolerance_percent = 0.5
"""


@pytest.fixture
def write(tmp_path):
    def make(text):
        path = tmp_path / "check.toml"
        path.write_bytes(text if isinstance(text, bytes) else text.encode())
        return path

    return make


def test_the_agreed_check_file_loads_with_every_value(write):
    check = load(write(FULL), laws=["mass", "momentum", "heat"])
    assert check.case.file == "run.vtu"
    assert (check.case.plane, check.case.cell_values, check.case.symmetry) == ("auto", "average", "planar")
    assert (check.case.depth, check.case.step) == (1.0, "last")
    assert check.fluid.model_dump(exclude_unset=True) == {
        "model": "constant-density",
        "density": 1.2,
        "viscosity": 1.8e-5,
        "pressure_kind": "static",
        "gravity": (0.0, -9.81),
    }
    assert check.fields == {
        "velocity": "U",
        "momentum": ("MX", "MY"),
        "scalar:dye": "C",
        "rate:velocity": "dUdt",
    }
    assert (check.patches.wall, check.patches.moving_wall) == (("pier",), {"belt": (0.4, 0.0)})
    assert [surface.name for surface in check.control_surfaces()] == ["outer", "circle-1"]
    assert check.source[0].rate == 120.0
    assert check.body[0].reference.length == 0.1
    assert check.tolerance == {"mass": 0.5, "momentum": 1.0, "heat": 1.0}
    assert check.expect[0].limits["imbalance_percent"].max == 0.1
    assert check.expect[1].limits["drag"].value == 1.23
    assert check.baseline.tolerance_percent == 0.5


def test_all_may_be_left_out(write):
    check = load(write(""))
    assert (check.case.step, check.case.depth, check.baseline, check.expect) == ("last", None, None, ())
    assert check.fluid.model_dump(exclude_unset=True) == {}
    assert check.control_surfaces() == ()


def test_fluid_keys_of_the_options_are_taken_and_values_may_be_array_names(write):
    keys = ("specific_heat", "gas_constant", "gamma", "expansion", "reference_temperature")
    text = "[fluid]\ndensity = 'rho'\nviscosity='mu'\nconductivity='lambda'\n" + "".join(
        f"{k} = 2\n" for k in keys
    )
    fluid = load(write(text)).fluid
    assert (fluid.density, fluid.viscosity, fluid.conductivity) == ("rho", "mu", "lambda")
    assert all(getattr(fluid, key) == 2.0 for key in keys)


def test_every_key_of_the_fluid_table_is_one_of_the_fluid():
    from dataclasses import fields

    from fvcheck.checkmodel import FluidTable
    from fvcheck.fluid import Fluid

    assert set(FluidTable.model_fields) == {item.name for item in fields(Fluid)}


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("[cas]\n", ["Unknown key 'cas'", "Did you mean 'case'"]),
        ("[case]\nplan = 'xy'\n", ["Unknown key 'plan'", "[case] plan", "Did you mean 'plane'"]),
        ("[fluid]\nviscosty = 1\n", ["[fluid] viscosty", "Did you mean 'viscosity'"]),
        (
            "[[surface]]\nshape='domain()'\n[[surface]]\nshpe='x'\nshape='domain()'\n",
            ["[[surface]] 2 shpe", "'shape'"],
        ),
        (
            "[[body]]\nname='a'\nreference={velocity=1,lenght=1,density=1}\n",
            ["lenght", "Did you mean 'length'"],
        ),
        ("[[expect]]\nsurface='a'\nlaw='mass'\nflux={maxx=1}\n", ["[[expect]] 1 flux.maxx", "'max'"]),
        ("[fields]\nvelocty = 'U'\n", ["no role 'velocty'", "Did you mean 'velocity'"]),
        (
            "[baseline]\nfile='b.json'\ntolerance_percent=1\nx=1\n",
            ["'x'", "Known here: file, tolerance_percent"],
        ),
        ("[case]\nplane = 'zz'\n", ["[case] plane", '"auto", "xy"', "'zz'"]),
        ("[case]\nfile = 3\n", ["[case] file", "a path, a pattern", "not 3"]),
        ("[case]\nfile = ['a', 3]\n", ["[case] file", "a path"]),
        ("[case]\ndepth = 0\n", ["[case] depth", "above zero", "not 0"]),
        ("[case]\ndepth = '1'\n", ["above zero", "not '1'"]),
        ("[case]\nstep = 1.5\n", ["[case] step", '"last"']),
        ("[case]\nstep = -1\n", ["[case] step"]),
        ("[case]\nstep = true\n", ["[case] step", "True"]),
        ("case = 3\n", ["case", "a table", "not 3"]),
        ("[fluid]\ndensity = true\n", ["[fluid] density", "a number or the name of an array"]),
        ("[fluid]\ngamma = 'g'\n", ["[fluid] gamma", "a number"]),
        ("[fluid]\nviscous_heating = 1\n", ["[fluid] viscous_heating", "true or false"]),
        ("[fluid]\ndensity = nan\n", ["[fluid] density", "nan"]),
        ("[fluid]\nexpansion = inf\n", ["[fluid] expansion", "inf"]),
        ("[fluid]\ngravity = [1]\n", ["[fluid] gravity", "two numbers"]),
        ("[fluid]\ngravity = [1, 'a']\n", ["[fluid] gravity", "two numbers"]),
        ("[fields]\nvelocity = 3\n", ["[fields] velocity", "name of an array"]),
        ("[patches]\nwall = 'pier'\n", ["[patches] wall", "a list of patch names", "'pier'"]),
        ("[patches]\nmoving_wall = { belt = 0.4 }\n", ["[patches] moving_wall.belt", "[VX, VY]"]),
        (
            "[patches]\nmoving_wall = { rotor = { omega = 1, center = [0, 0] } }\n",
            ["[patches] moving_wall.rotor.center", "centre"],
        ),
        ("[[body]]\nname = 'a'\nabout = 1\n", ["[[body]] 1 about", "point of its moment"]),
        ("[surface]\nshape='domain()'\n", ["surface", "[[surface]] tables"]),
        ("[[surface]]\nname='a'\n", ["'shape' is missing", "[[surface]] 1"]),
        ("[[source]]\nlaw='heat'\nshape='domain()'\nrate='x'\n", ["[[source]] 1 rate", "a number"]),
        (
            "[[body]]\nname='a'\nreference={velocity=1,length=0,density=1}\n",
            ["reference.length", "above zero"],
        ),
        ("[tolerance]\nmass = -1\n", ["[tolerance] mass", "percentage"]),
        ("[tolerance]\nmass = 'x'\n", ["[tolerance] mass", "percentage"]),
        ("[tolerance]\nmas = 1\n", ["no law 'mas'", "Did you mean 'mass'"]),
        ("[[source]]\nlaw='haet'\nshape='domain()'\nrate=1\n", ["no law 'haet'", "[[source]] 1", "'heat'"]),
        ("[[expect]]\nlaw='mass'\nflux={max=1}\n", ["either a surface or a body"]),
        ("[[expect]]\nsurface='a'\nflux={max=1}\n", ["needs its law"]),
        ("[[expect]]\nsurface='a'\nlaw='mass'\n", ["nothing is expected"]),
        ("[[expect]]\nsurface='a'\nlaw='mass'\ndrag={max=1}\n", ["drag does not go with surface"]),
        ("[[expect]]\nbody='a'\nflux={max=1}\n", ["flux does not go with body"]),
        ("[[expect]]\nbody='a'\ndrag={}\n", ["no limit is given", "[[expect]] 1 drag"]),
        ("[[expect]]\nbody='a'\ndrag=1.2\n", ["[[expect]] 1 drag", "limits such as"]),
        ("[[expect]]\nbody='a'\ndrag={value=1}\n", ["tolerance"]),
        ("[[expect]]\nbody='a'\ndrag={value=1,tolerance=1,tolerance_percent=1}\n", ["either tolerance"]),
        ("[[expect]]\nbody='a'\ndrag={min=2,max=1}\n", ["min is above max"]),
        ("[[expect]]\nbody='a'\nmethod='magic'\ndrag={max=1}\n", ["[[expect]] 1 method", "control-surface"]),
        ("[baseline]\nfile='b.json'\n", ["'tolerance_percent' is missing"]),
        ("[case\n", ["TOML", "line 1, column 6"]),
        ("a = 1\na = 2\n", ["TOML", "line 2"]),
        ("a = ", ["TOML", "check.toml"]),
        ("a = " + "[" * 5000, ["check.toml"]),
        (b"a = '\xff'", ["UTF-8"]),
    ],
)
def test_what_cannot_be_used_is_one_line_that_names_the_key_and_the_remedy(write, text, words):
    with pytest.raises(SetupError) as error:
        load(write(text), laws=["mass", "momentum", "heat"])
    message = str(error.value)
    for word in words:
        assert word.lower() in message.lower()
    assert "check.toml" in message
    assert "\n" not in message
    assert not re.search("pydantic|Input should|validat", message)


def test_missing_files_and_folders_are_refused(tmp_path):
    for path in (tmp_path / "none.toml", tmp_path):
        with pytest.raises(SetupError, match="no such check file"):
            load(path)


def test_a_wrong_shape_names_its_entry(write):
    check = load(write("[[surface]]\nshape='domain()'\n[[surface]]\nname='a'\nshape='bx(0,0,1,1)'\n"))
    with pytest.raises(SurfaceError, match=r"\[\[surface\]\] 2: bx.*'box'"):
        check.control_surfaces()


def test_drawings_and_exports_are_found_beside_the_check_file(write, tmp_path):
    (tmp_path / "outline.csv").write_text("0,0\n1,0\n1,1\n0,0\n")
    for name in ("run_10.vtu", "run_2.vtu", "odd[1].vtu"):
        (tmp_path / name).touch()
    text = "[case]\nfile = ['run_*.vtu', 'odd[1].vtu', 'later.vtu']\n[[surface]]\nshape='file(outline.csv)'\n"
    check = load(write(text))
    assert check.control_surfaces()[0].area == 0.5
    assert [path.name for path in check.case_files()] == [
        "run_2.vtu",
        "run_10.vtu",
        "odd[1].vtu",
        "later.vtu",
    ]
    with pytest.raises(SetupError, match="meets no file"):
        load(write("[case]\nfile = 'no*.vtu'\n")).case_files()
    with pytest.raises(SetupError, match="No export"):
        load(write("")).case_files()


@pytest.mark.parametrize(
    ("limit", "kept", "missed"),
    [
        ("max = 1.0", [-5, 1.0], [1.001]),
        ("min = 1.0", [1.0, 2], [0.999]),
        ("value = -2.0, tolerance_percent = 10.0", [-2.19, -1.81], [-2.21, -1.79, 2.0]),
        ("value = 2.0, tolerance = 0.5", [1.5, 2.5], [1.4, 2.6]),
        ("value = 2.0, tolerance = 0.5, max = 2.0", [1.5, 2.0], [2.1]),
    ],
)
def test_limits_hold_up_to_their_bounds_and_never_for_nan(write, limit, kept, missed):
    check = load(write(f"[[expect]]\nbody = 'pier'\ndrag = {{ {limit} }}\n"))
    drag = check.expect[0].limits["drag"]
    assert all(drag.holds(number) for number in kept)
    assert not any(drag.holds(number) for number in (*missed, float("nan")))


value = st.one_of(
    st.booleans(), st.integers(-3, 3), st.floats(), st.text(max_size=3), st.lists(st.integers(), max_size=3)
)
tables = st.sampled_from(
    ["case", "fluid", "fields", "patches", "surface", "tolerance", "expect", "baseline", "body"]
)
keys = st.sampled_from(
    ["file", "step", "density", "gravity", "wall", "name", "shape", "mass", "velocity", "drag", "q"]
)


@given(
    st.dictionaries(
        tables, value | st.dictionaries(keys, value, max_size=3) | st.lists(st.dictionaries(keys, value))
    )
)
@settings(max_examples=150, deadline=None)
def test_any_value_in_any_place_gives_a_check_file_or_a_one_line_error(tmp_path_factory, data):
    def spell(item):
        if isinstance(item, dict):
            return "{" + ", ".join(f"{key} = {spell(v)}" for key, v in item.items()) + "}"
        if isinstance(item, list):
            return "[" + ", ".join(map(spell, item)) + "]"
        if isinstance(item, str):
            return '"' + "".join(f"\\U{ord(c):08x}" for c in item if not 0xD800 <= ord(c) < 0xE000) + '"'
        return str(item).lower()

    text = "".join(f"{key} = {spell(item)}\n" for key, item in data.items())
    tomllib.loads(text)
    path = tmp_path_factory.mktemp("check") / "check.toml"
    path.write_text(text)
    try:
        load(path)
    except SetupError as error:
        assert "\n" not in str(error)


def test_importing_the_reader_does_not_import_the_validator():
    code = "import sys, fvcheck.checkfile; sys.exit('pydantic' in sys.modules)"
    assert subprocess.run([sys.executable, "-c", code], check=False).returncode == 0


def test_a_family_in_a_check_file_gives_its_members(tmp_path):
    path = tmp_path / "check.toml"
    path.write_text(
        '[[surface]]\nname = "station"\nshape = "line(1 .. 2 0, 1 .. 2 1, 3)"\n'
        '[[surface]]\nshape = "circle(0, 0, 1 .. 3, 2)"\n'
    )
    names = [surface.name for surface in load(path).control_surfaces()]
    assert names == ["station@1", "station@1.5", "station@2", "circle@1", "circle@3"]


def test_a_family_that_cannot_be_drawn_is_named_with_its_entry(tmp_path):
    path = tmp_path / "check.toml"
    path.write_text('[[surface]]\nshape = "circle(0, 0, 1 .. 3)"\n')
    with pytest.raises(SurfaceError, match=r"how many members.*check.toml, \[\[surface\]\] 1: "):
        load(path).control_surfaces()
