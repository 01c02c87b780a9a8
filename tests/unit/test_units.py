"""Quantities: every spelling that is taken, every slip that is refused, and text that reads back."""

import math
import subprocess
import sys
from typing import Annotated, Any

import jsonschema
import pytest
from hypothesis import given
from hypothesis import strategies as st
from pydantic import BaseModel, ValidationError

from rulecheck.dimensions import BASES
from rulecheck.errors import QuantityError
from rulecheck.units import (
    NUMBER,
    Dimension,
    Spread,
    Unit,
    dimension_of,
    format_quantity,
    parse_any_quantity,
    parse_quantity,
)

# Values are the decimals themselves: a prefix is a power of ten (SI brochure, 9th edition, table 7).
SPELLINGS = [
    ("4.7 kohm", "ohm", 4700.0),
    ("4.7kohm", "ohm", 4700.0),
    ("4.7 kΩ", "ohm", 4700.0),
    ("4.7 k\u2126", "ohm", 4700.0),
    ("4.7e3 ohm", "ohm", 4700.0),
    ("0.0047e3 kohm", "ohm", 4700.0),
    ("10 mohm", "ohm", 0.01),
    ("10 Mohm", "ohm", 1e7),
    ("0 ohm", "ohm", 0.0),
    ("10 uA", "A", 10e-6),
    ("10 µA", "A", 10e-6),
    ("10 μA", "A", 10e-6),
    ("25 fA", "A", 25e-15),
    ("1e3 zA", "A", 1e-18),
    ("-0.5 mV", "V", -0.5e-3),
    ("\u22120.5 mV", "V", -0.5e-3),
    ("+15 V", "V", 15.0),
    (".5 V", "V", 0.5),
    ("5. V", "V", 5.0),
    ("  5\u00a0V ", "V", 5.0),
    ("-40 degC", "degC", 233.15),
    ("25°C", "degC", 298.15),
    ("25 ℃", "degC", 298.15),
    ("298.15 K", "degC", 298.15),
    ("10 K", "K", 10.0),
    ("1 mK", "K", 1e-3),
    ("25 ppm/K", "ppm/K", 25e-6),
    ("25 ppm/°C", "ppm/K", 25e-6),
    ("0.33 %/K", "ppm/K", 0.0033),
    ("3e-3 1/K", "1/K", 3e-3),
    ("0.1 %", "%", 1e-3),
    ("500 ppm", "%", 5e-4),
    ("0.1 %", "1", 1e-3),
    ("320", "1", 320.0),
    ("2 nV/sqrt(Hz)", "V/sqrt(Hz)", 2e-9),
    ("2 nV/√Hz", "V/sqrt(Hz)", 2e-9),
    ("1 pA/sqrt(Hz)", "A/sqrt(Hz)", 1e-12),
    ("13 V/us", "V/us", 13e6),
    ("13 V/µs", "V/us", 13e6),
    ("13e6 V/s", "V/us", 13e6),
    ("150 K/W", "K/W", 150.0),
    ("150 °C/W", "K/W", 150.0),
    ("2 V/K", "V/K", 2.0),
    ("2 uV/K", "V/K", 2e-6),
    ("100 dB", "dB", 1e5),  # 20 dB a decade of voltage (IEC 60027-3)
    ("-40 dB", "dB", 0.01),
    ("110 dB", "1", 10.0**5.5),
    ("55 deg", "deg", 55.0),
    ("55°", "deg", 55.0),
    ("3 MHz", "Hz", 3e6),
    ("0.6 ns", "s", 0.6e-9),
    ("0.25 W", "W", 0.25),
    ("2 mS", "S", 2e-3),
]

# IEC 60062. Resistors after the published list R47, 4R7, 470R, 4K7, 47K, 47K3, 470K, 4M7;
# of the capacitors 2n2 is published, the others from memory of the standard.
LETTER_CODES = [
    ("R47", "R", 0.47),
    ("0R47", "R", 0.47),
    ("4R7", "R", 4.7),
    ("470R", "R", 470.0),
    ("4K7", "R", 4700.0),
    ("47K", "R", 47e3),
    ("47K3", "R", 47.3e3),
    ("470K", "R", 470e3),
    ("2M2", "R", 2.2e6),
    ("4M7", "R", 4.7e6),
    ("1G", "R", 1e9),
    ("p33", "F", 0.33e-12),
    ("4p7", "F", 4.7e-12),
    ("n47", "F", 0.47e-9),
    ("2n2", "F", 2.2e-9),
    ("4n7", "F", 4.7e-9),
    ("4µ7", "F", 4.7e-6),
    ("4u7", "F", 4.7e-6),
    ("m47", "F", 0.47e-3),
    ("100n", "F", 100e-9),
]

