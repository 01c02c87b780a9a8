"""Fixed currents: undisturbed, straight, from a reference, in the middle; and not. The boards are invented."""

from math import log10

import pytest
from rulecheck_rules.reference_current import ReferenceCurrent

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, findings_of, mended

VREF = 'VREF = { role = "reference", voltage = "5 V", tolerance = "0.1 %", tempco = "10 ppm/K" }\n'
REFERENCE_LOAD = ("[parts]\n", '[parts]\nR9 = { kind = "resistor", value = "10 kohm", pins = ["VREF", "GND"] }\n')
FROM_SUPPLY = [('"499 kohm"', '"1.5 Mohm"'), ('["VREF", "S2"]', '["V15P", "S2"]'), REFERENCE_LOAD]
ROOT_FROM_SUPPLY = [
    (VREF, ""), ('"499 kohm"', '"1.5 Mohm"'), ('["VREF", "S3"]', '["V15P", "S3"]'),
    ('"1 Mohm"', '"3 Mohm"'), ('["VREF", "S2"]', '["V15P", "S2"]'),
]  # fmt: skip
# The square root made a ratio of two currents from one supply: it cancels.
RATIOMETRIC = [
    *ROOT_FROM_SUPPLY, ('R5 = { kind = "resistor", value = "10 kohm"', 'R5 = { kind = "resistor", value = "20 kohm"'),
    ("full * sqrt(VIN / full)", "VIN"), ('constants = { full = "10 V" }\n', ""), ('"316 kohm"', '"100 kohm"'),
]  # fmt: skip
BIPOLAR_LOG = ('U2 = { kind = "op-amp", model = "bifet-amp"', 'U2 = { kind = "op-amp", model = "bipolar-amp"')
BIPOLAR_ROOT = ('U4 = { kind = "op-amp", model = "bifet-amp"', 'U4 = { kind = "op-amp", model = "bipolar-amp"')
LARGE_ROOT = [('"499 kohm"', '"20 kohm"'), ('"316 kohm"', '"12.7 kohm"')]
LARGE_LIGHT = [('"1.6 uA"', '"500 uA"')]
LOW_SUPPLY = [
    ('N = "V15P"', 'N = "VLOW"'),
    ("VOUT = {", 'VLOW = { role = "supply", voltage = "1.5 V", tolerance = "5 %" }\nVOUT = {'),
    ("[parts]\n", '[parts]\nR9 = { kind = "resistor", value = "10 kohm", pins = ["VLOW", "GND"] }\n'),
]
SOURCE_IN_ROOT = (
    'R6 = { kind = "resistor", value = "499 kohm", tolerance = "0.1 %", tempco = "25 ppm/K", pins = ["VREF", "S3"] }',
    'I3 = { kind = "current-source", value = "10.02 uA", compliance = "6 V", pins = { P = "S3", N = "VREF" } }',
)


def found(board, subject, name, *changes):
    """The finding of a subject in a board with changes, None where there is none."""
    return next((f for f in findings_of(board(name, *changes), ReferenceCurrent) if f.subject == subject), None)


@pytest.mark.parametrize("name", ["log_ratio", "root", "light_ratio"])
def test_sound_references(board, name):
    """Currents from a reference or a source, large against bias, in the middle of the signal, are clean."""
    assert_clean(ReferenceCurrent, board(name))


@pytest.mark.parametrize(("name", "change", "part"), [("log_ratio", BIPOLAR_LOG, "Q2"), ("root", BIPOLAR_ROOT, "Q3")])
def test_bias_against_the_reference(board, name, change, part):
    """A bias current above a hundredth of the fixed current is a small fault, at its limit."""
    finding = found(board, "bias", name, change)
    assert finding.severity is Severity.MINOR
    assert list(finding.parts) == [part]
    # 5 V over 499 kohm less 80 nA of bias, over 250 nA and half of 20 nA: the figures of the model
    assert finding.evidence[0].value == pytest.approx((5 / 499e3 - 80e-9) / 260e-9, rel=2e-3)


def test_bias_at_the_hottest(board):
    """A bias current that doubles counts as at the highest ambient."""
    small = [('"499 kohm"', '"100 Mohm"')]
    finding = found(board, "bias", "log_ratio", *small)
    added = (100e-12 + 10e-12) * 2 ** (25 / 10)  # A, by the model: limit, half offset current, doubling every 10 K
    assert finding.evidence[0].value == pytest.approx((5 / 100e6 - 20e-12 * 2**2.5) / added, rel=5e-3)


@pytest.mark.parametrize(("name", "changes"), [("root", LARGE_ROOT), ("light_ratio", LARGE_LIGHT)])
def test_conformity_of_the_reference(board, name, changes):
    """A fixed current so large that resistance and knee cost more than a share is a small fault."""
    finding = found(board, "conformity", name, *changes)
    assert finding.severity is Severity.MINOR
    assert finding.consequence.startswith("VOUT moves by")


@pytest.mark.parametrize(("name", "changes"), [("log_ratio", FROM_SUPPLY), ("root", ROOT_FROM_SUPPLY)])
def test_current_from_a_supply(board, name, changes):
    """A fixed current from a supply moves the output by more than half a percent: a fault."""
    finding = found(board, "supply", name, *changes)
    assert finding.severity is Severity.MAJOR
    assert list(finding.nets) == ["V15P"]


