"""Rules run each on its own; what they give is checked, completed, merged and put in order."""

import numpy as np
import pytest

from rulecheck.api import AnalysisError, Evidence, Finding, Remedy, Set, Severity
from rulecheck.findings import NotRun, finding_id
from rulecheck.review.judging import Judging
from rulecheck.review.registry import registry_of
from rulecheck.review.settings import RuleSettings

from .toys import DIVIDER, LowResistor, raising, review, rule


def report(*rules, **options):
    """The report on the divider."""
    return review(rules, **options).report()


def fault(found):
    """The message of the only rule's failure."""
    (failure,) = report(rule("toy", found)).failures
    assert failure.rule == "toy"
    return failure.message


def test_a_finding_is_completed():
    """Rule, severity, id and place are filled in; remedies get letters."""
    (finding,) = report(LowResistor).findings
    assert finding.rule == "low-resistor"
    assert finding.severity is Severity.MAJOR
    assert finding.id == finding_id("low-resistor", ["R1"], [], "")
    assert finding.location.key == "parts.R1"
    assert finding.location.line == DIVIDER.splitlines().index("[parts.R1]") + 1
    assert [remedy.id for remedy in finding.remedies] == ["a", "b", "c"]


def test_a_finding_may_say_its_own_severity_and_place():
    """What the rule gives holds."""
    given = Finding("m", parts=["R1"], severity=Severity.OBSERVATION, at="parts.R2.value")
    (finding,) = report(rule("toy", [given])).findings
    assert finding.severity is Severity.OBSERVATION
    assert finding.location.key == "parts.R2.value"
    assert DIVIDER.splitlines()[finding.location.line - 1][finding.location.column - 1 :] == '"4.7 kohm"'


def test_without_parts_the_first_net_is_the_place():
    """A finding of a net is placed there."""
    (finding,) = report(rule("toy", [Finding("m", nets=["VIN"])])).findings
    assert finding.location.key == "nets.VIN"


@pytest.mark.parametrize("error", [ValueError("odd"), AnalysisError("no figure"), SystemExit(3), RecursionError()])
def test_a_rule_that_raises_fails_alone(error):
    """Its failure has the kind of error; the other rules' findings are there."""
    outcome = report(rule("toy", raising(error)), LowResistor)
    (failure,) = outcome.failures
    assert failure.rule == "toy"
    assert type(error).__name__ in failure.message
    assert str(error) in failure.message
    assert [finding.rule for finding in outcome.findings] == ["low-resistor"]
    assert outcome.outcome == "incomplete"


def test_a_rule_that_fails_half_way_gives_nothing():
    """Half of its findings might be taken for all of them."""

    def half(_review):
        yield Finding("first", parts=["R1"])
        raise ValueError("second")

    outcome = report(rule("toy", half))
    assert outcome.findings == ()
    assert len(outcome.failures) == 1


def test_an_interrupt_is_not_caught():
    """The user's wish to stop ends the review."""
    with pytest.raises(KeyboardInterrupt):
        report(rule("toy", raising(KeyboardInterrupt())))


@pytest.mark.parametrize(
    ("found", "words"),
    [
        (None, "nothing"),
        (3, "a int"),
        ("text", "a str"),
        ([3], "a int among"),
        ([Finding("m", parts="R1")], "parts is 'R1'"),
        ([Finding("m", nets=[1])], "nets"),
        ([Finding("")], "message"),
        ([Finding("m", severity="major")], "severity is 'major'"),
        ([Finding("m", evidence=["x"])], "evidence"),
        ([Finding("m", evidence=[Evidence("q", 1.0, relation="=<")])], "relation"),
        ([Finding("m", remedies=["x"])], "remedies"),
        ([Finding("m", remedies=[Remedy("t", ["x"])])], "edits"),
        ([Finding("m", at="parts..R1")], "parts..R1"),
    ],
)
def test_a_rule_that_gives_the_wrong_thing_fails_alone(found, words):
    """The failure says what was given."""
    assert words in fault(found)


def test_findings_of_one_id_are_merged_to_the_worst():
    """The more severe stays; of equals the one further beyond its limit."""

    def at(value, severity=None):
        return Finding(f"{value}", parts=["R1"], severity=severity, evidence=[Evidence("q", value, "1", 1.0)])

    (finding,) = report(rule("toy", [at(2.0), at(5.0), at(3.0)])).findings
    assert finding.message == "5.0"
    (finding,) = report(rule("toy", [at(5.0), at(2.0, Severity.MAJOR)])).findings
    assert finding.message == "2.0"


@pytest.mark.parametrize(("relation", "worse", "milder"), [("<=", 3.0, 2.0), (">=", 0.2, 0.5), ("==", -4.0, 3.0)])
def test_further_beyond_the_limit_follows_the_relation(relation, worse, milder):
    """A floor is missed by less, a ceiling by more."""
    found = [
        Finding(f"{value}", evidence=[Evidence("q", value, "1", 1.0, relation)]) for value in (milder, worse, milder)
    ]
    (finding,) = report(rule("toy", found)).findings
    assert finding.message == f"{worse}"


def test_findings_with_another_subject_stay_apart():
    """A rule may find two things at one part."""
    assert len(report(rule("toy", [Finding("m", subject="one"), Finding("m", subject="two")])).findings) == 2


