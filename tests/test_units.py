"""Units and quantities: against NIST SP 811, against pint, and against what people get wrong."""

import math
import pickle
import subprocess
import sys

import pint
import pytest
from hypothesis import given
from hypothesis import strategies as st
from numpy.testing import assert_allclose

from fluxmesh.errors import UnitError
from fluxmesh.units import Measured, parse_quantity, parse_vector, unit_factor
from fluxmesh.units.expression import parse_unit
from fluxmesh.units.table import UNITS
from fluxmesh.units.wording import described, nearest, quoted
from tests.verification import Verify

# A product of three or four rounded factors is good to a few units in the last place.
ROUNDED = 1e-14

REGISTRY = pint.UnitRegistry()

# names of the table that pint lacks or reads as something else; each is spelled out for it here
FOR_PINT = {
    "gpm": "gallon/minute",
    "GPM": "gallon/minute",
    "lpm": "liter/minute",
    "LPM": "liter/minute",
    "cfm": "foot**3/minute",
    "CFM": "foot**3/minute",
    "lbm": "pound",
    "rev": "turn",
    "psf": "pound_force/foot**2",
    "inWC": "inch_H2O",
    "inWG": "inch_H2O",
    "mH2O": "1000*mmH2O",
    "Nm": "newton*meter",
    "%": "percent",
    "Torr": "torr",
}


@pytest.mark.parametrize("name", sorted(set(UNITS) - {"degC", "degF"}))
def test_the_table_agrees_with_pint(name):
    expected = REGISTRY.Quantity(FOR_PINT.get(name, name)).to_base_units()
    assert_allclose(UNITS[name].factor, expected.magnitude, rtol=ROUNDED)
    powers = {kind.strip("[]"): power for kind, power in expected.dimensionality.items()}
    length, mass, time, temperature, *others = UNITS[name].dimension
    found = {"length": length, "mass": mass, "time": time, "temperature": temperature}
    assert {kind: power for kind, power in found.items() if power} == powers
    assert others == [0, 0, 0]


# NIST Special Publication 811 (2008), appendix B, to the digits computed from the exact definitions
@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("1 lbf", "N", 4.4482216152605),
        ("1 psi", "Pa", 6894.7572931684),
        ("1 slug", "kg", 14.593902937206),
        ("1 gpm", "m^3/s", 6.30901964e-5),
        ("1 lbf ft", "N m", 1.3558179483314),
        ("1 lbf.ft", "N m", 1.3558179483314),
        ("1 lbf·ft", "N m", 1.3558179483314),
        ("1 lbf-ft", "N m", 1.3558179483314),
        ("1 inH2O", "Pa", 249.08891),
        ("1 slug ft/(lbf s^2)", "", 1.0),
        ("32.17404855643 lbm.ft/s2", "N", 4.4482216152605),
    ],
)
def test_values_of_nist_sp_811(verify: Verify, text, unit, value):
    assert_allclose(float(parse_quantity(text, unit, "k")), value, rtol=1e-12)  # the printed digits
    verify(
        what=f"{text} in {unit or 'no unit'}",
        source="NIST Special Publication 811 (2008), appendix B",
        expected=value,
        got=float(parse_quantity(text, unit, "k")),
        unit=unit,
        tolerance=2e-12,
        relative=True,
        why="the printed digits",
        kind="property",
    )


# worked by hand from the definitions of the units
@pytest.mark.parametrize(
    ("text", "unit", "value"),
    [
        ("310 kPa", "Pa", 310e3),
        ("310kPa", "Pa", 310e3),
        ("-3.5e2 mbar", "Pa", -35000.0),
        ("−2 bar", "Pa", -2e5),
        (".5 MPa", "Pa", 5e5),
        ("42 m^3/h", "m^3/s", 42 / 3600),
        ("42 m3/h", "m^3/s", 42 / 3600),
        ("42 m³/h", "m^3/s", 42 / 3600),
        ("42 m**3/hr", "m^3/s", 42 / 3600),
        ("12 L/min", "m^3/s", 2e-4),
        ("100 ft^3/min", "m^3/s", 100 * 0.3048**3 / 60),
        ("100 cfm", "m^3/s", 100 * 0.3048**3 / 60),
        ("360 lb/h", "kg/s", 0.045359237),
        ("3 kg s^-1", "kg/s", 3.0),
        ("3 kg.s-1", "kg/s", 3.0),
        ("3 kg⋅s⁻¹", "kg/s", 3.0),
        ("998.2 kg/m³", "kg/m^3", 998.2),
        ("10 ft/s", "m/s", 3.048),
        ("15 N.m", "N m", 15.0),
        ("15 Nm", "N m", 15.0),
        ("9.80665 m/s/s", "m/s^2", 9.80665),
        ("287.05 J/(kg K)", "J/(kg K)", 287.05),
        ("287.05 J kg-1 K-1", "J/(kg K)", 287.05),
        ("1450 rpm", "1/s", 1450 * 2 * math.pi / 60),
        ("50 1/s", "1/s", 50.0),
        ("180 deg", "rad", math.pi),
        ("180°", "rad", math.pi),
        ("2 %", "", 0.02),
        ("0.02", "", 0.02),
        ("20 degC", "K", 293.15),
        ("20 °C", "K", 293.15),
        ("20 deg C", "K", 293.15),
        ("68 degF", "K", 293.15),
        ("1 W/(m^2 degC)", "W/(m^2 K)", 1.0),
        ("5 µm", "m", 5e-6),
        ("2 furlong", "m", 2 * 201.168),  # through the registry; US survey foot, 2e-6 longer
        (310, "Pa", 310.0),
        (310.5, "Pa", 310.5),
    ],
)
def test_quantities(text, unit, value):
    rtol = 3e-6 if "furlong" in str(text) else ROUNDED
    assert_allclose(float(parse_quantity(text, unit, "k")), value, rtol=rtol)


