"""Properties by name: against the published equations of water and air, and what cannot be had."""

from __future__ import annotations

import sys

import pytest
from numpy.testing import assert_allclose

from fluxmesh.errors import FieldError
from fluxmesh.field.fill import fill_fluid
from fluxmesh.field.substance import SUBSTANCES, substance
from tests.verification import Verify

ATMOSPHERE = 101325.0


# ---- published values -----------------------------------------------------------------------


def test_water_is_that_of_iapws(verify: Verify) -> None:
    # IAPWS-95 (density, sound) and IAPWS R12-08 (viscosity) at 20 °C and 101325 Pa, computed with another program
    found = substance("water", 293.15, ATMOSPHERE)
    assert found.state == "liquid"
    assert_allclose(found.density, 998.20715046794, rtol=1e-10)
    assert found.viscosity is not None
    assert_allclose(found.viscosity, 1.0015961431e-3, rtol=1e-9)
    assert_allclose(found.sound_speed, 1482.3461749, rtol=1e-9)
    # IAPWS-IF97 is another formulation: it agrees to some 1e-6
    assert_allclose(found.density, 998.20609247, rtol=2e-6)
    # heat capacity 4.1841 kJ/(kg K): IAPWS-95 at 20 °C, in any steam table (from memory)
    assert_allclose(found.heat_capacity, 4184.1, rtol=3e-5)
    verify(
        what="Water at 20 °C and 101325 Pa: density",
        source="IAPWS-95, computed with another program",
        expected=998.20715046794,
        got=found.density,
        unit="kg/m³",
        tolerance=1e-7,
        why="figure of 14 digits, iterated",
        kind="property",
    )
    verify(
        what="Water at 20 °C and 101325 Pa: viscosity",
        source="IAPWS R12-08, computed with another program",
        expected=1.0015961431e-3,
        got=found.viscosity,
        unit="Pa s",
        tolerance=1e-12,
        why="figure of 11 digits",
        kind="property",
    )
    verify(
        what="Water at 20 °C and 101325 Pa: speed of sound",
        source="IAPWS-95, computed with another program",
        expected=1482.3461749,
        got=found.sound_speed,
        unit="m/s",
        tolerance=1e-6,
        why="figure of 11 digits",
        kind="property",
    )


@pytest.mark.parametrize(("temperature", "volume"), [(300.0, 0.100215168e-2), (500.0, 0.120241800e-2)])
def test_water_under_pressure(verify: Verify, temperature: float, volume: float) -> None:
    # IAPWS-IF97, table 5 (from memory): specific volume at 3 MPa; IAPWS-95 differs by a few 1e-5
    assert_allclose(1 / substance("water", temperature, 3e6).density, volume, rtol=3e-5)
    verify(
        what=f"Water at {temperature:g} K and 3 MPa: specific volume",
        source="IAPWS-IF97, table 5",
        memory=True,
        expected=volume,
        got=1 / substance("water", temperature, 3e6).density,
        unit="m³/kg",
        tolerance=3e-5,
        relative=True,
        why="IAPWS-95 is another formulation",
        kind="property",
    )


def test_viscosity_of_water_at_the_published_point(verify: Verify) -> None:
    # IAPWS R12-08, table 4: 889.735100 µPa s at 298.15 K and 998 kg/m³, which is at 2.217134886 MPa
    found = substance("water", 298.15, 2217134.885868323)
    assert_allclose(found.density, 998, rtol=1e-12)
    assert found.viscosity is not None
    assert_allclose(found.viscosity, 889.735100e-6, rtol=1e-9)
    verify(
        what="Water at 298.15 K and 998 kg/m³: viscosity",
        source="IAPWS R12-08, table 4",
        expected=889.735100e-6,
        got=found.viscosity,
        unit="Pa s",
        tolerance=1e-9,
        relative=True,
        why="printed with nine digits",
        kind="property",
    )


