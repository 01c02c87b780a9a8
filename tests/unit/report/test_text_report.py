"""The text report: what is shown of each outcome, and how it is laid out."""

import datetime as dt
import re

import pytest

from rulecheck.errors import Problem
from rulecheck.findings import (
    DesignReport,
    Evidence,
    Failure,
    Finding,
    Location,
    NotRun,
    Remedy,
    Report,
    Set,
    Severity,
)
from rulecheck.report.layout import Layout, conditions_in_words, quantity, table
from rulecheck.report.text import render
from rulecheck.review.outcome import ReviewedDesign

DAY = dt.date(2026, 3, 1)
LONG = "The bases of Q1 and Q2 differ by more than the pair can bear over the whole range of temperature and input."


def finding(**attributes):
    """A finding with its essentials."""
    essentials = {
        "message": LONG,
        "parts": ("Q1", "Q2"),
        "severity": Severity.MAJOR,
        "rule": "toy",
        "id": "toy:00000000",
        "location": Location("a.toml", 3, 4, "parts.Q1"),
    }
    return Finding(**{**essentials, **attributes})


def shown(*designs, **options):
    """Text of a report of some designs."""
    return render(Report(designs, DAY), **options)


@pytest.mark.parametrize("width", [50, 80, 133])
def test_no_line_is_wider_than_asked_for(width):
    """Text is wrapped, and the lines fill the width."""
    text = shown(DesignReport("a.toml", "A title", findings=(finding(consequence=LONG),)), width=width)
    assert width - 15 < max(map(len, text.splitlines())) <= width


def test_an_id_that_does_not_fit_beside_the_place_stands_below_it():
    """A long path leaves no room for it."""
    place = Location("boards/" * 8 + "a.toml", 3, 4, "parts.Q1")
    lines = shown(DesignReport("a.toml", findings=(finding(location=place),))).splitlines()
    at = lines.index(" " * 12 + "boards/" * 8 + "a.toml:3:4")
    assert lines[at + 1] == " " * 68 + "toy:00000000"


def test_a_quantity_is_not_broken_from_its_unit():
    """Wherever the line ends."""
    conditions = {f"V{i}": 0.1 * i for i in range(1, 20)}
    units = dict.fromkeys(conditions, "V")
    design = ReviewedDesign("a.toml", findings=(finding(conditions=conditions),), units=units)
    for width in range(50, 70):
        text = shown(design, width=width)
        worst = text[text.index("worst at") : text.index("a.toml:3:4")].splitlines()[:-1]
        assert len(worst) > 3
        assert all(re.search(r"\d m?V,?$", line) for line in worst)


def test_without_colour_there_are_no_control_sequences():
    """And with colour the same text is under them."""
    design = DesignReport("a.toml", findings=(finding(remedies=(Remedy("Do", (Set("a", 1),), "a", True),)),))
    plain, coloured = shown(design), shown(design, color=True)
    assert "\x1b" not in plain
    assert "\x1b[1;31mmajor" in coloured
    assert re.sub(r"\x1b\[[0-9;]*m", "", coloured) == plain


def test_designs_stand_one_after_another_under_their_names():
    """With title and revision where there are any."""
    text = shown(DesignReport("a.toml", "First", "C"), DesignReport("b.toml"))
    assert text.index("a.toml · First · revision C\n") < text.index("\nb.toml\n")


def test_a_finding_of_nets_names_them():
    """Where there is no part."""
    assert "major       toy  VIN" in shown(DesignReport("a.toml", findings=(finding(parts=(), nets=("VIN",)),)))


def test_figures_say_what_they_rest_on():
    """Typical data, or limits of data."""
    evidence = (Evidence("a", 1e-3, "V", 2e-3, "<"), Evidence("b", 2.0, "1", 1.0, "==", basis="limit"))
    text = shown(DesignReport("a.toml", findings=(finding(evidence=evidence),)))
    assert "  figure    a 1 mV (typical); sound is below 2 mV\n" in text
    assert "  figure    b 2 (at limits); sound is exactly 1\n" in text


def test_a_unit_that_the_program_does_not_know_is_shown_as_it_stands():
    """A team's rule may count what it likes."""
    assert quantity(3.0, "pieces") == "3 pieces"
    assert quantity(0.05, "V") == "50 mV"


def test_conditions_have_their_units():
    """Kelvins are shown as degrees Celsius; what has no unit is a number."""
    words = conditions_in_words({"ambient": 328.15, "I1": 1e-6, "P1": 0.5}, {"ambient": "degC", "I1": "A"})
    assert words.replace("\u00a0", " ") == "ambient 55 degC, I1 1 uA, P1 0.5"


def test_an_error_has_its_place_and_key():
    """As much of the place as is known."""
    problems = (Problem("a.toml", "parts.R1", "bad", 3, 4), Problem("a.toml", "", "unreadable"))
    text = shown(DesignReport("a.toml", errors=problems))
    assert "error       a.toml:3:4  parts.R1\n            bad\n" in text
    assert "error       a.toml\n            unreadable\n" in text
    assert "1 cannot be used" in text


def test_failures_of_one_cause_stand_together():
    """A failed analysis fails many rules with the same words."""
    failures = (Failure("noise", "no figures"), Failure("latch-up", "no figures"), Failure("odd", "other"))
    text = shown(DesignReport("a.toml", failures=failures))
    assert "failed      noise, latch-up: no figures\n" in text
    assert "failed      odd: other\n" in text


def test_of_many_failures_alike_the_first_are_shown():
    """The others are counted."""
    text = shown(DesignReport("a.toml", failures=tuple(Failure("points", f"point {i}") for i in range(40))))
    assert "points: point 2\n" in text
    assert "point 3" not in text
    assert "failed      points: 37 more like these\n" in text


def test_rules_not_run_are_listed_once_with_the_cause():
    """The finding that says so is named."""
    text = shown(DesignReport("a.toml", not_run=(NotRun("noise", "open:1"), NotRun("latch-up", "open:1"))))
    assert "not run     noise, latch-up: the circuit is broken, see open:1\n" in text


@pytest.mark.parametrize(("count", "words"), [(1, "1 rule"), (27, "27 rules")])
def test_a_clean_design_says_how_many_rules_found_nothing(count, words):
    """Nothing found by nothing would be no news."""
    assert f"clean       nothing found by {words}\n" in shown(ReviewedDesign("a.toml", rules_run=count))


def test_the_summary_counts_all_designs():
    """Singular and plural, and the day of the review."""
    observation = finding(severity=Severity.OBSERVATION)
    text = shown(DesignReport("a.toml", findings=(finding(), observation)), DesignReport("b.toml"))
    assert "\n2 designs: 1 major, 0 minor, 1 observation. As of 2026-03-01.\n" in text


def test_the_cautions_stand_at_the_end_in_two_or_three_lines():
    """At 80 columns."""
    *_, last = shown(DesignReport("a.toml")).split("\n\n")
    assert last.startswith("A design aid, not an approval")
    assert len(last.splitlines()) in (2, 3)


def test_columns_of_a_table_are_aligned():
    """The first to the left, the others to the right."""
    assert table([("a", "1"), ("long", "22")]) == ["  a      1", "  long  22"]


def test_a_label_stands_before_the_first_line_only():
    """The others are indented as far."""
    assert Layout(40).labelled("label", "word " * 12) == [
        "label       " + "word word word word word",
        "            word word word word word",
        "            word word",
    ]
