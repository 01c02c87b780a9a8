"""A design's settings of rules override the defaults; what will not do is refused with its place."""

import pytest

from rulecheck.errors import DesignError
from rulecheck.findings import Severity
from rulecheck.review.registry import registry_of
from rulecheck.review.settings import read_settings
from rulecheck.testing import design_from

from .toys import DIVIDER, LowResistor, review, rule

REGISTRY = registry_of([LowResistor, rule("other")])


def settings(lines):
    """Settings of the rules for a design with some lines more."""
    return read_settings(design_from(DIVIDER + lines), REGISTRY)


def problems(lines):
    """Problems of a design with some lines more."""
    with pytest.raises(DesignError, match="rules") as refused:
        settings(lines)
    return refused.value.problems


def test_without_settings_the_defaults_hold():
    """Every rule has settings, enabled and uncapped."""
    read = settings("")
    assert read["low-resistor"].values.limit == 1e3
    assert read["other"].enabled
    assert read["other"].cap is Severity.MAJOR


@pytest.mark.parametrize("written", ['"2.2 kohm"', "2200", "2.2e3"])
def test_a_setting_takes_a_quantity_or_a_number_in_si(written):
    """Both are the same value."""
    assert settings(f"[rules.low-resistor]\nlimit = {written}\n")["low-resistor"].values.limit == 2200.0


def test_a_wrong_dimension_is_a_problem_with_its_place():
    """File, line, column, key, what was found."""
    (problem,) = problems('[rules.low-resistor]\nlimit = "10 kHz"\n')
    assert (problem.line, problem.column) == (DIVIDER.count("\n") + 2, 9)
    assert problem.key == "rules.low-resistor.limit"
    assert "10 kHz" in problem.message
    assert "ohm" in problem.message


def test_an_unknown_setting_is_a_problem_with_the_nearest_word():
    """Whoever misspells a setting is shown the right one."""
    (problem,) = problems("[rules.low-resistor]\nlimt = 3\n")
    assert problem.key == "rules.low-resistor.limt"
    assert "did you mean 'limit'" in problem.message


def test_an_unknown_rule_is_a_problem_with_the_nearest_word():
    """Whoever misspells a rule is shown the right one."""
    (problem,) = problems("[rules.low-resistors]\nlimit = 3\n")
    assert problem.key == "rules.low-resistors"
    assert "did you mean 'low-resistor'" in problem.message


def test_a_bad_severity_and_a_bad_switch_are_problems():
    """Both are said at once, in the order of the file."""
    found = problems('[rules.other]\nseverity = "grave"\nenabled = "no"\n')
    assert [problem.key for problem in found] == ["rules.other.severity", "rules.other.enabled"]
    assert "'grave'" in found[0].message
    assert "true or false" in found[1].message


def test_a_disabled_rule_does_not_run():
    """`enabled = false` leaves a rule out."""
    assert review([LowResistor]).findings
    assert not review([LowResistor], DIVIDER + "[rules.low-resistor]\nenabled = false\n").findings


def test_severity_is_a_cap():
    """A worse finding is lowered, a milder one stays."""
    lowered = review([LowResistor], DIVIDER + '[rules.low-resistor]\nseverity = "observation"\n')
    assert lowered.findings[0].severity is Severity.OBSERVATION
    stays = review([LowResistor], DIVIDER + '[rules.low-resistor]\nseverity = "major"\n')
    assert stays.findings[0].severity is Severity.MAJOR


def test_a_setting_reaches_the_rule():
    """The rule judges by the design's limit."""
    raised = review([LowResistor], DIVIDER + '[rules.low-resistor]\nlimit = "10 kohm"\n')
    assert {part for finding in raised.findings for part in finding.parts} == {"R1", "R2"}