# Text, unit, letter code, and what the message must say: the find, the expectation, the cure.
SLIPS = [
    ("10 kHz", "ohm", "R", "'10 kHz' is a frequency, a resistance in ohm is expected"),
    ("10 V", "A", "", "is a voltage, a current in A is expected"),
    ("10 K", "ohm", "R", "kelvin"),
    ("4.7K", "ohm", "R", "kelvin"),
    ("10 k", "ohm", "R", 'prefix without a unit.*write "10 kohm"'),
    ("4.7k", "ohm", "R", 'write "4.7 kohm"'),
    ("4k7", "ohm", "R", 'IEC 60062.*write "4K7"'),
    ("4N7", "F", "F", 'IEC 60062.*write "4n7"'),
    ("4K7", "F", "F", "the letters are p, n, u, m, F"),
    ("4K7", "V", "", "there is no unit 'K7'"),
    ("4700", "ohm", "R", 'without a unit, a resistance in ohm is expected, for instance "4.7 kohm" or "4K7"'),
    ("1e3", "ohm", "R", "without a unit"),
    ("5", "%", "", "without a unit, a ratio in % is expected"),
    ("kohm", "ohm", "R", "does not begin with a number"),
    ("", "V", "", "does not begin with a number"),
    ("nan V", "V", "", "not finite"),
    ("-inf", "V", "", "not finite"),
    ("1e999 V", "V", "", "too large"),
    ("1e99999999999999999999 V", "V", "", "too large"),
    ("1e9 dB", "dB", "", "too large"),
    ("-300 degC", "degC", "", "below absolute zero"),
    ("-1 K", "degC", "", "below absolute zero"),
    ("10 degC", "K", "", 'is a temperature, a temperature difference in K.*write "10 K"'),
    ("0.1 dB", "%", "", "ratio in decibels"),
    ("4,7 V", "V", "", "full stop"),
    ("10 KHz", "Hz", "", "did you mean 'kHz'"),
    ("10 MOHM", "ohm", "R", "did you mean 'mohm' or 'Mohm'"),
    ("10 ohms", "ohm", "R", "did you mean 'ohm'"),
    ("5 foo", "V", "", "there is no unit 'foo'.*units are"),
    ("2 nV/sqrt(kHz)", "V/sqrt(Hz)", "", "there is no unit"),
    ("10 V V", "V", "", "there is no unit"),
    ("10 /V", "V", "", "there is no unit"),
    ("10² V", "V", "", "there is no unit"),
    ("٣ V", "V", "", "does not begin with a number"),
    ("1" * 100 + " V", "V", "", "too long"),
]


class Fields(BaseModel, extra="forbid"):
    """A model with a field of each sort."""

    voltage: Annotated[Spread, Unit("V")] = Spread.exactly(1.0)
    offset: Annotated[Spread | None, Unit("V", plus_minus=True)] = None
    gain: Annotated[Spread, Unit("1")] = Spread.exactly(1.0)
    resistance: Annotated[Spread, Unit("ohm", letter_code="R")] = Spread.exactly(1.0)
    theta: Annotated[float | None, Unit("K/W")] = None
    limit: Annotated[float, Unit("V", allow_number=True)] = 0.05
    ambient: Annotated[float, Unit("degC", allow_number=True)] = 298.15


def _messages(**fields: Any) -> dict[str, str]:
    with pytest.raises(ValidationError) as caught:
        Fields(**fields)
    return {".".join(map(str, error["loc"])): error["msg"] for error in caught.value.errors()}


@pytest.mark.parametrize(("text", "unit", "value"), SPELLINGS)
def test_every_spelling_is_read_exactly(text, unit, value):
    """A quantity reads as the float nearest to its decimal value, whatever its spelling."""
    assert parse_quantity(text, unit) == value


@pytest.mark.parametrize(("text", "code", "value"), LETTER_CODES)
def test_letter_codes_are_read(text, code, value):
    """IEC 60062 codes read as their value where the key takes them."""
    assert parse_quantity(text, {"R": "ohm", "F": "F"}[code], code) == value


@pytest.mark.parametrize(("text", "unit", "code", "message"), SLIPS)
def test_slips_are_refused_with_their_cure(text, unit, code, message):
    """A slip is an error that says what was found, what is expected and how to mend it."""
    with pytest.raises(QuantityError, match=message):
        parse_quantity(text, unit, code)


