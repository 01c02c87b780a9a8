"""Values against the series of IEC 60063."""

import pytest
from rulecheck_rules.preferred_value import PreferredValue

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

R6 = 'R6 = { kind = "resistor", value = "16.9 kohm", tolerance = "0.1 %"'


@pytest.mark.parametrize("name", ["gas_log", "steam_root", "dose_rate"])
def test_sound_boards(board, name):
    """E24 and E96 values are preferred, compensating resistors exempt."""
    assert_clean(PreferredValue, board(name))


def resistor(value, tolerance):
    """The change that gives R6 of gas_log a value and a tolerance."""
    return R6, f'R6 = {{ kind = "resistor", value = "{value}", tolerance = "{tolerance}"'


@pytest.mark.parametrize(
    ("name", "ref", "change", "nearest"),
    [  # neighbours in E24: 16, 18, 220, 240; in E96: 16.9, 17.4; in E192: 316, 320
        ("gas_log", "R6", resistor("17.0 kohm", "1 %"), "16.9 kohm"),
        ("gas_log", "R6", resistor("16.9 kohm", "5 %"), "16 kohm"),
        ("dose_rate", "C1", ('"220 pF"', '"225 pF"'), "220 pF"),
        ("steam_root", "R8", ('"316 kohm"', '"318.1 kohm"'), "320 kohm"),
    ],
)
def test_value_of_no_series(board, name, ref, change, nearest):
    """A value in neither series is worth knowing, and the nearest one is proposed."""
    design = board(name, change)
    finding = assert_finds(PreferredValue, design, parts=[ref])
    assert finding.severity is Severity.OBSERVATION
    assert [edit.to for edit in finding.remedies[0].edits] == [nearest]
    assert ref not in [
        part for f in findings_of(mended(design, finding.remedies[0]), PreferredValue) for part in f.parts
    ]


@pytest.mark.parametrize(
    "change",
    [
        resistor("16 kohm", "0.1 %"),
        resistor("16.7 kohm", "0.5 %"),
        resistor("1.69 kohm", "1 %"),
        resistor("0 ohm", "1 %"),
        (R6, 'R6 = { kind = "resistor", value = "16.7 kohm"'),
        ('value = "1 kohm", tolerance = "0.1 %", tempco = "3354 ppm/K"', 'value = "1.037 kohm", tempco = "3354 ppm/K"'),
    ],
    ids=["E24 at 0.1 %", "E192", "E96", "link", "no tolerance", "compensating"],
)
def test_values_of_a_series(board, change):
    """E24 at every tolerance, the series of the tolerance, links, and resistors that compensate are left alone."""
    assert_clean(PreferredValue, board("gas_log", change))


@pytest.mark.parametrize(
    ("name", "change"),
    [("gas_log", resistor("17.0 kohm", "1 %")), ("steam_root", ('"2.2 nF"', '"2.25 nF"'))],
)
def test_remedies_cure(board, cures, name, change):
    """The nearest value brings nothing new, by all rules."""
    assert all(left == [] for left in cures(board(name, change), PreferredValue).values())