@pytest.mark.parametrize(
    ("text", "unit", "value", "half_width"),
    [
        ("998.2 +/- 0.5 kg/m^3", "kg/m^3", 998.2, 0.5),
        ("998.2±0.5 kg/m^3", "kg/m^3", 998.2, 0.5),
        ("(998.2 +/- 0.5) kg/m^3", "kg/m^3", 998.2, 0.5),
        ("998.2 +- 0.5 kg/m^3", "kg/m^3", 998.2, 0.5),
        ("310 kPa +/- 2 kPa", "Pa", 310e3, 2e3),
        ("310 kPa +/- 20 mbar", "Pa", 310e3, 2e3),
        ("-310 kPa +/- 1 %", "Pa", -310e3, 3.1e3),
        ("20 +/- 0.5 degC", "K", 293.15, 0.5),
        ("68 +/- 1.8 degF", "K", 293.15, 1.0),
        ("20 degC +/- 0.5 K", "K", 293.15, 0.5),
        ("50 +/- 1 %", "", 0.5, 0.01),
        ("50 % +/- 1 %", "", 0.5, 0.01),
        ("10 deg +/- 10 %", "rad", math.radians(10), math.radians(1)),
        ("0.5 +/- 0.1", "", 0.5, 0.1),
    ],
)
def test_plus_minus(text, unit, value, half_width):
    measured = parse_quantity(text, unit, "k")
    assert_allclose([measured.value, measured.half_width], [value, half_width], rtol=ROUNDED)