@given(st.text(max_size=80), st.sampled_from(["V", "ohm", "degC", "1", "dB", "ppm/K"]))
def test_any_text_is_read_or_refused(text, unit):
    """Whatever the text, it gives a finite value or a QuantityError, and never another error."""
    try:
        value = parse_quantity(text, unit, "R" if unit == "ohm" else "")
    except QuantityError:
        return
    assert math.isfinite(value)


def test_a_free_quantity_brings_its_dimension():
    """A constant of a law may have any unit, and its dimension comes with it."""
    assert parse_any_quantity("10 V") == (10.0, dimension_of("V"))
    assert parse_any_quantity("0.2 1/V") == (0.2, NUMBER / dimension_of("V"))
    assert parse_any_quantity("2 mV^2") == (2e-6, dimension_of("V") ** 2)
    assert parse_any_quantity("3 uA*s") == (3e-6, dimension_of("A") * dimension_of("s"))
    assert parse_any_quantity("25 degC") == (298.15, dimension_of("K"))
    assert parse_any_quantity("-3 K") == (-3.0, dimension_of("K"))
    assert parse_any_quantity("0.5") == (0.5, NUMBER)


@pytest.mark.parametrize("text", ["ten V", "10 k", "10 volts", "nan"])
def test_a_free_quantity_is_still_checked(text):
    """A constant that is no quantity is refused."""
    with pytest.raises(QuantityError, match="a number or a quantity is expected"):
        parse_any_quantity(text)


# Dimensions of derived units: SI brochure, 9th edition, table 4.
@pytest.mark.parametrize(
    ("unit", "product"),
    [
        ("ohm", dimension_of("V") / dimension_of("A")),
        ("S", dimension_of("A") / dimension_of("V")),
        ("F", dimension_of("A") * dimension_of("s") / dimension_of("V")),
        ("W", dimension_of("V") * dimension_of("A")),
        ("Hz", NUMBER / dimension_of("s")),
        ("V/sqrt(Hz)", dimension_of("V") * dimension_of("s") ** 0.5),
        ("%", NUMBER),
        ("dB", NUMBER),
        ("degC", dimension_of("K")),
        ("kohm/mV", dimension_of("1/A")),
    ],
)
def test_derived_units_have_the_dimension_of_their_product(unit, product):
    """Dimensions multiply and divide as the units do, and a prefix has none."""
    assert dimension_of(unit) == product


@pytest.mark.parametrize(("power", "text"), [(2, "V^2"), (0.5, "V^(1/2)"), (-1, "1/V"), (0, "1")])
def test_a_power_of_a_dimension_is_written_as_a_unit(power, text):
    """A dimension without a name of its own is written from its bases."""
    assert str(dimension_of("V") ** power) == text


def test_roots_of_a_dimension_undo_powers_exactly():
    """A cube root given as a float, cubed, is the dimension itself."""
    assert (dimension_of("V") ** (1 / 3)) ** 3 == dimension_of("V")
    assert dimension_of("V") ** 0.4343 * dimension_of("V") ** 0.5657 == dimension_of("V")


@given(st.lists(st.integers(-4, 4), min_size=len(BASES), max_size=len(BASES)))
def test_a_dimension_reads_back_from_its_text(exponents):
    """What a message calls a dimension is a unit that the file takes."""
    dimension = Dimension.of(**dict(zip(BASES, exponents, strict=True)))
    assert dimension_of(str(dimension)) == dimension


@pytest.mark.parametrize(
    ("value", "unit", "text"),
    [
        (4700.0, "ohm", "4.7 kohm"),
        (0.99996, "V", "1 V"),
        (0.99994, "V", "999.9 mV"),
        (-1.5e-7, "A", "-150 nA"),
        (0.00031, "V", "310 uV"),
        (0.0, "V", "0 V"),
        (-0.0, "V", "0 V"),
        (1e-20, "A", "0.01 aA"),
        (328.15, "degC", "55 degC"),
        (233.15, "degC", "-40 degC"),
        (0.12, "%", "12 %"),
        (25e-6, "ppm/K", "25 ppm/K"),
        (25e-6, "1/K", "25 ppm/K"),
        (13e6, "V/us", "13 V/us"),
        (0.3e6, "V/us", "0.3 V/us"),
        (2e-9, "V/sqrt(Hz)", "2 nV/sqrt(Hz)"),
        (2e-3, "V/K", "2 mV/K"),
        (150.0, "K/W", "150 K/W"),
        (1e5, "dB", "100 dB"),
        (54.996, "deg", "55 deg"),
        (0.031, "1", "0.031"),
        (800000.0, "1", "800000"),
        (8e6, "1", "8e6"),
        (2.5e-7, "1", "2.5e-7"),
        (-3.0, "1/s", "-3 1/s"),
        (math.inf, "V", "infinite"),
        (-math.inf, "V", "minus infinite"),
        (math.nan, "V", "no figure"),
        (0.0, "dB", "no figure"),
    ],
)
def test_figures_are_written_for_people(value, unit, text):
    """Four significant digits, engineering prefixes, units of the trade, and never 1000 mV."""
    assert format_quantity(value, unit) == text


