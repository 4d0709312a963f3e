"""What arrays are, from their names, units, components and values."""

from __future__ import annotations

import numpy as np
import pytest

from fluxmesh.assess.guess import best_guess, guess_arrays
from fluxmesh.assess.guess.arrays import read_as
from fluxmesh.assess.guess.names import known_unit, name_words
from fluxmesh.assess.guess.tags import tag_arrays

SCALAR, VECTOR = np.linspace(1.0, 2.0, 5), np.ones((5, 3))


@pytest.mark.parametrize(
    ("name", "values", "quantity", "unit"),
    [
        ("U", VECTOR, "velocity", ""),
        ("Velocity_m_s", VECTOR, "velocity", "m/s"),
        ("velocity [ft s^-1]", VECTOR, "velocity", "ft s^-1"),
        ("UMean", VECTOR, "velocity", ""),
        ("p", SCALAR, "pressure", ""),
        ("p [Pa]", SCALAR, "pressure", "Pa"),
        ("Static Pressure (kPa)", SCALAR, "pressure", "kPa"),
        ("pressure, psia", SCALAR, "pressure", "psi"),
        ("wallShearStress", VECTOR, "traction", ""),
        ("wall_traction", VECTOR, "traction", ""),
        ("Wall Shear Stress_Pa", VECTOR, "traction", "Pa"),
        ("Density", SCALAR, "density", ""),
        ("rho", SCALAR, "density", ""),
        ("Density_kg_m3", SCALAR, "density", "kg/m3"),
        ("Temperature", SCALAR, "temperature", ""),
        ("T_K", SCALAR, "temperature", "K"),
        ("stress", np.ones((5, 6)), "stress", ""),
    ],
)
def test_names_that_say_what_an_array_is(name: str, values: np.ndarray, quantity: str, unit: str) -> None:
    guess = best_guess(guess_arrays({name: values}, {}), quantity)
    assert guess is not None
    assert (guess.names, guess.at, guess.unit) == ((name,), "nodes", unit)


@pytest.mark.parametrize(
    ("name", "values"),
    [
        ("u_tau", SCALAR),
        ("VelocityMagnitude", SCALAR),
        ("velocity gradient", VECTOR),
        ("vorticity", VECTOR),
        ("friction velocity", VECTOR),
        ("sound speed", SCALAR),
        ("p", VECTOR),
        ("U", SCALAR),
        ("rhoU", VECTOR),
        ("pressure_old", SCALAR),
        ("dynamic pressure", SCALAR),
        ("p_rms", SCALAR),
        ("CoefPressure", SCALAR),
        ("Cf", VECTOR),
        ("T [degC]", SCALAR),
        ("density", -SCALAR),
        ("density", np.full(5, np.nan)),
        ("p", np.arange(5)),
        ("mass flow", SCALAR),
        ("p\nq", SCALAR),
    ],
)
def test_names_that_say_something_else(name: str, values: np.ndarray) -> None:
    assert [guess for guess in guess_arrays({name: values}, {}) if guess.score > 0] == []


@pytest.mark.parametrize(
    ("names", "quantity", "unit"),
    [
        (("VelocityX", "VelocityY", "VelocityZ"), "velocity", ""),
        (("Ux", "Uy", "Uz"), "velocity", ""),
        (("u", "v", "w"), "velocity", ""),
        (("x-velocity", "y-velocity", "z-velocity"), "velocity", ""),
        (("U:0", "U:1", "U:2"), "velocity", ""),
        (("velocity_x [m/s]", "velocity_y [m/s]", "velocity_z [m/s]"), "velocity", "m/s"),
        (("Velocity_X_mm_s", "Velocity_Y_mm_s", "Velocity_Z_mm_s"), "velocity", "mm/s"),
        (("SkinFrictionX", "SkinFrictionY", "SkinFrictionZ"), "traction", ""),
    ],
)
def test_components_are_put_together_in_order(names: tuple[str, ...], quantity: str, unit: str) -> None:
    shuffled = dict.fromkeys((names[2], names[0], names[1]), SCALAR)
    guess = best_guess(guess_arrays({}, shuffled), quantity)
    assert guess is not None
    assert (guess.names, guess.at, guess.unit) == (names, "faces", unit)
    assert guess_arrays({}, {names[0]: SCALAR, names[1]: SCALAR}) == ()


def test_the_better_name_wins_whatever_the_order() -> None:
    arrays = {"total_pressure": SCALAR, "p": SCALAR, "Pressure": SCALAR, "CoefPressure": SCALAR}
    for order in (list(arrays), list(arrays)[::-1]):
        guess = best_guess(guess_arrays({name: arrays[name] for name in order}, {}), "pressure")
        assert guess is not None
        assert guess.names == ("Pressure",)


@pytest.mark.parametrize(
    ("quantity", "name", "hint"),
    [
        ("pressure", "PressureStagnation", "total"),
        ("pressure", "p0", "total"),
        ("pressure", "absolute pressure", "absolute"),
        ("pressure", "p [psia]", "absolute"),
        ("pressure", "p_barg", "gauge"),
        ("pressure", "p_m2_s2", "kinematic"),
        ("pressure", "Cp", "coefficient"),
        ("traction", "skin friction coefficient", "coefficient"),
        ("velocity", "RelativeVelocity", "relative"),
    ],
)
def test_names_give_the_kind(quantity: str, name: str, hint: str) -> None:
    assert read_as(quantity, (name,))[1] == {hint}


def test_a_quantity_without_a_vocabulary_is_told_nothing() -> None:
    assert read_as("velocity_gradient", ("gradU [1/s]",)) == ("", frozenset())


def test_an_array_on_both_places_is_said_to_be() -> None:
    guesses = [guess for guess in guess_arrays({"p": SCALAR}, {"p": SCALAR}) if guess.quantity == "pressure"]
    assert [guess.at for guess in guesses] == ["nodes", "faces"]
    assert all(guess.both for guess in guesses)


def test_a_mass_flow_sits_on_faces() -> None:
    assert guess_arrays({"mass flow [kg/s]": SCALAR}, {}) == ()
    guess = best_guess(guess_arrays({}, {"mass flow [kg/s]": SCALAR}), "mass_flux")
    assert guess is not None
    assert guess.unit == "kg/s"


def test_words_and_units_of_names() -> None:
    assert name_words("wallShearStress_X2 é") == ("wall", "shear", "stress", "x", "2")
    assert known_unit("kg/(m s2)") is not None
    assert known_unit("parsec") is None  # a unit, but no word of ours
    assert known_unit("") is None


def test_tags_are_told_from_numbers_and_indices() -> None:
    faces = np.arange(200)
    arrays = {
        "original cell ids": faces,
        "rank": faces % 2,
        "level": faces % 3,
        "count": faces % 5,
        "p": np.where(faces % 2, 1.0, 2.0),
        "zone": (faces % 4).astype(np.float64)[:, None],
        "half": np.where(faces % 2, 0.5, 1.0),
        "names": np.array(["a", "b"])[faces % 2],
        "all one": np.zeros(200, np.int32),
    }
    found = tag_arrays(arrays)
    assert [tag.name for tag in found] == ["names", "zone", "count"]
    assert found[0].tags == ("a", "b")
    assert found[1].tags == (0, 1, 2, 3)
    assert [tag.named for tag in found] == [True, True, False]


def test_tags_as_bytes_read_as_text() -> None:
    (tag,) = tag_arrays({"x": np.array([b"in", b"out", "ü".encode()])})
    assert tag.tags == ("in", "out", "ü")