def test_air_is_real_air_not_the_standard_atmosphere(verify: Verify) -> None:
    # ISO 2533 at sea level: 1.225 kg/m³ and 340.294 m/s, from the ideal gas with R = 287.05287 and ratio 1.4.
    # Real air (the library's) is 1.2255390214: near, and not to be mixed with it.
    found = substance("air", 288.15, ATMOSPHERE)
    assert_allclose(found.density, 1.2255390214, rtol=1e-9)
    assert 3e-4 < found.density / 1.225 - 1 < 6e-4
    assert_allclose(found.sound_speed, 340.29398803, rtol=5e-4)
    # 1.458e-6 T^1.5 / (T + 110.4), the viscosity of ISO 2533, is an older fit
    assert found.viscosity is not None
    assert_allclose(found.viscosity, 1.7893802781e-5, rtol=5e-3)
    assert_allclose(found.gas_constant, 287.05287, rtol=2e-5)
    assert_allclose(found.ideal_heat_ratio, 1.4, rtol=3e-4)
    verify(
        what="Air at 288.15 K and 101325 Pa: density",
        source="ISO 2533 (ideal gas): 1.225",
        expected=1.225,
        got=found.density,
        unit="kg/m³",
        tolerance=6e-4,
        relative=True,
        why="air is no ideal gas: 1.2255390",
        kind="property",
    )
    verify(
        what="Air at 288.15 K and 101325 Pa: speed of sound",
        source="ISO 2533 (ideal gas)",
        expected=340.29398803,
        got=found.sound_speed,
        unit="m/s",
        tolerance=5e-4,
        relative=True,
        why="air is no ideal gas",
        kind="property",
    )
    verify(
        what="Air at 288.15 K: viscosity",
        source="ISO 2533: 1.458e-6 T^1.5 / (T + 110.4)",
        expected=1.7893802781e-5,
        got=found.viscosity,
        unit="Pa s",
        tolerance=5e-3,
        relative=True,
        why="an older fit",
        kind="property",
    )


@pytest.mark.parametrize(
    ("name", "molar_mass"),
    # standard atomic weights (IUPAC 2021, abridged), g/mol
    [("water", 18.015), ("nitrogen", 28.014), ("methane", 16.043), ("helium", 4.0026), ("carbon dioxide", 44.009)],
)
def test_gas_constant_is_the_universal_one_over_the_molar_mass(verify: Verify, name: str, molar_mass: float) -> None:
    # the constant of the SI is 8.31446261815324; each equation of state keeps the one it was fitted with
    found = substance(name, 400.0, ATMOSPHERE)
    assert_allclose(found.gas_constant, 8.31446261815324 / (molar_mass * 1e-3), rtol=1e-4)
    verify(
        what=f"Gas constant of {name}",
        source="8.31446261815324 J/(mol K) (SI 2019) over the molar mass (IUPAC 2021, abridged)",
        memory=True,
        expected=8.31446261815324 / (molar_mass * 1e-3),
        got=found.gas_constant,
        unit="J/(kg K)",
        tolerance=1e-4,
        relative=True,
        why="abridged molar masses; each equation of state has a constant of its own",
        kind="property",
    )


@pytest.mark.parametrize("name", ["argon", "helium", "neon", "krypton", "xenon"])
def test_gases_of_single_atoms_have_five_thirds(verify: Verify, name: str) -> None:
    # kinetic theory: cp0 = 5/2 R
    found = substance(name, 350.0, ATMOSPHERE)
    assert_allclose(found.ideal_heat_ratio, 5 / 3, rtol=1e-9)
    assert found.state == "gas"
    verify(
        what=f"Ratio of heats of {name}",
        source="kinetic theory: 5/3",
        expected=5 / 3,
        got=found.ideal_heat_ratio,
        tolerance=2e-9,
        why="the constants of the equation of state",
        kind="property",
    )


@pytest.mark.parametrize("name", sorted(set(SUBSTANCES) - {"steam"}))
def test_every_name_is_known_to_the_library(name: str) -> None:
    found = substance(name, 300.0, ATMOSPHERE)
    assert found.name == name
    # the law of corresponding states does not let a gas stray far at one atmosphere, nor a liquid come near
    assert (0.9 < found.compressibility < 1.01) is (found.state == "gas")
    assert found.viscosity is None or 5e-6 < found.viscosity < 2e-3


# ---- states ---------------------------------------------------------------------------------


def test_states_are_told_apart() -> None:
    assert substance("water", 500.0, ATMOSPHERE).state == "gas"
    assert substance("water", 500.0, 30e6).state == "liquid"  # above the critical pressure, cold
    assert substance("water", 900.0, 30e6).state == "supercritical"
    assert substance("air", 300.0, ATMOSPHERE).state == "gas"  # above the critical temperature
    assert substance("water", 272.0, 50e6).state == "liquid"  # pressure keeps ice away


def test_case_and_spaces_of_a_name_do_not_matter() -> None:
    assert substance(" Carbon Dioxide ", 300.0, 1e5).name == "carbon dioxide"
    assert substance("r134A", 300.0, 1e5).name == "R134a"


def test_steam_is_the_gas() -> None:
    assert substance("steam", 400.0, ATMOSPHERE).density == substance("water", 400.0, ATMOSPHERE).density
    with pytest.raises(FieldError, match=r"fluid.name: steam at 293.15 K and 101325 Pa absolute is liquid"):
        substance("steam", 293.15, ATMOSPHERE)