def test_digits_can_be_asked_for():
    """More digits are shown on demand."""
    assert format_quantity(1.23456789, "V", digits=7) == "1.234568 V"


@given(
    st.floats(1e-18, 1e13),
    st.booleans(),
    st.sampled_from(["V", "A", "ohm", "F", "Hz", "s", "W", "S", "1", "%", "ppm", "ppm/K", "1/K", "K", "K/W"])
    | st.sampled_from(["V/K", "V/s", "V/us", "V/sqrt(Hz)", "A/sqrt(Hz)", "deg"]),
)
def test_what_is_written_reads_back(magnitude, negative, unit):
    """Reading what was written gives the value to within half a unit of the fourth digit."""
    value = -magnitude if negative else magnitude
    text = format_quantity(value, unit)
    assert parse_quantity(text, unit) == pytest.approx(value, rel=5.1e-4)


@given(st.floats(1e-18, 9e14), st.sampled_from(["V", "A", "ohm", "F", "Hz", "s", "W"]))
def test_a_prefix_leaves_one_to_three_digits_before_the_point(value, unit):
    """The number beside a prefix is from 1 to below 1000, after rounding too."""
    assert 1.0 <= float(format_quantity(value, unit).split()[0]) < 1000.0


@given(st.floats(1.0, 1000.0))
def test_temperatures_and_decibels_read_back(value):
    """Offset and logarithm are undone to the digits shown."""
    shown = max(abs(value - 273.15), 1.0)
    assert parse_quantity(format_quantity(value, "degC"), "degC") == pytest.approx(value, abs=5.1e-4 * shown)
    assert parse_quantity(format_quantity(value, "dB"), "dB") == pytest.approx(value, rel=2e-3)


@pytest.mark.parametrize(
    ("table", "spread"),
    [
        ({"min": "1 V", "typ": "2 V", "max": "4 V"}, Spread(1.0, 2.0, 4.0)),
        ({"min": "1 V", "max": "4 V"}, Spread(1.0, 2.5, 4.0)),
        ({"typ": "2 V", "max": "4 V"}, Spread(2.0, 2.0, 4.0)),
        ({"min": "1 V", "typ": "2 V"}, Spread(1.0, 2.0, 2.0)),
        ({"min": "1 V"}, Spread(1.0, 1.0, 1.0)),
        ({"typ": "2 V"}, Spread(2.0, 2.0, 2.0)),
        ({"max": "4 V"}, Spread(4.0, 4.0, 4.0)),
        ("3 V", Spread(3.0, 3.0, 3.0)),
        (Spread(1.0, 2.0, 3.0), Spread(1.0, 2.0, 3.0)),
    ],
)
def test_a_spread_takes_any_part_of_its_table(table, spread):
    """The nominal is typ, else the middle, else the one given; a missing end equals the nominal."""
    assert Fields(voltage=table).voltage == spread


@pytest.mark.parametrize(
    ("value", "spread"),
    [
        ("0.5 mV", Spread(-0.5e-3, 0.0, 0.5e-3)),
        ({"typ": "0.1 mV", "max": "0.5 mV"}, Spread(-0.5e-3, 0.0, 0.5e-3)),
        ({"typ": "0.1 mV"}, Spread(-0.1e-3, 0.0, 0.1e-3)),
        ({"min": "-1 mV", "max": "2 mV"}, Spread(-1e-3, 0.0, 2e-3)),
        ({"min": "-1 mV"}, Spread(-1e-3, 0.0, 1e-3)),
        ("0 V", Spread(0.0, 0.0, 0.0)),
    ],
)
def test_a_limit_about_zero_is_a_spread_with_nominal_zero(value, spread):
    """A limit about zero spreads to both sides, and a typical figure does not narrow it."""
    assert Fields(offset=value).offset == spread


def test_half_of_a_spread_is_its_larger_side():
    """The half-spread is the larger one-sided distance from the nominal, 0 where there is no spread."""
    assert Spread(1.0, 2.0, 4.0).half == 2.0
    assert Spread(0.0, 3.0, 4.0).half == 3.0
    assert Spread.about_zero(0.5).half == 0.5
    assert Spread.exactly(math.inf).half == 0.0


