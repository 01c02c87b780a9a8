"""The outcome of a review as Markdown, to stand under a merge request."""

from __future__ import annotations

import re
from collections.abc import Iterable, Iterator, Sequence

from rulecheck.errors import EditError, Problem
from rulecheck.findings import DesignReport, Finding, Location, Remedy, Report, Severity
from rulecheck.report.layout import conditions_in_words
from rulecheck.report.remedies_text import mark, unified_diff
from rulecheck.report.wording import (
    CAUTIONS,
    failures_in_words,
    figure,
    limit,
    members,
    not_run_in_words,
    rules_run,
    summary,
    units_of,
)
from rulecheck.review.completion import severity_of
from rulecheck.review.outcome import ReviewedDesign

_MARKS = re.compile(r"([\\`*_\[\]#|~<>&$]|^[-+=]|(?<=^\d)[.)])")
#: Where hosts of merge requests would call a person or make a link of plain words.
_CALLS = re.compile(r"(?<=@)(?=\w)|(?<=:)(?=//)|(?<=www)(?=\.)")
_WORD_JOINER = "\u2060"
_CONTROLS = re.compile(r"[\x00-\x1f\x7f-\x9f]")
_SEVERITIES = sorted(Severity, reverse=True)


def render(report: Report) -> str:
    """Text of a report as Markdown.

    Parameters
    ----------
    report : Report
    """
    lines = ["## Design review by rulecheck", "", f"**{escaped(summary(report))}**", ""]
    if report.designs:
        lines += _table(
            ("design", "revision", "outcome", *(severity.label for severity in _SEVERITIES), "conceded"),
            map(_row, report.designs),
        )
    for design in report.designs:
        lines += _design(design)
    return "\n".join([*lines, "", f"_{escaped(CAUTIONS)}_"]) + "\n"


def _row(design: DesignReport) -> tuple[str, ...]:
    standing = [severity_of(finding) for finding in design.findings if not finding.concession]
    counts = [*map(standing.count, _SEVERITIES), len(design.findings) - len(standing)]
    return (code(design.file), escaped(design.revision), design.outcome, *map(str, counts))


def _design(design: DesignReport) -> Iterator[str]:
    yield from ("", f"### {code(design.file)}" + (f" · {escaped(design.title)}" if design.title else ""), "")
    for problem in design.errors:
        yield f"- **cannot be used:** {_problem(problem)}"
    for words in failures_in_words(design.failures):
        yield f"- **failed:** {escaped(words)}"
    for words in not_run_in_words(design.not_run):
        yield f"- **not run:** {escaped(words)}"
    for finding in design.findings:
        if not finding.concession:
            yield from _finding(finding, design)
    yield from _conceded([finding for finding in design.findings if finding.concession])
    if design.outcome == "clean":
        yield f"Clean: {rules_run(design)}."


def _problem(problem: Problem) -> str:
    place = ":".join(str(part) for part in (problem.file, problem.line, problem.column) if part is not None)
    return " ".join(words for words in (code(place), code(problem.key), escaped(problem.message)) if words)


def _finding(finding: Finding, design: DesignReport) -> Iterator[str]:
    heading = " · ".join(words for words in (severity_of(finding).label, finding.rule, members(finding)) if words)
    yield from ("", f"#### {escaped(heading)}", "", escaped(finding.message), "")
    if finding.consequence:
        yield from (f"Effect: {escaped(finding.consequence)}", "")
    if finding.evidence:
        rows = ((escaped(e.quantity), escaped(figure(e)), escaped(limit(e))) for e in finding.evidence)
        yield from _table(("figure", "found", "sound is"), rows)
        yield ""
    if finding.scenario:
        yield f"- when: {escaped(finding.scenario)}"
    if finding.conditions:
        yield f"- worst at: {escaped(conditions_in_words(finding.conditions, units_of(design)))}"
    yield f"- {_place(finding.location)}id {code(finding.id)}"
    for remedy in finding.remedies:
        yield from _remedy(remedy, design)


def _place(location: Location | None) -> str:
    return f"at {code(f'{location.file}:{location.line}:{location.column}')}, " if location else ""


def _remedy(remedy: Remedy, design: DesignReport) -> Iterator[str]:
    """A remedy, and what it changes in the file where it is proven."""
    yield f"- mend {remedy.id}: {escaped(remedy.title)} **({mark(remedy)})**"
    diff = _diff(remedy, design) if remedy.proven and isinstance(design, ReviewedDesign) else ""
    if diff:
        fenced = _fenced(diff, "diff")
        yield from ("", "  <details><summary>the change</summary>", "")
        yield from (f"  {line}" if line else "" for line in fenced)
        yield from ("", "  </details>", "")


def _diff(remedy: Remedy, design: ReviewedDesign) -> str:
    from rulecheck.review.remedies import edited

    try:
        return unified_diff(design.text, edited(design.text, remedy), design.file)
    except EditError:
        return ""


def _conceded(findings: Sequence[Finding]) -> Iterator[str]:
    if not findings:
        return
    yield from ("", f"<details><summary>conceded: {len(findings)}</summary>", "")
    yield from _table(("finding", "severity", "what", "approved by", "until", "reason"), map(_agreed, findings))
    yield from ("", "</details>")


def _agreed(finding: Finding) -> tuple[str, ...]:
    concession = finding.concession
    agreed = (concession.approved_by, str(concession.expires or ""), concession.reason) if concession else ()
    words = (severity_of(finding).label, finding.message, *agreed)
    return (code(finding.id), *map(escaped, words))


def _table(head: Sequence[str], rows: Iterable[Sequence[str]]) -> list[str]:
    return [f"| {' | '.join(row)} |" for row in (head, ["---"] * len(head), *rows)]


def _fenced(text: str, language: str) -> list[str]:
    """A block of text as it stands, behind a fence longer than any in it."""
    fence = "`" * (max((len(run) for run in re.findall("`+", text)), default=0) + 3)
    return [f"{fence}{language}", *text.replace("\r", "").split("\n")[:-1], fence]


def escaped(text: str) -> str:
    """Words on one line that Markdown shows as they are: no mark, tag, link or call of a person in them.

    Parameters
    ----------
    text : str
    """
    line = _CONTROLS.sub(" ", text).strip()
    return _MARKS.sub(r"\\\1", _CALLS.sub(_WORD_JOINER, line))


def code(text: str) -> str:
    """Words as code, on one line and fit for a table; nothing where there are none.

    Parameters
    ----------
    text : str
    """
    if not text:
        return ""
    line = _CONTROLS.sub(" ", text)
    if re.search(r"[`|\\]", line):  # a table takes the bar also within code
        return escaped(line)
    return f"`{line}`"