@pytest.mark.parametrize(
    ("text", "unit", "message"),
    [
        (
            "3 kg",
            "Pa",
            r'^k: "3 kg" is a mass\. A pressure or stress is needed, such as "310 kPa" or a bare number',
        ),
        ("3 m^2", "m", r"is an area\. A length is needed, such as \"25 mm\""),
        (
            "3 Pa",
            "m^2/s^2",
            r"is a pressure or stress\. A kinematic pressure \(pressure over density\) is needed",
        ),
        ("3 kg/s^5", "Pa", r"is a quantity in kg s\^-5\."),
        ("3 lb", "N", r"is a mass \(did you mean lbf\?\)"),
        ("3 kg", "N", r"is a mass \(did you mean kgf\?\)"),
        ("3 pa", "Pa", r"is a time \(did you mean Pa\?\)"),
        ("20 C", "K", r"did you mean degC\?"),
        ("3 kg", "K kg^2", r"a mass\. A quantity in kg\^2 K is needed, such as \"2\.5 K kg\^2\""),
        ("3 kg", "rad", r'is a mass\. An angle is needed, such as "5 deg" or "0\.1 rad"'),
        ("3 kg", "", r"is a mass\. A plain number is needed, such as 0\.5"),
        ("3 kpa", "Pa", r'"kpa" is not a known unit \(did you mean kPa\?\)'),
        ("3 furlog/s", "m/s", r'"furlog" in "furlog/s" is not a known unit'),
        ("310", "Pa", r'"310" has no unit\. A pressure'),
        ("", "Pa", r'"" breaks off'),
        ("kPa", "Pa", r"does not start with a number"),
        ("1,5 kPa", "Pa", r"has a comma in a number\. Write a point"),
        ("1_0 kPa", "Pa", r'"_0 kPa" is not a unit, at "0 kPa"'),
        ("1 kPa +/- 2 +/- 3 kPa", "Pa", r"more than one plus-minus"),
        ("1 +/- -2 kPa", "Pa", r"negative half width"),
        (
            "1 kPa +/- 2",
            "Pa",
            r'does not say the unit of its half width\. Write the unit last, such as "1 \+/- 2 kPa"',
        ),
        ("1 +/-", "Pa", r"breaks off"),
        ("20 degC +/- 1 %", "K", r"share of a temperature"),
        ("5 +/- 1 % kPa", "Pa", r"is not a unit, at"),
        ("5 percent kPa", "Pa", r'"percent" in "percent kPa" is not a known unit'),
        ("1e999 Pa", "Pa", r"is not a finite number"),
        ("1 +/- 1e999 Pa", "Pa", r"is not a finite number"),
        (
            "5 psig",
            "Pa",
            r"is a unit and a kind of pressure in one\. Write psi; gauge or absolute goes with kind",
        ),
        ("5 psia", "Pa", r"Write psi;"),
        ("5 barg", "Pa", r"Write bar;"),
        ("5 bara", "Pa", r"Write bar;"),
        ("5 bar(g)", "Pa", r"Write bar;"),
        ("5 kPa abs", "Pa", r"Write kPa;"),
        ("5 inH2O gauge", "Pa", r"Write inH2O;"),
        ("5 scfm", "m^3/s", r"an amount at a reference state"),
        ("5 Nm3/h", "m^3/s", r"an amount at a reference state"),
        ("5 Nm³/h", "m^3/s", r"an amount at a reference state"),
        ("5 NL/min", "m^3/s", r"an amount at a reference state"),
        ("5 J/kg K", "J/(kg K)", r"has a product after \"/\", which can be read in two ways"),
        ("5 J/kg*K", "J/(kg K)", r"has a product after"),
        ("5 J/(kg K", "J/(kg K)", r"a bracket is not closed"),
        ("5 J/kg)", "J/kg", r'is not a unit, at "\)"'),
        ("5 m^", "m", r'is not a unit, at "\^"'),
        ("5 m/", "m", r"it breaks off"),
        ("5 m^999999999", "m", r"exponents go from -9 to 9"),
        ("5 m^10", "m", r"exponents go from -9 to 9"),
        ("5 m**9**9", "m", r"is not a unit"),
        ("5 (((mm^9)^9)^9)^9", "m", r"beyond the range of numbers"),
        ("5 (((mm^9)^9)^9)^-9", "m", r"beyond the range of numbers"),
        ("5 4 kPa", "Pa", r'is not a unit, at "4 kPa"'),
        ("5 dBm", "W", r"is not a known unit"),
        ("5 nan", "Pa", r"is not a known unit"),
        ("5 __import__('os')", "Pa", r"is not a unit, at"),
        ("5 m;s", "Pa", r'is not a unit, at ";s"'),
        ("5 m\x1b[31m", "m", r"\\u001b"),
        ("5 " + "m" * 100, "m", r"is too long for a unit"),
        ("5" * 200, "m", r"is too long for a quantity"),
        (True, "Pa", r"found true\. A pressure"),
        (None, "Pa", r"found nothing"),
        ([1.0], "Pa", r"found a list of 1"),
        ({"value": 1}, "Pa", r"found a table"),
        (math.nan, "Pa", r"found the number nan, which is not finite"),
        (math.inf, "Pa", r"which is not finite"),
        (10**400, "Pa", r"a number of many digits, which is not finite"),
        (1j, "Pa", r"found a complex"),
    ],
)
def test_what_is_no_quantity(text, unit, message):
    with pytest.raises(UnitError, match=message) as caught:
        parse_quantity(text, unit, "k")
    assert str(caught.value).startswith("k: ")
    assert str(pickle.loads(pickle.dumps(caught.value))) == str(caught.value)


def test_a_measured_value_is_kept_as_it_is():
    measured = Measured(3.0, 0.1)
    assert parse_quantity(measured, "Pa", "k") is measured
    assert float(measured) == 3.0
    assert Measured(3.0) == Measured(3.0, 0.0)


@pytest.mark.parametrize("numbers", [(math.nan, 0.0), (1.0, math.inf), (1.0, -0.1)])
def test_what_is_no_measured_value(numbers):
    with pytest.raises(UnitError, match=r"is no measured value"):
        Measured(*numbers)


def test_vectors():
    assert parse_vector([1, 2.5, -3], "m", "k") == (1.0, 2.5, -3.0)
    assert_allclose(
        parse_vector({"value": [1, 2, 3], "unit": "ft/s"}, "m/s", "k"), [0.3048, 0.6096, 0.9144], rtol=ROUNDED
    )


