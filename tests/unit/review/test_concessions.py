"""A concession covers what it names while it is in force; others are pointed out."""

import datetime as dt

import pytest

from rulecheck.api import Concession, Finding, Severity
from rulecheck.findings import finding_id
from rulecheck.review.concessions import covers, in_force

from .toys import DIVIDER, LowResistor, raising, review, rule

ID = finding_id("low-resistor", ["R1"], [], "")


def conceded(lines, rules=(LowResistor,), **options):
    """Findings of the divider with a concession."""
    return review(rules, f"{DIVIDER}[[concessions]]\nreason = 'agreed'\n{lines}\n", **options).findings


@pytest.mark.parametrize(
    "lines",
    ["rule = 'low-resistor'\nparts = ['R1']", "rule = 'low-resistor'\nparts = ['R1', 'R2']", f"finding = '{ID}'"],
)
def test_what_a_concession_names_is_covered(lines):
    """By rule and parts, or by the id of the finding."""
    (finding,) = conceded(lines)
    assert finding.concession.reason == "agreed"
    assert finding.severity is Severity.MAJOR


TWO = Finding("m", parts=("R1", "R2"), nets=("VOUT",), rule="toy", id="toy:00000000")
NET = Finding("m", nets=("VIN", "VOUT"), rule="toy", id="toy:00000001")


@pytest.mark.parametrize(
    ("finding", "parts", "nets", "expected"),
    [
        (TWO, ["R1", "R2"], [], True),
        (TWO, ["R1"], [], False),
        (TWO, ["R1", "R2"], ["VOUT"], True),
        (TWO, ["R1", "R2"], ["VIN"], False),
        (TWO, [], ["VOUT"], True),
        (NET, [], ["VIN", "VOUT", "GND"], True),
        (NET, [], ["VIN"], False),
        (NET, ["R1"], [], False),
        (TWO, [], [], False),
    ],
)
def test_all_parts_and_nets_of_a_finding_must_be_named(finding, parts, nets, expected):
    """A concession for one part of a pair covers nothing about the pair."""
    concession = Concession(rule="toy", reason="r", parts=tuple(parts), nets=tuple(nets))
    assert covers(concession, finding) is expected


def test_a_concession_of_another_rule_covers_nothing():
    """What was agreed on one thing does not hold for another."""
    assert not covers(Concession(rule="other", reason="r", parts=("R1", "R2")), TWO)


@pytest.mark.parametrize(("day", "expected"), [(29, True), (30, True), (31, False)])
def test_the_last_day_is_the_day_named(day, expected):
    """On the day of expiry it still holds."""
    concession = Concession(rule="toy", reason="r", expires=dt.date(2026, 1, 30))
    assert in_force(concession, dt.date(2026, 1, day)) is expected


def test_an_expired_concession_covers_nothing_and_is_pointed_out():
    """The finding is open again, and an observation says which concession it was."""
    lines = "rule = 'low-resistor'\nparts = ['R1']\nexpires = 2026-01-31"
    open_again, observation = conceded(lines)
    assert open_again.concession is None
    assert observation.rule == "concession"
    assert observation.severity is Severity.OBSERVATION
    assert "2026-01-31" in observation.message
    assert ID in observation.message
    assert observation.location.key == "concessions.0"
    (covered,) = conceded(lines, on=dt.date(2026, 1, 31))
    assert covered.concession is not None


def test_a_concession_that_covers_nothing_is_pointed_out():
    """It is out of date, or misspelt."""
    _, observation = conceded("rule = 'low-resistor'\nparts = ['R2']")
    assert observation.rule == "concession"
    assert "covers no finding" in observation.message


def test_a_concession_of_an_unknown_rule_is_pointed_out_with_the_nearest():
    """Whoever misspells a rule is shown the right one."""
    _, observation = conceded("rule = 'low-resistors'\nparts = ['R1']")
    assert "did you mean 'low-resistor'" in observation.message


@pytest.mark.parametrize("options", [{"without": ["low-resistor"]}, {"only": ["other"]}])
def test_a_concession_of_a_rule_that_did_not_run_is_let_be(options):
    """Whether it covers anything is not known."""
    rules = [LowResistor, rule("other")]
    assert not conceded("rule = 'low-resistor'\nparts = ['R2']", rules, **options)


def test_a_concession_of_a_rule_that_failed_is_let_be():
    """Whether it covers anything is not known."""
    assert not conceded("rule = 'toy'\nparts = ['R2']", [rule("toy", raising(ValueError()))])


def test_the_remedy_of_a_concession_is_by_hand():
    """What people agreed on is not edited away."""
    report = review(
        [LowResistor], DIVIDER + "[[concessions]]\nreason = 'r'\nrule = 'low-resistor'\nparts = ['R2']\n"
    ).report()
    (remedy,) = report.findings[1].remedies
    assert remedy.edits == ()
    assert remedy.proven is False