def test_numbers_are_taken_where_there_is_no_unit_to_give():
    """A plain number takes TOML integers and floats, in tables too; settings take SI numbers."""
    fields = Fields(gain={"min": 150, "typ": 320.5}, limit=0.2, ambient=300)
    assert fields.gain == Spread(150.0, 320.5, 320.5)
    assert fields.limit == 0.2
    assert fields.ambient == 300.0
    assert Unit("V", allow_number=True).read("0.2") == 0.2
    assert Unit("V", allow_number=True).read("200 mV") == 0.2


@pytest.mark.parametrize(
    ("field", "value", "message"),
    [
        ("voltage", 5, "5 is a number without a unit, a voltage in V is expected.*in quotes"),
        ("voltage", True, "True is no quantity"),
        ("voltage", ["1 V", "2 V"], "is no quantity"),
        ("voltage", {}, "the table is empty"),
        ("voltage", {"min": "3 V", "max": "2 V"}, "min 3 V, max 2 V are out of order"),
        ("voltage", {"min": "1 V", "typ": "3 V", "max": "2 V"}, "out of order"),
        ("voltage", "{x} V", "'{x} V' does not begin with a number"),
        ("offset", "-1 mV", "does not hold zero.*without a sign"),
        ("offset", {"min": "1 mV", "max": "2 mV"}, "does not hold zero"),
        ("gain", math.nan, "nan is not finite"),
        ("gain", math.inf, "inf is not finite"),
        ("gain", 10**400, "is not finite"),
        ("theta", 150.0, "without a unit, a thermal resistance in K/W is expected"),
        ("theta", "150 K", "is a temperature difference, a thermal resistance"),
        ("limit", "nan", "not finite"),
        ("ambient", -5, "below absolute zero"),
    ],
)
def test_a_field_reports_what_is_wrong_with_it(field, value, message):
    """A model's error is the message word for word, at the field."""
    found = _messages(**{field: value})
    assert list(found) == [field]
    with pytest.raises(ValueError, match=message):
        raise ValueError(found[field])


def test_all_faults_of_a_table_are_reported_at_their_keys():
    """Each end of a spread has its own error, and an unknown key the nearest right word."""
    found = _messages(voltage={"min": "1 ohm", "max": 2, "typical": "1 V"})
    assert list(found) == ["voltage.min", "voltage.max", "voltage.typical"]
    assert "is a resistance" in found["voltage.min"]
    assert "without a unit" in found["voltage.max"]
    assert "did you mean 'typ'" in found["voltage.typical"]


def test_a_unit_that_is_none_is_refused_at_once():
    """A slip in a model's own annotation shows when the module is imported."""
    with pytest.raises(QuantityError, match="did you mean 'ohm'"):
        Unit("Ohm")
    with pytest.raises(ValueError, match="no letter code 'C'"):
        Unit("F", letter_code="C")
    with pytest.raises(TypeError, match="annotates a Spread or a float"):

        class Wrong(BaseModel):
            name: Annotated[str, Unit("V")]


@pytest.mark.parametrize(
    ("fields", "fits"),
    [
        ({"voltage": "5 V", "resistance": "R47", "gain": 3, "theta": "150 K/W", "limit": 0.1}, True),
        ({"voltage": {"min": "−1 V"}, "gain": {"typ": 5}, "offset": None, "resistance": "4K7"}, True),
        ({"voltage": 5}, False),
        ({"voltage": {}}, False),
        ({"voltage": {"typical": "5 V"}}, False),
        ({"theta": 150}, False),
        ({"theta": {"min": "150 K/W"}}, False),
        ({"voltage": "five"}, False),
    ],
)
def test_the_json_schema_agrees_with_the_reader(fields, fits):
    """What an editor marks as wrong by the schema, the reader refuses, and the reverse."""
    validator = jsonschema.Draft202012Validator(Fields.model_json_schema())
    assert validator.is_valid(fields) is fits
    if fits:
        Fields(**fields)
    else:
        _messages(**fields)


def test_the_json_schema_describes_a_quantity():
    """An editor can show what is expected and an example."""
    theta = Fields.model_json_schema()["properties"]["theta"]["anyOf"][0]
    assert theta["description"] == "a thermal resistance in K/W"
    assert theta["examples"] == ["150 K/W"]


def test_importing_units_loads_nothing_heavy():
    """Reading a quantity needs neither pydantic nor numpy."""
    code = (
        "import sys, rulecheck.units as u; assert u.parse_quantity('1 kV', 'V') == 1000.0;"
        "print([m for m in ('pydantic', 'pydantic_core', 'numpy') if m in sys.modules])"
    )
    result = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert result.stdout.strip() == "[]"