@pytest.mark.parametrize(
    ("value", "message"),
    [
        ([1, 2], r"^k: found a list of 2, not a vector of 3 components\. Write \[x, y, z\] in m, or"),
        ("1 m", r'found "1 m", not a vector of 3 components'),
        (5, r"found the number 5, not a vector"),
        ([1, 2, "3 m"], r'a component is "3 m", not a number'),
        ([1, 2, True], r"a component is true, not a number"),
        ([1, 2, math.nan], r"a component is not finite"),
        ([1, 2, 10**400], r"a component is not finite"),
        ({"value": [1, 2, 3]}, r'found a table with "value"'),
        ({}, r"found a table with nothing"),
        ({"value": [1, 2, 3], "unit": 3}, r"the unit is the number 3"),
        (
            {"value": [1, 2, 3], "unit": "kg"},
            r'found "kg", a unit of mass\. A unit of length is needed, such as "m"',
        ),
        ({"value": [1, 2], "unit": "mm"}, r"found a list of 2"),
    ],
)
def test_what_is_no_vector(value, message):
    with pytest.raises(UnitError, match=message):
        parse_vector(value, "m", "k")


def test_factors_of_array_units():
    assert unit_factor("mm", "m", "k") == 1e-3
    assert unit_factor("m^2/s^2", "m^2/s^2", "k") == 1.0
    assert_allclose(unit_factor("degR", "K", "k"), 5 / 9, rtol=ROUNDED)


@pytest.mark.parametrize(
    ("unit", "needed", "message"),
    [
        (
            "kg",
            "Pa",
            r'^k: found "kg", a unit of mass\. A unit of pressure or stress is needed, such as "Pa"',
        ),
        ("parsnip", "Pa", r'^k: "parsnip" is not a known unit.*\. A unit of pressure or stress is needed'),
        ("", "Pa", r'^k: found "", a unit of plain number or angle'),
        ("degC", "K", r'"degC" starts from another zero, so no factor takes it to K\. Export in K'),
    ],
)
def test_what_is_no_array_unit(unit, needed, message):
    with pytest.raises(UnitError, match=message):
        unit_factor(unit, needed, "k")


# units that both our grammar and pint's read in the same way, put together at random
FACTORS = st.tuples(
    st.sampled_from(sorted(set(UNITS) - set(FOR_PINT) - {"degC", "degF"})), st.integers(-3, 3).filter(bool)
)


@given(st.lists(FACTORS, min_size=1, max_size=4), st.floats(-1e6, 1e6, allow_subnormal=False))
def test_products_agree_with_pint(factors, number):
    text = " ".join(f"{name}^{power}" for name, power in factors)
    expected = REGISTRY.Quantity(1.0, text.replace("^", "**").replace(" ", "*")).to_base_units()
    unit = parse_unit(text)
    assert_allclose(unit.factor, expected.magnitude, rtol=1e-13)  # up to twelve rounded factors
    powers = [expected.dimensionality.get(kind, 0) for kind in ("[length]", "[mass]", "[time]", "[temperature]")]
    assert list(unit.dimension[:4]) == powers
    quantity = parse_quantity(f"{number!r} {text}", text, "k")
    assert_allclose(quantity.value, number * expected.magnitude, rtol=1e-13, atol=0.0)


@given(st.lists(FACTORS, min_size=1, max_size=3), st.lists(FACTORS, min_size=1, max_size=3))
def test_a_bracket_below_the_line_divides_as_a_whole(above, below):
    top, bottom = (" ".join(f"{name}^{power}" for name, power in part) for part in (above, below))
    whole = parse_unit(f"({top})/({bottom})")
    assert_allclose(whole.factor, parse_unit(top).factor / parse_unit(bottom).factor, rtol=1e-13)


PIECES = [*"5m^/()-%.e°³g ±", "kPa", "**", "+/-", "H2O", "999", "lambda"]


@given(st.one_of(st.text(max_size=80), st.lists(st.sampled_from(PIECES), max_size=12).map("".join)))
def test_any_text_is_a_quantity_or_a_unit_error(text):
    for call in (lambda: float(parse_quantity(text, "Pa", "k")), lambda: unit_factor(text, "Pa", "k")):
        try:
            outcome = call()
        except UnitError as error:
            outcome = str(error)
        if isinstance(outcome, str):
            assert outcome.startswith("k: ")
            assert outcome.isprintable()
        else:
            assert math.isfinite(outcome)


def test_common_units_do_not_start_the_registry():
    program = (
        "import sys; from fluxmesh.units import parse_quantity; parse_quantity('42 m^3/h', 'm^3/s', 'k');"
        "assert 'pint' not in sys.modules;"
        "parse_quantity('1 furlong', 'm', 'k'); assert 'pint' in sys.modules"
    )
    subprocess.run([sys.executable, "-c", program], check=True)


def test_words_for_messages():
    assert quoted("a" * 100) == '"' + "a" * 60 + '..."'
    assert described(10**100) == "a number of many digits"
    assert nearest("PRESSURE", ["velocity", "pressure"]) == "pressure"
    assert nearest("presure", ["velocity", "pressure"]) == "pressure"
    assert nearest("q", ["p", "qq"]) is None