def test_findings_stand_by_severity_then_rule_then_place():
    """The order is the same whatever order rules and findings come in."""
    second = [Finding("m", parts=["R2"]), Finding("m", parts=["R1"])]
    rules = [
        rule("beta", second),
        rule("alpha", second),
        rule("gamma", [Finding("m", severity=Severity.MAJOR)]),
    ]
    expected = [("gamma", ()), ("alpha", ("R1",)), ("alpha", ("R2",)), ("beta", ("R1",)), ("beta", ("R2",))]
    for order in (rules, rules[::-1]):
        assert [(finding.rule, finding.parts) for finding in report(*order).findings] == expected


BROKEN = rule("broken", [Finding("open", parts=["R1"])], severity=Severity.MAJOR, blocks=True)
NEEDY = rule("needy", raising(RuntimeError("must not run")), needs=("operating_points",))


def test_a_broken_circuit_stops_the_rules_that_need_analyses():
    """They are listed with the finding that stops them; rules that need none run."""
    outcome = report(NEEDY, LowResistor, BROKEN)
    assert outcome.not_run == (NotRun("needy", finding_id("broken", ["R1"], [], "")),)
    assert {finding.rule for finding in outcome.findings} == {"broken", "low-resistor"}
    assert outcome.outcome == "findings"


@pytest.mark.parametrize("severity", [Severity.MINOR, Severity.OBSERVATION])
def test_a_lesser_finding_stops_no_rule(severity):
    """Only a major finding says that the circuit is broken."""
    mild = rule("broken", [Finding("open")], severity=severity, blocks=True)
    assert report(mild, rule("needy", needs=("structure",))).not_run == ()


def test_a_conceded_break_stops_no_rule():
    """What was agreed on is no break; analyses then run, and fail where they cannot."""
    agreed = '[[concessions]]\nrule = "broken"\nparts = ["R1"]\nreason = "test point"\n'
    outcome = report(BROKEN, rule("needy", needs=("structure",)), text=DIVIDER + agreed)
    assert outcome.not_run == ()
    assert outcome.findings[0].concession.reason == "test point"


class Analyses:
    """Stands in for a review whose analyses misbehave in ways that a real one seldom does."""

    def __init__(self, design):
        self.design = design
        self.asked = 0

    @property
    def loops(self):
        """Loops that cannot be computed."""
        self.asked += 1
        raise np.linalg.LinAlgError("Singular matrix")


class Unsolved:
    """Operating points of which two have no solution."""

    def failures(self):
        """A line a point."""
        return ["no operating point at VIN = 1; net VOUT moved last", "no operating point at VIN = 2; net A moved last"]


def judged(stand_in, *rules):
    """What rules say of a stand-in."""
    registry = registry_of(rules)
    settings = {name: RuleSettings(entry.rule.Settings()) for name, entry in registry.entries.items()}
    return Judging(stand_in, settings, lambda finding: None).run(registry.rules)


def test_an_analysis_that_fails_is_asked_once_and_fails_each_rule_that_needs_it():
    """The failure names the analysis and the kind of error."""
    stand_in = Analyses(review([LowResistor]).design)
    found = judged(stand_in, rule("one", needs=("loops",)), rule("two", needs=("loops",)), LowResistor)
    assert [failure.rule for failure in found.failures] == ["one", "two"]
    assert "loops: LinAlgError: Singular matrix" in found.failures[0].message
    assert stand_in.asked == 1
    assert [finding.rule for finding in found.findings] == ["low-resistor"]


def test_an_unknown_analysis_fails_the_rule():
    """A misspelt need is no reason to run without it."""
    stand_in = Analyses(review([LowResistor]).design)
    assert "oparating" in judged(stand_in, rule("one", needs=("oparating_points",))).failures[0].message


@pytest.mark.parametrize("member", ["operating_points", "faults"])
def test_points_without_a_solution_are_failures(member):
    """Every point is reported with what moved last, once, whatever the rules make of it."""
    stand_in = Analyses(review([LowResistor]).design)
    setattr(stand_in, member, Unsolved())
    found = judged(stand_in, rule("one", needs=(member,)), rule("two", needs=(member,)))
    assert [failure.rule for failure in found.failures] == [member.replace("_", "-")] * 2
    assert "net VOUT moved last" in found.failures[0].message


def test_progress_is_told():
    """Rules are counted, then remedies."""
    told = []
    report(LowResistor, rule("other"), progress=lambda *step: told.append(step))
    assert told[:2] == [(0, 2, "low-resistor"), (1, 2, "other")]
    assert told[2:] == [(i, 3, f"remedy {letter} of low-resistor") for i, letter in enumerate("abc")]


def test_only_and_without_choose_the_rules():
    """One runs what it names, the other leaves out what it names."""
    two = rule("two", [Finding("m", remedies=[Remedy("t", [Set("design.title", "x")])])])
    assert {f.rule for f in report(LowResistor, two, only=["two"]).findings} == {"two"}
    assert {f.rule for f in report(LowResistor, two, without=["two"]).findings} == {"low-resistor"}


def test_a_broken_circuit_is_heard_where_only_another_rule_is_asked_for():
    """A rule that cannot run because of it would else seem to find nothing."""
    outcome = report(NEEDY, BROKEN, LowResistor, only=["needy"])
    assert [entry.rule for entry in outcome.not_run] == ["needy"]
    assert [finding.rule for finding in outcome.findings] == ["broken"]


def test_what_does_not_break_the_circuit_is_not_heard_where_another_rule_is_asked_for():
    """Only what was asked for is reported then."""
    outcome = report(rule("needy"), BROKEN, only=["needy"])
    assert outcome.findings == ()
