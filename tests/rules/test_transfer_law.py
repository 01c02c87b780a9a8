"""Outputs that follow their law, that are off it, and laws that mean nothing. The boards are invented.

What spreads and trims do to the same rule is tested beside this.
"""

import numpy as np
import pytest
from rulecheck_rules.output_swing import OutputSwing
from rulecheck_rules.transfer_law import TransferLaw

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

WIDE = ('reading = "1 %"', 'reading = "5 %"')  # so that spreads are no matter
BULK = ('model = "pair-npn", package = "M2"', 'model = "pair-npn", bulk_emitter_resistance = "20 ohm", package = "M2"')
OFFSET = ('model = "both-rails"', 'model = "both-rails", offset = "0.5 mV"')
BEAM = ('[parts]', '[requirements.power]\noutput = "VOUT"\nlaw = "MID - gain * PD1"\nconstants = { gain = "20 kohm" }\n'
        'accuracy = { reading = "2 %", absolute = "10 mV" }\n\n[parts]')  # fmt: skip
COLUMN = ("[parts]", '[requirements.level]\noutput = "VOUT"\nlaw = "2 * MID - VIN"\n'
          'accuracy = { reading = "2 %", absolute = "20 mV" }\n\n[parts]')  # fmt: skip
ROOT_LAW, LOG_LAW = '"full * sqrt(VIN / full)"', '"-slope * log10(VIN / middle)"'


def resistor(ref, old, new):
    """A change of a board that gives a resistor another value."""
    start = f'{ref} = {{ kind = "resistor", value = "'
    return f'{start}{old}"', f'{start}{new}"'


@pytest.mark.parametrize(
    ("name", "changes"),
    [("log_ratio", []), ("root", []), ("scale", []), ("beam", [BEAM]), ("column", [COLUMN]), ("gas_log", [])],
)
def test_outputs_that_follow_their_law_are_sound(board, name, changes):
    """A log ratio, a root, a scaled voltage, a photocurrent about a level, and an output of which nothing is asked."""
    assert_clean(TransferLaw, board(name, *changes))


@pytest.mark.parametrize(
    ("name", "changes", "factor", "where"),
    [
        ("root", [resistor("R8", "316 kohm", "348 kohm")], 348 / 316, {"VIN": 10.0}),
        ("scale", [resistor("R2", "20 kohm", "22 kohm")], 22 / 20, {"VIN": 5.0}),
    ],
)
def test_a_nominal_error(board, name, changes, factor, where):
    """An output off by the ratio of a resistor to the right one is found where the error is the most of the allowed."""
    finding = assert_finds(TransferLaw, board(name, *changes))
    assert finding.severity is Severity.MAJOR
    assert finding.nets == ("VOUT",)
    assert where.items() <= finding.conditions.items()
    error = finding.evidence[0]
    assert error.quantity == "nominal error"
    assert error.value == pytest.approx((factor - 1) * 10.0, rel=0.05)  # 10 V is the full scale of both
    assert error.value > error.limit
    assert finding.consequence.endswith(" instead of 10 V" if name == "root" else " instead of -10 V")


def test_the_error_of_a_log_output_is_that_of_its_slope(board):
    """15.8 kohm in place of 16.9 kohm make the slope 6.5 % too small, a decade from the middle 65 mV."""
    finding = assert_finds(TransferLaw, board("log_ratio", resistor("R5", "16.9 kohm", "15.8 kohm")))
    assert finding.evidence[0].value == pytest.approx(1 - 15.8 / 16.9, rel=0.02)
    assert finding.evidence[0].limit == pytest.approx(0.02)


def test_a_nominal_error_is_the_only_finding(board):
    """What is off in scale is not found again by its exponent or by its spreads."""
    found = findings_of(board("root", resistor("R5", "10 kohm", "11 kohm")), TransferLaw)
    assert len(found) == 1
    assert "is off its law by" in found[0].message


def test_only_the_range_of_the_requirement_counts(board):
    """An offset too large for the least inputs is no error where these are not asked for."""
    large = ('model = "both-rails"', 'model = "both-rails", offset = "5 mV"')
    assert_finds(TransferLaw, board("scale", large))
    asked = ('output = "VOUT"\n', 'output = "VOUT"\nrange = { VIN = ["3 V", "5 V"] }\n')
    assert_clean(TransferLaw, board("scale", large, asked))


def test_below_the_cutoff_no_law_is_asked(board):
    """The same with an input whose range goes on to zero."""
    large = ('model = "both-rails"', 'model = "both-rails", offset = "5 mV"')
    ranged = ('range = ["20 mV", "5 V"]', 'range = ["0 V", "5 V"]')
    assert_finds(TransferLaw, board("scale", large, ranged))
    assert_clean(TransferLaw, board("scale", large, (ranged[0], ranged[1] + ', cutoff = "3 V"')))


