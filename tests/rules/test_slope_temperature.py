"""Drift of single junctions and kT/q in slopes. The boards are invented."""

from pathlib import Path

import pytest
from rulecheck_rules.slope_temperature import SlopeTemperature

from rulecheck.api import Severity
from rulecheck.design.load import load_text
from rulecheck.testing import assert_clean, assert_finds, findings_of

EXAMPLES = Path(__file__).parents[2] / "example_designs" / "sound"
PLAIN_LOG = ('tempco = "3354 ppm/K"', 'tempco = "0 ppm/K"')
PLAIN_ANTILOG = ('tempco = "3560 ppm/K", tempco_tolerance = "50 ppm/K"', 'tempco = "0 ppm/K"')
UNLINKED = ('[[thermal_links]]\nbetween = ["M1", "RT"]\ntheta = "20 K/W"\n', "")
ALONE = (', package = "RT"', "")
NO_PACKAGE = ('[packages]\nRT = { theta_ja = "300 K/W" }\n', "")


def example(name, *changes):
    """A sound example with texts replaced."""
    path = EXAMPLES / f"{name}.toml"
    text = path.read_text("utf-8")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return load_text(text, path)


def tempco_of(finding):
    """Tempco of the slope in evidence [1/K]."""
    return next(e.value for e in finding.evidence if e.quantity == "tempco of the slope")


def test_a_tempco_resistor_is_sound(board):
    """A logarithm and an antilogarithm with a tempco resistor that takes kT/q out are clean."""
    assert_clean(SlopeTemperature, board("log_ratio"))
    assert_clean(SlopeTemperature, example("expander"))


def test_a_power_needs_none(board):
    """A logarithm that an antilogarithm takes back has no kT/q to lose."""
    assert_clean(SlopeTemperature, board("root"))


def test_a_slope_follows_kelvin(board):
    """Without a tempco resistor the slope of the logarithm is proportional to T: 1/298.15 K = 3354 ppm/K."""
    finding = assert_finds(SlopeTemperature, board("log_ratio", PLAIN_LOG), {"Q1", "Q2"})
    assert finding.severity is Severity.MAJOR
    assert tempco_of(finding) == pytest.approx(1 / 298.15, rel=0.01)
    assert "VOUT is off by" in finding.consequence
    assert "allowed are" in finding.consequence


def test_the_exponent_falls_with_kelvin():
    """Of an antilogarithm d(ln y)/dx goes as 1/T: from 0 to 50 degC it falls by 3354 ppm/K of its middle and a bit."""
    finding = assert_finds(SlopeTemperature, example("expander", PLAIN_ANTILOG), {"Q1", "Q2"})
    ends = [298.15 / t for t in (273.15, 323.15)]
    assert tempco_of(finding) == pytest.approx((ends[0] - ends[1]) / 50, rel=0.01)


def test_half_a_compensation_is_minor(board):
    """A resistor of 2800 ppm/K leaves some 500 ppm/K: between the limits."""
    finding = assert_finds(SlopeTemperature, board("log_ratio", ("3354 ppm/K", "2800 ppm/K")))
    assert finding.severity is Severity.MINOR
    assert 400e-6 < tempco_of(finding) < 700e-6


def test_a_law_that_names_the_ambient_asks_for_it(board):
    """A slope of 59 mV a decade at 25 degC that the law has in proportion to the temperature is no fault."""
    law = ("-slope * log10(VIN / middle)", "-slope * (ambient / t0) * log10(VIN / middle)")
    constants = ('slope = "1 V"', 'slope = "1 V", t0 = "298.15 K"')
    assert_clean(SlopeTemperature, board("log_ratio", PLAIN_LOG, law, constants))


@pytest.mark.parametrize("name", ["probe", "strip"])
def test_a_single_junction_drifts(board, name):
    """One log transistor takes its output along by about 2 mV/K, with its emitter or its base driven."""
    finding = assert_finds(SlopeTemperature, board(name), {"Q1"})
    change = next(e.value for e in finding.evidence if e.quantity == "change over ambient")
    assert finding.severity is Severity.MAJOR
    assert change / 10 == pytest.approx(2.2e-3, rel=0.15)
    assert "of reading" in finding.consequence


def test_what_the_requirement_allows_is_no_fault(board):
    """An output that may be off by 0.2 V may have a single junction."""
    allowed = (
        '[requirements.level]\noutput = "VOUT"\nlaw = "base + 0 * VIN"\nconstants = { base = "-0.5 V" }\n'
        'accuracy = { absolute = "0.2 V" }\n\n[parts]\n'
    )
    assert_clean(SlopeTemperature, board("probe", ("[parts]\n", allowed)))


@pytest.mark.parametrize("package", ["kept", "alone"])
def test_the_tempco_resistor_takes_it_out(board, cures, package):
    """The resistor that sets the slope, with a tempco that fits its weight and a link to the pair: gone, none new.

    A resistor in a package of its own is linked to the pair's; one that is linked already stays where it is.
    """
    designs = {
        "kept": example("level_meter", ('tempco = "3550 ppm/K", tempco_tolerance = "50 ppm/K"', 'tempco = "0 ppm/K"')),
        "alone": example("expander", PLAIN_ANTILOG, UNLINKED, ALONE, NO_PACKAGE),
    }
    after = cures(designs[package], SlopeTemperature)
    ref = {"kept": "R4", "alone": "R5"}[package]
    assert any(title.startswith(f"make {ref} of 3") for title in after), after
    assert not any(after.values()), after


def test_where_no_edit_can_cure_the_finding_says_why(board):
    """A single junction needs a second one: a remedy without edits that says so."""
    (finding,) = findings_of(board("strip"), SlopeTemperature)
    (remedy,) = finding.remedies
    assert not remedy.edits
    assert "against Q1" in remedy.title
