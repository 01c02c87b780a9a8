"""The outcome of a review as text, for reading in a terminal or a pipe."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from rulecheck.errors import Problem
from rulecheck.findings import DesignReport, Finding, Remedy, Report, Severity
from rulecheck.report.layout import LABEL_WIDTH, Layout
from rulecheck.report.remedies_text import mark
from rulecheck.report.wording import (
    CAUTIONS,
    details,
    failures_in_words,
    members,
    not_run_in_words,
    rules_run,
    summary,
    units_of,
)
from rulecheck.review.completion import severity_of

STYLES = {Severity.MAJOR: "red", Severity.MINOR: "yellow", Severity.OBSERVATION: "cyan"}


def render(report: Report, width: int = 80, color: bool = False) -> str:
    """Text of a report.

    Parameters
    ----------
    report : Report
    width : int
        Of the lines, in characters.
    color : bool
        Whether to use colour.
    """
    layout = Layout(width, color)
    lines: list[str] = []
    for design in report.designs:
        lines += [*_design(design, layout), ""]
    lines += layout.wrapped(summary(report))
    lines += ["", *(layout.styled(line, "dim") for line in layout.wrapped(CAUTIONS))]
    return "\n".join(lines) + "\n"


def _design(design: DesignReport, layout: Layout) -> Iterator[str]:
    units = units_of(design)
    yield from (layout.styled(line, "bold") for line in layout.wrapped(_heading(design)))
    for problem in design.errors:
        yield from ["", *_problem(problem, layout)]
    for finding in design.findings:
        yield from ["", *(_conceded if finding.concession else _finding)(finding, units, layout)]
    if design.failures or design.not_run:
        yield ""
    for words in failures_in_words(design.failures):
        yield from layout.labelled("failed", words, "red")
    for words in not_run_in_words(design.not_run):
        yield from layout.labelled("not run", words, "yellow")
    if design.outcome == "clean":
        yield from layout.labelled("clean", rules_run(design), "green")


def _heading(design: DesignReport) -> str:
    revision = f"revision {design.revision}" if design.revision else ""
    return " · ".join(words for words in (design.file, design.title, revision) if words)


def _problem(problem: Problem, layout: Layout) -> Iterator[str]:
    place = ":".join(str(part) for part in (problem.file, problem.line, problem.column) if part is not None)
    yield from layout.labelled("error", f"{place}  {problem.key}".rstrip(), "red")
    yield from layout.wrapped(problem.message, LABEL_WIDTH)


def _finding(finding: Finding, units: Mapping[str, str], layout: Layout) -> Iterator[str]:
    severity = severity_of(finding)
    yield from layout.labelled(severity.label, _subject(finding), STYLES[severity])
    yield from layout.wrapped(finding.message, LABEL_WIDTH)
    for label, text in details(finding, units):
        yield from layout.labelled(f"  {label}", text)
    for remedy in finding.remedies:
        yield from _remedy(remedy, layout)
    yield from _place(finding, layout)


def _subject(finding: Finding) -> str:
    return "  ".join(words for words in (finding.rule, members(finding)) if words)


def _remedy(remedy: Remedy, layout: Layout) -> Iterator[str]:
    style = "green" if remedy.proven else "dim"
    yield from layout.labelled(f"  mend {remedy.id}", f"{remedy.title} [{mark(remedy)}]", style)


def _conceded(finding: Finding, units: Mapping[str, str], layout: Layout) -> Iterator[str]:
    """A finding that was agreed on: what it is, and by whom and why it was let be."""
    concession = finding.concession
    if concession is None:
        return
    yield from layout.labelled("conceded", f"{_subject(finding)}  ({severity_of(finding).label})", "dim")
    yield from layout.wrapped(finding.message, LABEL_WIDTH)
    until = f"until {concession.expires}" if concession.expires else ""
    yield from layout.labelled(
        "  agreed", ", ".join(words for words in (concession.approved_by, until, concession.reason) if words)
    )
    yield from _place(finding, layout)


def _place(finding: Finding, layout: Layout) -> Iterator[str]:
    place = finding.location
    where = f"{' ' * LABEL_WIDTH}{place.file}:{place.line}:{place.column}" if place else ""
    for line in layout.between(where, finding.id):
        yield layout.styled(line, "dim")
