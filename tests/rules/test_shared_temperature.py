"""Pairs and tempco resistors at one temperature and at several. The boards are invented."""

from math import exp, log

import pytest
from rulecheck_rules.shared_temperature import SharedTemperature

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

RT_LINK = '[[thermal_links]]\nbetween = ["M1", "RT"]\ntheta = "20 K/W"\n'
SPLIT_LOG = ('Q2 = { kind = "npn", model = "pair-npn", package = "M1"', 'Q2 = { kind = "npn", model = "pair-npn"')
SPLIT_ROOT = (
    'Q4 = { kind = "npn", model = "pair-npn", package = "M2"',
    'Q4 = { kind = "npn", model = "pair-npn", package = "M3"',
)
NO_LINK = (RT_LINK, "")
NO_LIGHT_LINK = ('between = ["M1", "RT1"]\ntheta = "20 K/W"\n\n[[thermal_links]]\n', "")
# Two selected transistors in packages of their own, joined by a link, one of them beside a warm amplifier.
WARM_LOG = [
    ('model = "pair-npn", package = "M1"', 'model = "single-npn"'),
    ('parts = ["Q1", "Q2"]\n', 'parts = ["Q1", "Q2"]\nvbe_mismatch = "0.1 mV"\n'),
    (
        RT_LINK,
        RT_LINK.replace("M1", "Q1")
        + '[[thermal_links]]\nbetween = ["Q1", "Q2"]\ntheta = "100 K/W"\n'
        + '[[thermal_links]]\nbetween = ["Q2", "U3"]\ntheta = "100 K/W"\n'
        + '[packages]\nQ1 = { theta_ja = "300 K/W" }\nQ2 = { theta_ja = "300 K/W" }\nU3 = { theta_ja = "150 K/W" }\n',
    ),
]
WARM_LIGHT = [
    (
        'between = ["M1", "RT1"]\ntheta = "20 K/W"\n',
        'between = ["M1", "RT1"]\ntheta = "2000 K/W"\n[[thermal_links]]\nbetween = ["RT1", "U3"]\ntheta = "200 K/W"\n'
        '[packages]\nM1 = { theta_ja = "200 K/W" }\nU3 = { theta_ja = "150 K/W" }\nRT1 = { theta_ja = "500 K/W" }\n',
    )
]
WARM_ROOT = (
    'parts = ["Q3", "Q4"]\n',
    'parts = ["Q3", "Q4"]\n[[thermal_links]]\nbetween = ["M2", "U5"]\ntheta = "100 K/W"\n'
    '[packages]\nM2 = { theta_ja = "300 K/W" }\nU5 = { theta_ja = "150 K/W" }\n',
)


def cost_of(finding):
    """Error over its share of a finding."""
    return next(e.value for e in finding.evidence if e.quantity == "error over its share")


@pytest.mark.parametrize("name", ["log_ratio", "root", "light_ratio"])
def test_one_package_or_a_link_is_sound(board, name):
    """A pair in one package, and a tempco resistor linked to it, are clean; two pairs need no link between them."""
    assert_clean(SharedTemperature, board(name))


def test_an_oven_is_one_temperature(board):
    """Packages held at one temperature need no link; at two temperatures they do."""
    packages = '[packages]\nM1 = { held_temperature = "60 degC" }\nRT = { held_temperature = "60 degC" }\n'
    assert_clean(SharedTemperature, board("log_ratio", (RT_LINK, packages)))
    other = packages.replace('RT = { held_temperature = "60', 'RT = { held_temperature = "70')
    assert_finds(SharedTemperature, board("log_ratio", (RT_LINK, other)), {"Q1", "Q2", "R4"})


@pytest.mark.parametrize(
    ("name", "change", "parts"),
    [
        ("log_ratio", SPLIT_LOG, {"Q1", "Q2"}),
        ("root", SPLIT_ROOT, {"Q3", "Q4"}),
        ("log_ratio", NO_LINK, {"Q1", "Q2", "R4"}),
        ("light_ratio", NO_LIGHT_LINK, {"Q1", "Q2", "R3"}),
    ],
)
def test_unlinked_packages(board, name, change, parts):
    """A pair in two packages, or a tempco resistor away from its pair, without a link is a fault."""
    finding = assert_finds(SharedTemperature, board(name, change), parts)
    assert finding.severity is Severity.MAJOR
    assert cost_of(finding) > 1