def test_the_note_says_state_values_and_source() -> None:
    import CoolProp

    note = substance("water", 293.15, ATMOSPHERE).note()
    assert note == (
        "water at 293.15 K and 101325 Pa absolute is liquid: density 998.207 kg/m³, viscosity 0.0010016 Pa s, "
        f"heat capacity 4184.05 J/(kg K), from CoolProp {CoolProp.__version__}"
    )
    assert "no viscosity" in substance("neon", 300.0, ATMOSPHERE).note()


@pytest.mark.parametrize(
    ("name", "temperature", "pressure", "message"),
    [
        ("watr", 293.15, 1e5, r'fluid.name: found "watr".*Did you mean "water"\? Known are acetone, air'),
        ("crude oil", 293.15, 1e5, r'fluid.name: found "crude oil".*properties are known of. Known are acetone'),
        ("water", 0.0, 1e5, r"fluid.temperature: found 0 K. The absolute temperature must be above zero"),
        ("water", float("nan"), 1e5, r"fluid.temperature: found nan K"),
        ("water", 293.15, -3.0, r"fluid.pressure: found -3 Pa. The absolute pressure must be above zero"),
        ("water", 293.15, float("inf"), r"fluid.pressure: found inf Pa"),
        ("water", 2400.0, 1e5, r"fluid.temperature: 2400 K is outside the range of water.* up to 2000 K"),
        ("water", 300.0, 1.2e9, r"fluid.pressure: 1.2e\+09 Pa is outside the range of water.* up to 1e\+09 Pa"),
        ("water", 270.0, ATMOSPHERE, r"fluid.temperature: 270 K is outside.*fluid from 273.153 K at this pressure"),
        ("carbon dioxide", 200.0, ATMOSPHERE, r"fluid.temperature: 200 K is outside .*from 216.592 K"),
        ("sulfur dioxide", 190.0, ATMOSPHERE, r"fluid.temperature: 190 K is outside .*from 197.7 K"),
        # boiling: the saturation pressure at 373.124 K is one atmosphere
        ("water", 373.124295847667, ATMOSPHERE, r"fluid.name: water at 373.124 K .*may be liquid, gas, or both"),
        ("steam", 373.124295847667, ATMOSPHERE, r"fluid.name: steam at 373.124 K .*may be liquid, gas, or both"),
        # air is a mixture: between 78.9 K and 81.7 K it boils
        ("air", 80.0, ATMOSPHERE, r"fluid.name: air at 80 K .*may be liquid, gas, or both"),
    ],
)
def test_what_cannot_be_had(name: str, temperature: float, pressure: float, message: str) -> None:
    with pytest.raises(FieldError, match=message):
        substance(name, temperature, pressure)


def test_a_state_that_the_library_fails_at_is_told_in_its_words(monkeypatch: pytest.MonkeyPatch) -> None:
    from CoolProp import CoolProp as equations

    class Stuck:
        """A fluid whose equation is not solved."""

        def __init__(self, *names: str) -> None:
            self.fluid = real(*names)

        def update(self, *_: object) -> None:
            raise ValueError("no root found")

        def __getattr__(self, name: str) -> object:
            return getattr(self.fluid, name)

    real = equations.AbstractState
    monkeypatch.setattr(equations, "AbstractState", Stuck)
    with pytest.raises(FieldError, match=r"fluid.name: the library has no state of water at .*\(no root found\)"):
        substance("water", 293.15, 1e5)


def test_without_the_library(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "CoolProp", None)  # as if it were not installed
    with pytest.raises(FieldError, match=r'CoolProp, which is not installed. .*pip install "fluxmesh\[properties\]"'):
        substance("water", 293.15, 1e5)


# ---- what a case takes from there -----------------------------------------------------------

LIQUID = ("density", "viscosity", "heat_capacity")
GAS = ("gas_constant", "heat_ratio", "heat_capacity", "viscosity")


def test_a_liquid_is_filled() -> None:
    done = fill_fluid("water", dict.fromkeys(LIQUID), temperature=293.15, ambient=ATMOSPHERE)
    found = substance("water", 293.15, ATMOSPHERE)
    assert dict(done.values) == {
        "density": found.density,
        "viscosity": found.viscosity,
        "heat_capacity": found.heat_capacity,
    }
    assert done.filled == LIQUID
    assert done.notes[0] == found.note()
    assert done.notes[1].startswith("The case takes from there: density 998.207 kg/m³, viscosity 0.0010016 Pa s and")


