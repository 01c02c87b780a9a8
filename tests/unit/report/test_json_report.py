"""The JSON report: every outcome fits the schema that ships, and nothing is lost or made up."""

import datetime as dt
import json
import math
from importlib.resources import files

import numpy as np
import pytest
from jsonschema import Draft202012Validator

from rulecheck import __version__
from rulecheck.errors import Problem
from rulecheck.findings import (
    Add,
    Concession,
    DesignReport,
    Evidence,
    Failure,
    Finding,
    Location,
    Move,
    NotRun,
    Remedy,
    Remove,
    Report,
    Set,
    Severity,
    finding_id,
)
from rulecheck.report.json import dump, plain, render

DAY = dt.date(2026, 3, 1)
ID = finding_id("toy", [], [], "")
FINDING = Finding(
    "bad — «µ»", ("Q1",), ("VIN",), Severity.MINOR, consequence="worse", rule="toy", id=ID,
    location=Location("a.toml", 3, 4, "parts.Q1"),
)  # fmt: skip


def schema(name):
    """A schema that ships."""
    return json.loads(files("rulecheck.report").joinpath(name).read_text())


def rendered(*designs):
    """The object of a report of some designs, which must fit the schema."""
    value = json.loads(render(Report(designs, DAY)))
    Draft202012Validator(schema("report_schema.json")).validate(value)
    return value


@pytest.mark.parametrize("name", [f"{word}_schema.json" for word in ("report", "figures", "comparison", "bench")])
def test_the_schemas_are_schemas(name):
    """By the schema of schemas, 2020-12."""
    Draft202012Validator.check_schema(schema(name))


def test_the_head_names_format_program_day_and_counts():
    """Conceded findings are counted apart."""
    conceded = Finding("m", severity=Severity.MAJOR, rule="toy", id=ID, concession=Concession("toy", "agreed"))
    value = rendered(DesignReport("a.toml", findings=(FINDING, conceded)))
    assert value["format"] == 1
    assert value["tool"] == {"name": "rulecheck", "version": __version__}
    assert value["on"] == "2026-03-01"
    assert value["summary"] == {"major": 0, "minor": 1, "observation": 0, "conceded": 1}
    assert value["designs"][0]["findings"][1]["concession"] == {
        "reason": "agreed", "approved_by": None, "expires": None,
    }  # fmt: skip


@pytest.mark.parametrize(
    ("design", "outcome"),
    [
        (DesignReport("a.toml"), "clean"),
        (DesignReport("a.toml", findings=(FINDING,)), "findings"),
        (DesignReport("a.toml", findings=(FINDING,), failures=(Failure("toy", "m"),)), "incomplete"),
        (DesignReport("a.toml", errors=(Problem("a.toml", "k", "m", 1, 2),)), "unreadable"),
    ],
)
def test_the_outcome_is_the_first_that_holds(design, outcome):
    """Unreadable, incomplete, findings, clean."""
    assert rendered(design)["designs"][0]["outcome"] == outcome


def test_an_error_without_a_place_has_none():
    """A made-up line would be worse."""
    (error,) = rendered(DesignReport("a.toml", errors=(Problem("a.toml", "", "m"),)))["designs"][0]["errors"]
    assert error == {"file": "a.toml", "line": None, "column": None, "key": "", "message": "m"}


def test_rules_not_run_name_the_finding_that_stopped_them():
    """By its id."""
    (entry,) = rendered(DesignReport("a.toml", not_run=(NotRun("noise", ID),)))["designs"][0]["not_run"]
    assert entry == {"rule": "noise", "because": ID}


def test_each_edit_has_its_own_shape():
    """With values of TOML, dates too, and of numpy."""
    edits = (
        Set("a.b", np.float64(0.5)),
        Set("a.c", dt.date(2026, 1, 2)),
        Add("parts.R9", {"kind": "resistor", "pins": ("A", "B")}),
        Remove("parts.R1"),
        Move("parts.R4.pins.0", "VIN"),
    )
    remedy = Remedy("Do it", edits, "a", True)
    value = rendered(DesignReport("a.toml", findings=(Finding("m", rule="toy", id=ID, remedies=(remedy,)),)))
    assert value["designs"][0]["findings"][0]["remedies"][0]["edits"] == [
        {"set": "a.b", "to": 0.5},
        {"set": "a.c", "to": "2026-01-02"},
        {"add": "parts.R9", "table": {"kind": "resistor", "pins": ["A", "B"]}},
        {"remove": "parts.R1"},
        {"move": "parts.R4.pins.0", "to": "VIN"},
    ]


def test_an_untried_remedy_is_not_proven():
    """Only what was tried counts."""
    untried = Finding("m", rule="toy", id=ID, remedies=(Remedy("Do it", id="a"),))
    assert rendered(DesignReport("a.toml", findings=(untried,)))["designs"][0]["findings"][0]["remedies"][0] == {
        "id": "a", "title": "Do it", "proven": False, "edits": [],
    }  # fmt: skip


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf, np.float64("nan"), np.float32("inf")])
def test_what_is_not_finite_is_null(value):
    """JSON has no such numbers."""
    evidence = (Evidence("q", value, "V", value),)
    found = rendered(DesignReport("a.toml", findings=(Finding("m", rule="toy", id=ID, evidence=evidence),)))
    assert found["designs"][0]["findings"][0]["evidence"][0]["value"] is None
    assert found["designs"][0]["findings"][0]["evidence"][0]["limit"] is None


def test_arrays_and_numbers_of_numpy_are_plain():
    """With what is not finite in them."""
    value = {"a": np.array([1.0, np.nan]), "b": np.int64(3), "c": np.array([True]), "d": (None, "x")}
    assert plain(value) == {"a": [1.0, None], "b": 3, "c": [True], "d": [None, "x"]}


def test_text_is_kept_as_it_is_and_ends_with_a_line_end():
    """Signs beyond ASCII are legible."""
    text = render(Report((DesignReport("a.toml", findings=(FINDING,)),), DAY))
    assert "bad — «µ»" in text
    assert text.endswith("}\n")
    assert dump({}) == "{}\n"
