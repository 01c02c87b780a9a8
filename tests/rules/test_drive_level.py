"""How far antilog transistors are driven. The boards, and the sound examples, are invented."""

from pathlib import Path

import pytest
from rulecheck_rules.drive_level import DriveLevel

from rulecheck.api import Severity
from rulecheck.design.load import load_text
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

SOUND = Path(__file__).parents[2] / "example_designs" / "sound"
WIDE = ('range = ["-1 V", "1 V"]', 'range = ["-6 V", "1 V"]')
Q2 = 'pins = { C = "S2", B = "BASE", E = "TAIL" }'
Q4 = 'pins = { C = "S4", B = "GND", E = "T2" }'
#: The expander as an attenuator: a signal in place of the reference current, a potentiometer in place of the input.
ATTENUATOR = [
    ('VIN = { role = "input", drive = "voltage", range = ["-1 V", "1 V"]',
     'VNEG = { role = "reference", voltage = "-5 V", tolerance = "0.1 %" }\n'
     'VIN = { role = "input", drive = "voltage", range = ["0.5 V", "5 V"]'),
    ('pins = ["VREF", "S1"]', 'pins = ["VIN", "S1"]'),
    ('pins = ["VIN", "N4"]', 'pins = ["SET", "N4"]'),
    ("[parts]\n",
     '[parts]\nRV1 = { kind = "potentiometer", value = "1 kohm", tolerance = "5 %", tempco = "0 ppm/K", '
     'position = { min = 0, typ = 0.2, max = 1 }, pins = { END1 = "GND", WIPER = "SET", END2 = "VNEG" } }\n'),
]  # fmt: skip


def example(name, *changes):
    """A sound example, changed; without its requirement where a potentiometer is put in."""
    path = SOUND / f"{name}.toml"
    text = path.read_text("utf-8")
    if changes and changes[0] in ATTENUATOR:
        text = text.split("[requirements")[0]
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return load_text(text, path)


def own(pins, key, value):
    """Change by which a part states a parameter of its own."""
    return pins, f"{key} = {value}, {pins}"


@pytest.mark.parametrize("name", ["expander", "nozzle_flow", "heater_power", "gas_mass_flow"])
def test_sound_examples(name):
    """Antilog stages that stay within the log range are clean."""
    assert_clean(DriveLevel, example(name))


@pytest.mark.parametrize("name", ["root", "log_ratio", "light_ratio"])
def test_sound_boards(board, name):
    """An antilog stage of microamperes is clean, and where there is none there is nothing to judge."""
    assert_clean(DriveLevel, board(name))


def test_input_drives_too_far():
    """2 uA less six decades is 2 pA, more than a decade below the 100 pA at which the log range begins."""
    finding = assert_finds(DriveLevel, example("expander", WIDE), {"Q2"})
    assert finding.severity is Severity.MAJOR
    assert finding.evidence[0].value < 10e-12
    assert finding.evidence[0].limit == pytest.approx(10e-12)
    assert finding.conditions["VIN"] == pytest.approx(-6)


@pytest.mark.parametrize("low", [-4, -5])
def test_less_than_a_decade_beyond(low):
    """20 pA is outside the log range by less than a decade: no matter of this rule."""
    assert_clean(DriveLevel, example("expander", (WIDE[0], f'range = ["{low} V", "1 V"]')))


@pytest.mark.parametrize(
    ("span", "is_found"),
    [
        ('["10 uA", "1 mA"]', False),
        ('["100 uA", "1 mA"]', True),
        ('["1 nA", "1 uA"]', True),
        ('["1 nA", "4 uA"]', False),
    ],
)
def test_log_range_of_a_part(board, span, is_found):
    """The root's answer is 1..10 V over 316 kohm, 3.2..32 uA: a decade from the ends that the part states counts."""
    design = board("root", own(Q4, "log_range", span))
    assert [set(f.parts) for f in findings_of(design, DriveLevel)] == ([{"Q4"}] if is_found else [])


def test_rating(board):
    """Over the collector current that a part is rated for; the current is the answer over its resistor."""
    for design, ref, current in (
        (example("expander", own(Q2, "collector_current", '"15 uA"')), "Q2", 10 / 499e3),
        (board("root", own(Q4, "collector_current", '"20 uA"')), "Q4", 10 / 316e3),
    ):
        finding = assert_finds(DriveLevel, design, {ref})
        assert finding.evidence[0].value == pytest.approx(current, rel=0.03)
    assert_clean(DriveLevel, board("root", own(Q4, "collector_current", '"40 uA"')))


def test_potentiometer_at_its_end():
    """Turned to -5 V the potentiometer takes five decades off the 0.2 uA of the least signal."""
    finding = assert_finds(DriveLevel, example("expander", *ATTENUATOR), {"Q2", "RV1"})
    assert finding.conditions["RV1"] == 1
    assert finding.evidence[0].value < 10e-12
    assert "RV1 at 1" in finding.message


def test_potentiometer_that_does_little():
    """From -1 V the same potentiometer takes one decade off, and is clean."""
    assert_clean(DriveLevel, example("expander", *ATTENUATOR, ('voltage = "-5 V"', 'voltage = "-1 V"')))


@pytest.mark.parametrize("kohm", [1, 2.2])
def test_stopping_the_travel_cures(kohm):
    """A smaller potentiometer with a resistor at its end keeps the current right at every position."""
    design = example(
        "expander", *ATTENUATOR, ('value = "1 kohm", tolerance = "5 %"', f'value = "{kohm} kohm", tolerance = "5 %"')
    )
    (remedy,) = (r for r in assert_finds(DriveLevel, design).remedies if r.edits)
    assert remedy.title.startswith("stop the travel")
    assert_clean(DriveLevel, mended(design, remedy))


@pytest.mark.parametrize("low", [-6, -7])
def test_narrowing_the_range_cures(low):
    """The range ends at the last point of the review at which the current is right."""
    design = example("expander", (WIDE[0], f'range = ["{low} V", "1 V"]'))
    (remedy,) = (r for r in assert_finds(DriveLevel, design).remedies if r.edits)
    assert_clean(DriveLevel, mended(design, remedy))


def test_remedy_brings_nothing_new(cures):
    """The narrower range passes all rules."""
    assert list(cures(example("expander", WIDE), DriveLevel).values()) == [[]]


def test_a_saturated_output_is_another_matter():
    """Where the output stops the current, no drive is reported."""
    assert_clean(DriveLevel, example("expander", (WIDE[0], 'range = ["-1 V", "4 V"]')))
