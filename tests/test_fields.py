"""Fields: which array of an export plays which role."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from fvcheck import fieldnames
from fvcheck.errors import FieldError
from fvcheck.fields import ROLES, choose_fields, describe
from fvcheck.hints import PAGES

N = 4
rng = np.random.default_rng(1)


def scalar(n=N):
    return rng.random(n)


def vector(c=3, n=N):
    return rng.random((n, c))


def cells(told=None, **arrays):
    return choose_fields({}, arrays, told)


def codes(hints):
    return [hint.code for hint in hints]


def test_cgns_identifiers_are_recognised():
    # CGNS SIDS, annex A, as quoted in the project's notes on formats; from memory beyond those.
    names = {
        "Pressure": "pressure",
        "Density": "density",
        "Temperature": "temperature",
        "EnergyStagnationDensity": "total_energy",
        "ViscosityMolecular": "viscosity",
        "ViscosityEddy": "eddy_viscosity",
        "TurbulentEnergyKinetic": "turbulence_energy",
        "ThermalConductivity": "conductivity",
    }
    data = {name: scalar() for name in names}
    parts = {name: scalar() for name in ("VelocityX", "VelocityY", "MomentumX", "MomentumY", "MomentumZ")}
    fields, hints = choose_fields({}, data | parts)
    assert {fields[role].name: role for role in names.values()} == names
    assert fields["velocity"].name == "VelocityX,VelocityY"
    np.testing.assert_array_equal(
        fields["velocity"].values, np.stack([parts["VelocityX"], parts["VelocityY"], np.zeros(N)], axis=1)
    )
    np.testing.assert_array_equal(fields["momentum"].values[:, 2], parts["MomentumZ"])
    assert hints == ()


@pytest.mark.parametrize("name", ["U", "u", "Velocity", "velocity", "vel", "VEL"])
def test_usual_names_of_the_velocity_vector_are_recognised(name):
    fields, _ = cells(**{name: vector(), "p": scalar(), "T": scalar(), "rho": scalar()})
    assert {role: field.name for role, field in fields.items()} == {
        "velocity": name,
        "pressure": "p",
        "temperature": "T",
        "density": "rho",
    }


@pytest.mark.parametrize(
    ("names", "slots"),
    [
        (["u", "v"], (0, 1)),
        (["U", "V"], (0, 1)),
        (["u", "v", "w"], (0, 1, 2)),
        (["u", "w"], (0, 2)),
        (["U_x", "U_y", "U_z"], (0, 1, 2)),
        (["VelocityX", "VelocityZ"], (0, 2)),
        (["vel_0", "vel_1"], (0, 1)),
        (["U:0", "U:1", "U:2"], (0, 1, 2)),
        (["velocity[0]", "velocity[1]"], (0, 1)),
        (["Velocity X", "Velocity Y"], (0, 1)),
        (["x-velocity", "y-velocity"], (0, 1)),
        (["ux", "uy"], (0, 1)),
    ],
)
def test_components_are_put_together_in_their_own_slots(names, slots):
    data = {name: scalar() for name in reversed(names)}
    fields, _ = choose_fields(data, {})
    velocity = fields["velocity"]
    assert (velocity.location, velocity.slots) == ("point", slots)
    expected = np.zeros((N, 3))
    for slot, name in zip(slots, names):
        expected[:, slot] = data[name]
    np.testing.assert_array_equal(velocity.values, expected)


@pytest.mark.parametrize("names", [["vel_1", "vel_2"], ["U_x", "u_y"], ["u"], ["U_0", "U_2"], ["VelocityX"]])
def test_incomplete_components_are_not_taken_but_remarked_on(names):
    fields, hints = cells(**{name: scalar() for name in names})
    assert "velocity" not in fields
    assert set(codes(hints)) == {"lone-component"}


def test_two_component_vectors_are_padded_with_zero():
    values = vector(2)
    fields, _ = cells(U=values)
    np.testing.assert_array_equal(fields["velocity"].values, np.c_[values, np.zeros(N)])
    assert fields["velocity"].slots == (0, 1)


@pytest.mark.parametrize(
    ("name", "role"),
    [
        ("k", "turbulence_energy"),
        ("nu", "kinematic_viscosity"),
        ("nut", "kinematic_eddy_viscosity"),
        ("E", "total_energy"),
    ],
)
def test_ambiguous_names_are_not_taken_silently(name, role):
    fields, hints = cells(**{name: scalar()})
    assert fields == {}
    assert codes(hints) == ["ambiguous-field"]
    assert f"--field {role}={name}" in hints[0].message


def test_reduced_pressure_is_a_suspicion_and_only_where_no_pressure_is_there():
    fields, hints = cells(p_rgh=scalar())
    assert (fields, codes(hints)) == ({}, ["reduced-pressure"])
    fields, hints = cells(p_rgh=scalar(), p=scalar())
    assert (fields["pressure"].name, hints) == ("p", ())


def test_mean_fields_are_no_second_candidates():
    fields, hints = cells(U=vector(), UMean=vector())
    assert (fields["velocity"].name, hints) == ("U", ())


@pytest.mark.parametrize(
    "arrays",
    [
        {"U": vector(), "velocity": vector()},
        {"P": scalar(), "p": scalar()},
        {"U": vector(), "u": scalar(), "v": scalar()},
    ],
)
def test_two_claims_on_a_role_are_an_error_that_shows_how_to_settle_it(arrays):
    with pytest.raises(FieldError) as error:
        choose_fields({}, arrays)
    names = list(arrays)
    assert f"cell:{names[0]}" in str(error.value)
    assert f"=cell:{names[1]}" in str(error.value)
    told = str(error.value).split("--field ")[1].split()[0].rstrip(".")
    role, spelling = told.split("=")
    assert choose_fields({}, arrays, {role: spelling})[0][role].name == spelling.removeprefix("cell:")


def test_two_claims_at_different_locations_are_an_error_too():
    with pytest.raises(FieldError, match=r"velocity=cell:velocity or --field velocity=point:U"):
        choose_fields({"U": vector()}, {"velocity": vector()})


def test_claims_with_the_same_values_are_no_conflict():
    values = vector()
    fields, hints = cells(U=values, U_x=values[:, 0], U_y=values[:, 1], U_z=values[:, 2])
    assert fields["velocity"].name == "U"
    assert codes(hints) == ["same-values"]


def test_cells_are_preferred_to_points_with_a_hint():
    at_cells, at_points = scalar(3), scalar(4)
    fields, hints = choose_fields({"p": at_points}, {"p": at_cells})
    assert fields["pressure"].values is not at_points
    np.testing.assert_array_equal(fields["pressure"].values, at_cells)
    assert codes(hints) == ["cell-data-preferred"]
    fields, hints = choose_fields({"p": at_points}, {"p": at_cells}, {"pressure": "point:p"})
    np.testing.assert_array_equal(fields["pressure"].values, at_points)
    assert hints == ()
    _, hints = choose_fields({"p": at_points}, {"p": at_cells}, {"pressure": "p"})
    assert codes(hints) == ["cell-data-preferred"]


# ---- told


@pytest.mark.parametrize(
    ("spelling", "slots"),
    [
        ("a,b", (0, 1)),
        ("a, b,c", (0, 1, 2)),
        (["a", "b"], (0, 1)),
        ("cell:a,b", (0, 1)),
        (["cell:a", "cell:b"], (0, 1)),
        ("c_x,c_z", (0, 2)),
        ("b,a", (0, 1)),
        ("c_z,c_x", (0, 1)),
        ("u,w", (0, 2)),
    ],
)
def test_told_components_keep_their_order_and_leave_the_gaps_their_names_show(spelling, slots):
    data = {name: scalar() for name in ("a", "b", "c", "c_x", "c_z", "u", "w")}
    fields, _ = choose_fields({}, data, {"velocity": spelling})
    assert fields["velocity"].slots == slots
    first = (spelling if isinstance(spelling, str) else spelling[0]).removeprefix("cell:").split(",")[0]
    np.testing.assert_array_equal(fields["velocity"].values[:, 0], data[first])


def test_told_wins_and_its_array_plays_no_other_part_unasked():
    data = {"U": vector(), "W2": vector(), "T": scalar()}
    fields, _ = choose_fields({}, data, {"velocity": "W2", "scalar:dye": "T", "rate:velocity": "U"})
    assert {role: field.name for role, field in fields.items()} == {
        "velocity": "W2",
        "scalar:dye": "T",
        "rate:velocity": "U",
    }


@pytest.mark.parametrize("name", ["a,b", "cell:U", "point:U"])
def test_an_array_with_an_odd_name_can_be_told(name):
    fields, _ = choose_fields({}, {name: scalar()}, {"pressure": name})
    assert fields["pressure"].name == name


@pytest.mark.parametrize(
    ("told", "words"),
    [
        ({"pressure": "presure"}, ["'presure'", "Did you mean 'pressure'", "arrays: U, a, pressure, words"]),
        ({"pressure": "point:pressure"}, ["no point array 'pressure'", "none"]),
        ({"velocity": "a,nope"}, ["'nope'"]),
        ({"velocity": "a,"}, ["''"]),
        ({"velocity": "a,a"}, ["1+1 component"]),
        ({"velocity": []}, ["vector"]),
        ({"presure": "a"}, ["no role 'presure'", "Did you mean 'pressure'", "scalar:NAME"]),
        ({"scalar:": "a"}, ["no role"]),
        ({"pressure": "U"}, ["scalar", "3 components"]),
        ({"pressure": "a,pressure"}, ["scalar", "2 components"]),
        ({"velocity": "a"}, ["vector", "1 component", "VX,VY"]),
        ({"pressure": "words"}, ["'words'", "numbers"]),
        ({"velocity": "words"}, ["'words'", "numbers"]),
    ],
)
def test_what_is_told_wrongly_is_an_error_that_says_how(told, words):
    data = {"U": vector(), "a": scalar(), "pressure": scalar(), "words": np.array(["x"] * N)}
    with pytest.raises(FieldError) as error:
        choose_fields({}, data, told)
    for word in words:
        assert word in str(error.value)


def test_components_at_different_locations_are_an_error():
    with pytest.raises(FieldError, match="one location"):
        choose_fields({"a": scalar()}, {"b": scalar()}, {"velocity": "a,b"})


def test_wrong_lengths_are_errors():
    with pytest.raises(FieldError, match="4 values, the mesh 5 cells"):
        choose_fields({}, {"p": scalar()}, n_cells=5)
    with pytest.raises(FieldError, match="differ in length"):
        choose_fields({}, {"u": scalar(4), "v": scalar(5)})


# ---- values


def test_values_that_are_not_finite_are_kept_and_counted():
    values = scalar()
    values[1:3] = np.nan, np.inf
    fields, hints = cells(p=values)
    np.testing.assert_array_equal(fields["pressure"].values, values)
    assert codes(hints) == ["nan-values"]
    assert " 2 of 4 " in hints[0].message


@pytest.mark.parametrize(
    ("dtype", "kept"),
    [("<f4", "f4"), (">f4", "f4"), (">f8", "f8"), ("i4", "f8"), ("u1", "f8"), ("g", "f8")],
)
def test_float_precision_is_kept_in_native_order_and_integers_become_float64(dtype, kept):
    fields, _ = cells(p=np.arange(N).astype(dtype))
    assert fields["pressure"].values.dtype == np.dtype(kept)
    assert fields["pressure"].values.dtype.isnative
    np.testing.assert_array_equal(fields["pressure"].values, np.arange(N))


def test_columns_of_one_are_scalars_and_other_shapes_play_no_part():
    fields, hints = cells(p=vector(1), T=vector(9), rho=np.zeros((N, 2, 2)), U=vector(4))
    assert set(fields) == {"pressure"}
    assert fields["pressure"].values.shape == (N,)
    assert hints == ()


def test_arrays_are_left_as_they_were():
    data = {"u": scalar(), "v": scalar(), "p": scalar()}
    before = {name: values.copy() for name, values in data.items()}
    choose_fields({}, data)
    for name, values in data.items():
        np.testing.assert_array_equal(values, before[name])


# ---- tables and inspection


def test_every_role_in_the_tables_exists_and_no_name_stands_in_two_of_them():
    roles = {
        *fieldnames.WHOLE.values(),
        *fieldnames.PARTS.values(),
        *(r for r, _ in fieldnames.SUSPECTS.values()),
    }
    assert roles <= set(ROLES)
    assert not set(fieldnames.WHOLE) & set(fieldnames.SUSPECTS)
    assert all(name == fieldnames.key(name) for name in (*fieldnames.WHOLE, *fieldnames.SUSPECTS))


def test_every_hint_has_its_page():
    nan = np.full(N, np.nan)
    _, hints = choose_fields({"T": nan}, {"T": nan, "k": nan, "p_rgh": nan, "u": nan, "rho": nan, "Rho": nan})
    assert set(codes(hints)) == {
        "cell-data-preferred",
        "nan-values",
        "ambiguous-field",
        "reduced-pressure",
        "lone-component",
        "same-values",
    }
    assert set(codes(hints)) <= set(PAGES)


def test_inspection_lists_every_array_with_range_and_role():
    point = {"T": np.array([1.0, np.nan, 3.0]), "id": np.array(["a", "b", "c"])}
    cell = {
        "u": np.zeros(2),
        "v": np.ones(2, dtype=np.float32),
        "P": np.ones(2),
        "p": np.zeros(2),
        "k": np.ones(2),
    }
    rows = {(row.location, row.name): row for row in describe(point, cell, {"scalar:id": "cell:k"})}
    assert len(rows) == 7
    assert {name: row.role for (_, name), row in rows.items()} == {
        "T": "temperature",
        "id": "-",
        "u": "velocity",
        "v": "velocity",
        "P": "pressure?",
        "p": "pressure?",
        "k": "scalar:id",
    }
    assert (rows["point", "T"].low, rows["point", "T"].high) == (1.0, 3.0)
    assert (rows["point", "id"].low, rows["point", "id"].high) == (None, None)
    assert rows["cell", "v"].dtype == "float32"
    assert {row.role for row in describe({}, {"k": np.ones(2)})} == {"turbulence_energy?"}


@given(
    st.dictionaries(
        st.text(alphabet="uvwxyzUVpPTk_012:[]-. ρ", max_size=6), st.sampled_from([1, 2, 3, 9]), max_size=5
    )
)
@settings(max_examples=150, deadline=None)
def test_any_array_names_give_fields_or_a_field_error_and_can_be_inspected(names):
    data = {name: np.zeros(N) if count == 1 else np.ones((N, count)) for name, count in names.items()}
    assert len(describe(data, data)) == 2 * len(data)
    try:
        fields, _ = choose_fields(data, data)
    except FieldError:
        return
    for role, field in fields.items():
        assert field.values.shape == ((N, 3) if fieldnames.is_vector(role) else (N,))
        # The name is what a user may write to get the same field again.
        again, _ = choose_fields(data, data, {role: field.name})
        np.testing.assert_array_equal(again[role].values, field.values)