def test_pressure_goes_before_the_ambient_pressure() -> None:
    done = fill_fluid("water", {"density": None}, temperature=300.0, pressure=3e6, ambient=ATMOSPHERE)
    assert_allclose(1 / float(done.values["density"] or 0), 0.100215168e-2, rtol=3e-5)


def test_what_is_given_stays_and_a_difference_is_told() -> None:
    done = fill_fluid("water", {"density": 990.0, "viscosity": None}, temperature=293.15, ambient=ATMOSPHERE)
    assert done.values["density"] == 990.0
    assert done.filled == ("viscosity",)
    assert set(done.values) == {"density", "viscosity"}
    assert done.notes[-1] == "density is given as 990 kg/m³, -0.82% from that of water"
    near = fill_fluid("water", {"density": 998.2}, temperature=293.15, ambient=ATMOSPHERE)
    assert near.filled == ()
    assert len(near.notes) == 1


def test_an_ideal_gas_is_filled_without_contradiction() -> None:
    done = fill_fluid("air", dict.fromkeys((*GAS, "density")), temperature=600.0, pressure=4e5, ideal_gas=True)
    assert done.values["density"] is None  # the law gives it
    assert done.filled == GAS
    constant, ratio, capacity = (float(done.values[key] or 0) for key in GAS[:3])
    # Mayer's relation
    assert_allclose(capacity, ratio * constant / (ratio - 1), rtol=1e-14)
    assert capacity == substance("air", 600.0, 4e5).ideal_heat_capacity
    # gas tables of air at 600 K (low pressure): cp 1.051 kJ/(kg K), ratio 1.376 (from memory)
    assert_allclose(capacity, 1051, rtol=1e-3)
    assert_allclose(ratio, 1.376, rtol=1e-3)
    assert done.notes[-1] == "Real air is 0.15% lighter there than an ideal gas"


@pytest.mark.parametrize(
    ("given", "capacity", "ratio"),
    [
        ({"heat_ratio": 1.4}, 287.05 * 3.5, 1.4),
        ({"heat_capacity": 1005.0}, 1005.0, 1005.0 / (1005.0 - 287.05)),
    ],
)
def test_of_an_ideal_gas_one_given_value_decides_the_other(
    given: dict[str, float], capacity: float, ratio: float
) -> None:
    asked = {**dict.fromkeys(GAS), "gas_constant": 287.05, **given}
    done = fill_fluid("air", asked, temperature=600.0, ambient=ATMOSPHERE, ideal_gas=True)
    assert_allclose(done.values["heat_capacity"], capacity, rtol=1e-14)
    assert_allclose(done.values["heat_ratio"], ratio, rtol=1e-14)
    assert any(note.startswith(f"{next(iter(given)).replace('_', ' ')} is given as") for note in done.notes)


def test_a_gas_far_from_ideal_is_told() -> None:
    done = fill_fluid("carbon dioxide", {"gas_constant": None}, temperature=310.0, pressure=5e6, ideal_gas=True)
    # the cubic equation of Peng and Robinson (1976, from memory; critical point 304.13 K, 7.377 MPa, acentric factor
    # 0.224) has 0.7177 here; it is good to some per cent
    assert_allclose(done.substance.compressibility, 0.7177, rtol=0.03)
    assert done.notes[-1].startswith("Real carbon dioxide is 2")
    assert done.notes[-1].endswith("% denser there than an ideal gas")


@pytest.mark.parametrize(
    ("name", "options", "message"),
    [
        ("water", {"temperature": None, "ambient": 1e5}, r"fluid.temperature: missing, and the properties of water"),
        ("water", {"temperature": 300.0}, r"fluid.pressure: missing, and the properties of water"),
        ("water", {"temperature": 300.0, "ambient": 1e5, "ideal_gas": True}, r"fluid.law: water at 300 K .*is liquid"),
    ],
)
def test_what_cannot_be_filled(name: str, options: dict[str, float | None], message: str) -> None:
    with pytest.raises(FieldError, match=message):
        fill_fluid(name, dict.fromkeys(GAS), **options)


def test_impossible_heats_are_refused() -> None:
    with pytest.raises(FieldError, match=r"fluid.heat_capacity: found 250 J/\(kg K\), and the gas constant is 287"):
        fill_fluid("air", {"heat_capacity": 250.0}, temperature=300.0, ambient=1e5, ideal_gas=True)
    with pytest.raises(FieldError, match=r"fluid.heat_ratio: found 1. The ratio of the heats is above 1"):
        fill_fluid("air", {"heat_ratio": 1.0}, temperature=300.0, ambient=1e5, ideal_gas=True)