@pytest.mark.parametrize("range_", ['["4 V", "11 V"]', '["4 V", "16 V"]'])
def test_saturated_amplifiers_are_not_judged(board, range_):
    """Where an amplifier is at its limit the law is lost, which is found as that and nothing else."""
    design = board("column", COLUMN, ('range = ["4 V", "8 V"]', f"range = {range_}"))
    assert_finds(OutputSwing, design)
    assert_clean(TransferLaw, design)


@pytest.mark.parametrize(
    ("name", "changes", "message", "scale"),
    [
        ("root", [(ROOT_LAW, '"VIN ** n"'), ('full = "10 V"', "n = 0.5")], "in V^(1/2), the output is in V",
         "multiply it by a scale in V^(1/2)"),
        ("root", [(ROOT_LAW, '"VIN ** 2"'), ('full = "10 V"', "n = 0.5")], "in V^2, the output is in V",
         "divide it by a scale in V"),
        ("log_ratio", [(LOG_LAW, '"-slope * log10(VIN)"')], "'VIN' is in V, log10 takes a plain number",
         "divide 'VIN' by a scale in V"),
        ("log_ratio", [(LOG_LAW, '"-log10(VIN / middle)"')], "is a plain number, the output is in V",
         "multiply it by a scale in V"),
        ("beam", [BEAM, (" * PD1", " * PD1 / MID"), ("gain = ", "other = 1, gain = ")],
         "is a plain number, 'MID' is in V: they cannot be added", "by a scale in V"),
        ("beam", [BEAM, ('gain = "20 kohm"', "gain = 20")], "'gain * PD1' is in A, 'MID' is in V: they cannot be added",
         "multiply 'gain * PD1' by a scale in ohm"),
    ],
)  # fmt: skip
def test_a_law_that_is_not_in_volts(board, name, changes, message, scale):
    """A law in another dimension than its output says which scale is missing, and nothing else is judged by it."""
    (finding,) = findings_of(board(name, *changes), TransferLaw)
    assert finding.severity is Severity.MAJOR
    assert message in finding.message
    (remedy,) = finding.remedies
    assert remedy.title.endswith(scale)
    assert remedy.edits == ()  # the value of the scale is not known


@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("root", [WIDE, ('model = "pair-npn"', 'model = "pair-npn", bulk_emitter_resistance = "20 ohm"')]),
        ("steam_root", [('reading = "1 %"', 'reading = "10 %"'),
                        ('"monolithic-pair-npn-tight", package = "M2"',
                         '"monolithic-pair-npn-tight", bulk_emitter_resistance = "20 ohm", package = "M2"')]),
        ("scale", [OFFSET]),
    ],
)  # fmt: skip
def test_a_local_exponent_that_deviates(board, name, changes):
    """Bulk resistance bends a root at its large currents, an offset a line at its small end; both inside the accuracy.

    No resistor straightens them.
    """
    (finding,) = findings_of(board(name, *changes), TransferLaw)
    assert finding.severity is Severity.MINOR
    assert "local exponent in VIN" in finding.message
    assert finding.conditions["VIN"] == 10.0 if name != "scale" else finding.conditions["VIN"] < 0.04
    assert [remedy.edits for remedy in finding.remedies] == [()]


def test_the_exponent_of_a_line_with_an_offset(board):
    """Of y = -2·x - 3·V_OS the exponent is 2x/(2x - 3·V_OS), by hand, where 2x is over 10 times the absolute error."""
    finding = assert_finds(TransferLaw, board("scale", OFFSET))
    line = 2 * finding.conditions["VIN"]
    assert line > 10 * 6e-3
    assert finding.evidence[0].value == pytest.approx(line / (line - 3 * 0.5e-3) - 1, rel=2e-3)


def test_bulk_resistance_bends_a_root(board):
    """With r at the emitter of Q4 the exponent is 0.5/(1 + I·r/V_T) at 10 V, textbook."""
    finding = assert_finds(TransferLaw, board("root", ('reading = "1 %"', 'reading = "10 %"'), BULK))
    current, thermal = 10 / 316e3, 8.617333262e-5 * finding.conditions["ambient"]  # k/q of CODATA 2018
    bent = 1 / (1 + current * 20 / thermal)
    assert finding.evidence[0].value == pytest.approx(1 - bent, rel=0.1)
    assert finding.conditions["VIN"] == 10.0