def test_two_kelvin_between_junctions(board):
    """The error is that of two base-emitter voltages 2 K apart, by the textbook formula."""
    design = board("log_ratio", SPLIT_LOG)
    finding = assert_finds(SharedTemperature, design, {"Q1", "Q2"})
    ambient = finding.conditions["ambient"]
    thermal = 8.617333262e-5 * ambient
    current = 5.0 / 499e3
    # dVBE/dT = (VBE - (3 VT + VG))/T, as quoted from electronics.stackexchange 35692 and 499317 (S. Pefhany)
    growth = (ambient / 298.15) ** 3 * exp(1.12 / 8.617333262e-5 * (1 / 298.15 - 1 / ambient))
    vbe = thermal * log(current / (25e-15 * growth))
    slope = (vbe - (3 * thermal + 1.12)) / ambient
    gain = 16.9 * 298.15 / ambient
    assert cost_of(finding) == pytest.approx(abs(2 * slope * gain) / 5e-3, rel=0.03)


def test_two_kelvin_at_a_tempco_resistor(board):
    """2 K at a resistor of 3354 ppm/K change the slope by 0.67 %, of one decade from the middle."""
    finding = assert_finds(SharedTemperature, board("log_ratio", NO_LINK))
    coldest = 1 + 3354e-6 * (273.15 - 298.15)
    assert cost_of(finding) == pytest.approx(1.0 * (2 * 3354e-6 / coldest) / 5e-3, rel=0.02)


@pytest.mark.parametrize(
    ("name", "change", "loosened"),
    [("log_ratio", NO_LINK, ("20 mV", "500 mV")), ("root", SPLIT_ROOT, ('reading = "1 %"', 'reading = "95 %"'))],
)
def test_unlinked_where_little_is_asked(board, name, change, loosened):
    """Where 2 K between them would cost less than the share, it is a small fault."""
    finding = assert_finds(SharedTemperature, board(name, change, loosened))
    assert finding.severity is Severity.MINOR


@pytest.mark.parametrize(
    ("name", "changes", "parts"),
    [
        ("log_ratio", WARM_LOG, {"Q1", "Q2"}),
        ("light_ratio", WARM_LIGHT, {"Q1", "Q2", "R3"}),
        ("root", [WARM_ROOT], {"Q1", "Q2", "Q3", "Q4"}),
    ],
)
def test_computed_differences(board, name, changes, parts):
    """Linked, but warmed unequally by more than the share: a small fault, with the difference."""
    finding = assert_finds(SharedTemperature, board(name, *changes), parts)
    assert finding.severity is Severity.MINOR
    assert finding.evidence[0].unit == "K"
    assert finding.evidence[0].value > 0.1
    assert cost_of(finding) > 1


def test_pairs_at_two_temperatures_multiply_the_exponent(board):
    """Between pairs only the ratio of absolute temperatures matters: it is the error of the exponent."""
    finding = assert_finds(SharedTemperature, board("root", WARM_ROOT))
    apart, ambient, volts = finding.evidence[0].value, finding.conditions["ambient"], finding.conditions["VIN"]
    # made equal, the exponent 0.5 of VIN over R1·R_2's 1 V changes by the relative difference of temperatures
    change = abs(0.5 * log(volts / 1.0)) * apart / ambient
    law = 10.0 * (volts / 10.0) ** 0.5
    assert cost_of(finding) == pytest.approx(change * law / (0.25 * (0.01 * law + 5e-3)), rel=0.05)


def test_pairs_at_one_temperature_are_sound(board):
    """Both packages beside amplifiers as warm as each other are clean, whatever the temperature."""
    both = WARM_ROOT[1].replace(
        "[packages]", '[[thermal_links]]\nbetween = ["M1", "U2"]\ntheta = "100 K/W"\n[packages]'
    )
    both += 'M1 = { theta_ja = "300 K/W" }\nU2 = { theta_ja = "150 K/W" }\n'
    assert not findings_of(board("root", (WARM_ROOT[0], both)), SharedTemperature)


@pytest.mark.parametrize(
    ("name", "changes", "title"),
    [
        ("log_ratio", [SPLIT_LOG], "move Q1 and Q2 into one package"),
        ("root", [SPLIT_ROOT], "move Q3 and Q4 into one package"),
        ("log_ratio", [NO_LINK], "couple M1 and RT thermally"),
        ("light_ratio", [NO_LIGHT_LINK], "couple M1 and RT1 thermally"),
        ("log_ratio", WARM_LOG, "couple Q1 and Q2 more closely, 7.8 K/W"),
    ],
)
def test_remedies_cure(board, cures, name, changes, title):
    """A package or a link takes the finding away and brings nothing."""
    assert cures(board(name, *changes), SharedTemperature, title) == {title: []}


def test_a_link_between_pairs_cures(board):
    """Packages of two pairs, linked, come to one temperature."""
    design = board("root", WARM_ROOT)
    (remedy,) = assert_finds(SharedTemperature, design).remedies
    assert remedy.title == "couple M1 and M2 thermally"
    assert_clean(SharedTemperature, mended(design, remedy))
