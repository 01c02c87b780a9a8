"""The Markdown report: what a reader of a merge request sees, read back with a parser of CommonMark."""

import datetime as dt

import pytest
from markdown_it import MarkdownIt

from rulecheck.errors import Problem
from rulecheck.findings import (
    Concession,
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
from rulecheck.report.markdown import code, escaped, render
from rulecheck.review.outcome import ReviewedDesign

DAY = dt.date(2026, 3, 1)
READER = MarkdownIt("gfm-like", {"linkify": False})
HOSTILE = [
    "<script>alert(1)</script>",
    "a | b | c",
    "`code` and ``more``",
    "[text](https://example.org) ![x](y)",
    "*bold* _thin_ ~~gone~~ **x**",
    "- a list",
    "1. a list",
    "7) a list",
    "+ a list",
    "# a heading",
    "> a quotation",
    "    code by its indent",
    "=== and ---",
    "&amp; &lt;",
    "C:\\d\\*",
    "two\nlines\r\n\nand a paragraph",
]


def finding(**attributes):
    """A finding with its essentials."""
    essentials = {
        "message": "Q1 is hot",
        "parts": ("Q1",),
        "severity": Severity.MAJOR,
        "rule": "toy",
        "id": "toy:00000000",
        "location": Location("a.toml", 3, 4, "parts.Q1"),
    }
    return Finding(**{**essentials, **attributes})


def read(*designs):
    """The tokens of a report of some designs, and the words that they show."""
    tokens = READER.parse(render(Report(designs, DAY)))
    shown = "\n".join(words(token) for token in tokens if token.type in ("inline", "fence"))
    return tokens, shown.replace("\u2060", "")


def words(token):
    """What a reader sees of a token."""
    if token.type != "inline":
        return token.content
    return "".join("\n" if child.type == "softbreak" else child.content for child in token.children)


def kinds(tokens):
    """Kinds of the tokens, those within lines too."""
    return [token.type for token in tokens] + [child.type for token in tokens for child in token.children or ()]


@pytest.mark.parametrize("text", HOSTILE)
def test_words_of_a_design_are_shown_as_they_are(text):
    """No mark, tag, table cell or link comes of them, wherever they stand."""
    shown = " ".join(text.split())
    conceded = finding(message=text, concession=Concession("toy", text, approved_by=text))
    plain = read(*(DesignReport("a.toml", word, findings=(
        finding(message=word, consequence=word, scenario=word, parts=(word,), evidence=(Evidence(word, 1.0),),
                remedies=(Remedy(word, id="a"),)),
        finding(message=word, concession=Concession("toy", word, approved_by=word)),
    )) for word in ("word",)))  # fmt: skip
    found = read(DesignReport("a.toml", text, findings=(
        finding(message=text, consequence=text, scenario=text, parts=(text,), evidence=(Evidence(text, 1.0),),
                remedies=(Remedy(text, id="a"),)),
        conceded,
    )))  # fmt: skip
    assert kinds_but_text(found[0]) == kinds_but_text(plain[0])
    assert " ".join(found[1].split()).count(shown) == plain[1].count("word")


def kinds_but_text(tokens):
    """Kinds of tokens without those of plain text, which may come in pieces."""
    return [kind for kind in kinds(tokens) if not kind.startswith("text")]


@pytest.mark.parametrize("text", [*HOSTILE, "nozzle 1.toml", "a`b.toml", "a|b.toml"])
def test_names_of_files_are_shown_as_they_are_in_a_table(text):
    """As code where that can hold them."""
    tokens, shown = read(DesignReport(text))
    assert kinds(tokens).count("td_open") == 7
    assert " ".join(text.split()) in " ".join(shown.split())


def test_nobody_is_called_and_no_control_character_is_passed_on():
    """Hosts call people named behind an at sign; terminals obey escape sequences."""
    assert escaped("ask @someone") == "ask @\u2060someone"
    assert "\x1b" not in escaped("\x1b[2J") + code("\x1b[2J")


def test_the_summary_counts_by_design_and_severity():
    """Conceded findings apart."""
    milder = finding(severity=Severity.MINOR)
    agreed = finding(concession=Concession("toy", "strong"))
    text = render(
        Report((DesignReport("a.toml", "A", "C", (finding(), finding(), milder, agreed)), DesignReport("b.toml")), DAY)
    )
    assert "**2 designs: 2 major, 1 minor, 0 observations, 1 conceded. As of 2026-03-01.**" in text
    assert "| `a.toml` | C | findings | 2 | 1 | 0 | 1 |\n| `b.toml` |  | clean | 0 | 0 | 0 | 0 |" in text
    assert "Clean: nothing found by 0 rules." in text


def test_a_finding_shows_figures_conditions_place_and_remedies():
    """All that the text report has."""
    shown = read(
        ReviewedDesign(
            "a.toml",
            findings=(
                finding(
                    consequence="it drifts",
                    conditions={"VIN": 0.1},
                    scenario="supply absent",
                    evidence=(Evidence("power", 0.02, "W", 0.01, basis="limit"),),
                    remedies=(Remedy("Take a bigger one", (Set("a", 1),), "a", False), Remedy("Cool it", id="b")),
                ),
            ),
            units={"VIN": "V"},
        )
    )[1].replace("\u00a0", " ")
    for words_ in (
        "major · toy · Q1", "Q1 is hot", "Effect: it drifts", "power\n20 mW (at limits)\nat most 10 mW",
        "when: supply absent", "worst at: VIN 100 mV", "at a.toml:3:4, id toy:00000000",
        "mend a: Take a bigger one (tried, not proven)", "mend b: Cool it (by hand)",
    ):  # fmt: skip
        assert words_ in shown


def test_a_proven_remedy_shows_its_change_whatever_the_file_holds():
    """As a difference, behind a fence that the text cannot close."""
    text = 'x = "````"\nvalue = "3 kohm"\n'
    remedy = Remedy("Make it smaller", (Set("value", "1 kohm"),), "a", True)
    tokens, _ = read(ReviewedDesign("a.toml", findings=(finding(remedies=(remedy,)),), text=text))
    (fence,) = [token for token in tokens if token.type == "fence"]
    assert fence.info == "diff"
    assert fence.content == (
        '--- a.toml\n+++ a.toml\n@@ -1,2 +1,2 @@\n x = "````"\n-value = "3 kohm"\n+value = "1 kohm"\n'
    )


def test_concessions_are_listed_with_approver_day_and_reason():
    """Folded away, in a table."""
    agreed = Concession("toy", "the source is strong", approved_by="A. Reviewer", expires=dt.date(2026, 6, 30))
    text = render(Report((DesignReport("a.toml", findings=(finding(concession=agreed),)),), DAY))
    assert "<details><summary>conceded: 1</summary>" in text
    assert "| `toy:00000000` | major | Q1 is hot | A. Reviewer | 2026-06-30 | the source is strong |" in text


def test_what_is_missing_is_said():
    """Unusable files with their place, failed rules, and rules not run."""
    shown = read(
        DesignReport("a.toml", errors=(Problem("a.toml", "parts.R1", "no value", 2, 3),)),
        DesignReport("b.toml", failures=(Failure("toy", "it broke"),), not_run=(NotRun("noise", "toy:00000000"),)),
    )[1]
    assert "cannot be used: a.toml:2:3 parts.R1 no value" in shown
    assert "failed: toy: it broke" in shown
    assert "not run: noise: the circuit is broken, see toy:00000000" in shown