@pytest.mark.parametrize(
    ("name", "changes"),
    [
        ("scale", [OFFSET, ('"-gain * VIN"', '"zero - gain * VIN"'), ("gain = 2", 'gain = 2, zero = "0.1 mV"')]),
        ("log_ratio", []),  # its exponent goes through every value
        ("beam", [BEAM]),
        ("column", [COLUMN]),
    ],
)
def test_exponents_are_judged_of_powers_only(board, name, changes):
    """Where the law is no power of the input its exponent is none to keep."""
    assert_clean(TransferLaw, board(name, *changes))


def test_exponents_are_judged_above_the_absolute_error(board):
    """Where the output is near what the absolute error allows its exponent is not judged."""
    assert_clean(TransferLaw, board("scale", OFFSET, ('absolute = "6 mV"', 'absolute = "60 mV"')))


def test_limits_are_settings(board):
    """A design may allow its exponent more."""
    allowed = ("[parts]", '[rules.transfer-law]\nexponent = "3 %"\n\n[parts]')
    assert_clean(TransferLaw, board("scale", OFFSET, allowed))


@pytest.mark.parametrize(
    ("name", "changes", "remedy"),
    [
        ("root", [resistor("R8", "316 kohm", "348 kohm")], "change R8 to 316 kohm"),
        ("root", [resistor("R8", "316 kohm", "31.6 kohm")], "change R8 to 316 kohm"),
        ("scale", [resistor("R2", "20 kohm", "22 kohm")], "change R1 to 11 kohm"),
        ("scale", [resistor("R1", "10 kohm", "1 kohm")], "change R1 to 10 kohm"),  # at its limit at most conditions
        ("log_ratio", [resistor("R5", "16.9 kohm", "15.8 kohm")], "change R5 to 16.9 kohm"),
        ("log_ratio", [resistor("R2", "499 kohm", "49.9 kohm")], "change R2 to 499 kohm"),
    ],
)
def test_a_resistor_cures_a_nominal_error(board, name, changes, remedy):
    """Values that take the error away by themselves, a few per cent or a decade off, whichever way the output goes."""
    design = board(name, *changes)
    remedies = {r.title: r for r in assert_finds(TransferLaw, design).remedies}
    assert remedy in remedies
    assert_clean(TransferLaw, mended(design, remedies[remedy]))


@pytest.mark.parametrize(
    ("name", "changes", "count"),
    [
        ("log_ratio", [resistor("R5", "16.9 kohm", "15.8 kohm")], 2),
        ("scale", [resistor("R2", "20 kohm", "22 kohm")], 2),
        ("beam", [BEAM, resistor("R1", "20 kohm", "2.2 kohm")], 1),
    ],
)
def test_remedies_bring_nothing_new(board, cures, name, changes, count):
    """Each value that is offered cures, by all rules."""
    after = cures(board(name, *changes), TransferLaw)
    assert len(after) == count
    assert not any(after.values())


@pytest.mark.parametrize(
    ("name", "changes", "remedy"),
    [
        ("root", [WIDE, resistor("R5", "10 kohm", "10.1 kohm")], "change R5 to 10 kohm"),
        ("steam_root", [('reading = "1 %"', 'reading = "10 %"'), resistor("R5", "10 kohm", "10.2 kohm")],
         "change R5 to 10 kohm"),
    ],
)  # fmt: skip
def test_a_resistor_cures_an_exponent(board, name, changes, remedy):
    """An exponent that is off all over the range is a ratio of resistors."""
    design = board(name, *changes)
    finding = assert_finds(TransferLaw, design)
    assert finding.severity is Severity.MINOR
    chosen = next(r for r in finding.remedies if r.title == remedy)
    assert_clean(TransferLaw, mended(design, chosen))


def test_two_wrong_resistors_have_no_single_cure(board):
    """A scale and an exponent that are both off are no matter of one resistor, and the finding says so."""
    design = board("root", WIDE, resistor("R8", "316 kohm", "402 kohm"), resistor("R5", "10 kohm", "12 kohm"))
    finding = assert_finds(TransferLaw, design)
    assert [remedy.edits for remedy in finding.remedies] == [()]
    assert "no single resistor" in finding.remedies[0].title


def test_the_figures_of_a_finding_are_those_of_its_conditions(board):
    """Value and limit are of the condition that is named, and no other is worse."""
    finding = assert_finds(TransferLaw, board("scale", resistor("R2", "20 kohm", "22 kohm")))
    error = finding.evidence[0]
    assert error.value == pytest.approx(0.2 * finding.conditions["VIN"], rel=2e-3)
    assert error.limit == pytest.approx(6e-3 + 0.01 * 2 * finding.conditions["VIN"], rel=1e-9)
    assert error.value == pytest.approx(np.nanmax(error.over), rel=1e-4)