def test_effect_of_a_supply_on_a_logarithm(board):
    """A supply 5 % low takes a volt a decade down by log10(0.95), which is 5.1 % of the ratio of currents."""
    finding = found(board, "supply", "log_ratio", *FROM_SUPPLY)
    assert finding.evidence[0].value == pytest.approx(-log10(0.95) / log10(2.718281828), rel=5e-3)
    assert "22.3 mV" in finding.consequence


def test_a_ratiometric_design_has_no_such_fault(board):
    """Two fixed currents from one supply whose ratio is all that counts are clean."""
    assert found(board, "supply", "root", *RATIOMETRIC) is None


@pytest.mark.parametrize(
    ("name", "changes", "source", "short"),
    [("light_ratio", LOW_SUPPLY, "I1", 1.5 * 0.95), ("root", [SOURCE_IN_ROOT], "I3", 5.0)],
)
def test_compliance(board, name, changes, source, short):
    """A source with less across it than it needs is a fault."""
    finding = found(board, "compliance", name, *changes)
    assert finding.severity is Severity.MAJOR
    assert list(finding.parts) == [source]
    assert finding.evidence[0].value == pytest.approx(short, abs=2e-3)


@pytest.mark.parametrize(
    ("name", "change", "severity"),
    [
        ("log_ratio", ('"499 kohm"', '"1 Gohm"'), Severity.OBSERVATION),
        ("log_ratio", ('"499 kohm"', '"6.2 Gohm"'), Severity.MINOR),
        ("light_ratio", ('"1.6 uA"', '"5 nA"'), Severity.OBSERVATION),
        ("light_ratio", ('"1.6 uA"', '"0.8 nA"'), Severity.MINOR),
    ],
)
def test_outside_the_log_range(board, name, change, severity):
    """Outside the range of the maker by less than a decade is an observation, by more a small fault."""
    finding = found(board, "log range", name, change)
    assert finding.severity is severity


@pytest.mark.parametrize(
    ("name", "change"), [("log_ratio", ('"499 kohm"', '"75 Mohm"')), ("light_ratio", ('"1.6 uA"', '"12 nA"'))]
)
def test_centring(board, name, change):
    """More than two decades from the middle of the current it is compared with is an observation."""
    finding = found(board, "centring", name, change)
    assert finding.severity is Severity.OBSERVATION
    assert finding.evidence[0].value == pytest.approx(2.15, abs=0.05)


@pytest.mark.parametrize(
    ("name", "change", "value"),
    [("log_ratio", ('"499 kohm"', '"75 Mohm"'), "499 kohm"), ("root", ('"1 Mohm"', '"150 Mohm"'), "1 Mohm")],
)
def test_the_centred_resistor_is_preferred(board, name, change, value):
    """The remedy gives the E96 value for the geometric middle, 10 uA of 1 to 100 uA and 5 uA of 0.5 to 50 uA."""
    design = board(name, change)
    finding = found(board, "centring", name, change)
    (edit,) = finding.remedies[0].edits
    assert (edit.key, edit.to) == ("parts.R2.value", value)
    assert finding.id not in {f.id for f in findings_of(mended(design, finding.remedies[0]), ReferenceCurrent)}


@pytest.mark.parametrize(
    ("name", "changes", "title"),
    [
        ("log_ratio", [BIPOLAR_LOG], "use bifet-amp for U2"),
        ("log_ratio", FROM_SUPPLY, "feed R2 from VREF, with 499 kohm"),
        ("root", LARGE_ROOT, "smaller currents at the same ratio: R6 121 kohm, R8 76.8 kohm"),
        ("log_ratio", [('"499 kohm"', '"75 Mohm"'), ('middle = "1.002 V"', 'middle = "6.67 mV"')],
         "a current of 10 uA, R2 499 kohm"),
        ("light_ratio", LOW_SUPPLY, "connect I1 to V15P"),
    ],
)  # fmt: skip
def test_remedies_take_the_finding_away(board, name, changes, title):
    """Each remedy, made and reviewed by this rule again, leaves nothing of its finding."""
    design = board(name, *changes)
    finding, remedy = next(
        (f, r) for f in findings_of(design, ReferenceCurrent) for r in f.remedies if r.title == title
    )
    assert finding.id not in {f.id for f in findings_of(mended(design, remedy), ReferenceCurrent)}


@pytest.mark.parametrize(
    ("name", "changes", "title"),
    [
        ("root", [BIPOLAR_ROOT], "use bifet-amp for U4"),
        ("log_ratio", FROM_SUPPLY, "feed R2 from VREF, with 499 kohm"),
        ("root", ROOT_FROM_SUPPLY, "feed R2 from a new reference VREF, with 1 Mohm"),
        ("light_ratio", [('"1.6 uA"', '"12 nA"')], "a current of 1.58 uA, I1 1.59 uA"),
        ("light_ratio", LOW_SUPPLY, "connect I1 to V15P"),
    ],
)
def test_remedies_cure(board, cures, name, changes, title):
    """Each remedy takes the finding away and brings nothing, with every rule in force."""
    assert cures(board(name, *changes), ReferenceCurrent, title) == {title: []}
