"""The outcome of a review as text, for reading in a terminal or a pipe."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from rulecheck.errors import Problem
from rulecheck.findings import DesignReport, Evidence, Failure, Finding, NotRun, Remedy, Report, Severity
from rulecheck.report.layout import LABEL_WIDTH, Layout, conditions_in_words, kept_together, quantity
from rulecheck.report.remedies_text import mark
from rulecheck.review.completion import severity_of
from rulecheck.review.outcome import ReviewedDesign

CAUTIONS = (
    "A design aid, not an approval: figures rest on the catalogue data; bench-verify. Circuits that can hurt "
    "someone need independent review under their standards; mains-derived and stored-energy ones, licensed "
    "people under local codes."
)
RELATIONS = {"<=": "at most", "<": "below", ">=": "at least", ">": "above", "==": "exactly"}
STYLES = {Severity.MAJOR: "red", Severity.MINOR: "yellow", Severity.OBSERVATION: "cyan"}
#: Failures of one rule that are shown; the JSON has all of them.
FAILURES_SHOWN = 3


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
    lines += layout.wrapped(_summary(report))
    lines += ["", *(layout.styled(line, "dim") for line in layout.wrapped(CAUTIONS))]
    return "\n".join(lines) + "\n"


def _design(design: DesignReport, layout: Layout) -> Iterator[str]:
    units: Mapping[str, str] = design.units if isinstance(design, ReviewedDesign) else {}
    yield from (layout.styled(line, "bold") for line in layout.wrapped(_heading(design)))
    for problem in design.errors:
        yield from ["", *_problem(problem, layout)]
    for finding in design.findings:
        yield from ["", *(_conceded if finding.concession else _finding)(finding, units, layout)]
    if design.failures or design.not_run:
        yield ""
    yield from _failures(design.failures, layout)
    yield from _not_run(design.not_run, layout)
    if design.outcome == "clean":
        yield from layout.labelled("clean", _rules_run(design), "green")


def _heading(design: DesignReport) -> str:
    revision = f"revision {design.revision}" if design.revision else ""
    return " · ".join(words for words in (design.file, design.title, revision) if words)


def _rules_run(design: DesignReport) -> str:
    count = design.rules_run if isinstance(design, ReviewedDesign) else 0
    return f"nothing found by {_counted(count, 'rule')}"


def _problem(problem: Problem, layout: Layout) -> Iterator[str]:
    place = ":".join(str(part) for part in (problem.file, problem.line, problem.column) if part is not None)
    yield from layout.labelled("error", f"{place}  {problem.key}".rstrip(), "red")
    yield from layout.wrapped(problem.message, LABEL_WIDTH)


def _finding(finding: Finding, units: Mapping[str, str], layout: Layout) -> Iterator[str]:
    severity = severity_of(finding)
    yield from layout.labelled(severity.label, _subject(finding), STYLES[severity])
    yield from layout.wrapped(finding.message, LABEL_WIDTH)
    for label, text in _details(finding, units):
        yield from layout.labelled(f"  {label}", text)
    for remedy in finding.remedies:
        yield from _remedy(remedy, layout)
    yield from _place(finding, layout)


def _subject(finding: Finding) -> str:
    return "  ".join(words for words in (finding.rule, ", ".join(finding.parts) or ", ".join(finding.nets)) if words)


def _details(finding: Finding, units: Mapping[str, str]) -> Iterator[tuple[str, str]]:
    for evidence in finding.evidence:
        yield "figure", _evidence(evidence)
    if finding.scenario:
        yield "when", finding.scenario
    if finding.conditions:
        yield "worst at", conditions_in_words(finding.conditions, units)
    if finding.consequence:
        yield "effect", finding.consequence


def _evidence(evidence: Evidence) -> str:
    limit = ""
    if evidence.limit is not None:
        bound = kept_together(f"{RELATIONS[evidence.relation]} {quantity(evidence.limit, evidence.unit)}")
        limit = f"; sound is {bound}"
    basis = "typical" if evidence.basis == "typ" else "at limits"
    return f"{evidence.quantity} {kept_together(quantity(evidence.value, evidence.unit))} ({basis}){limit}"


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


def _failures(failures: tuple[Failure, ...], layout: Layout) -> Iterator[str]:
    """Failures; rules that failed of one cause stand together, and of many alike the first are shown."""
    by_message: dict[str, list[str]] = {}
    shown: dict[str, int] = {}
    for failure in failures:
        shown[failure.rule] = shown.get(failure.rule, 0) + 1
        if shown[failure.rule] <= FAILURES_SHOWN:
            by_message.setdefault(failure.message, []).append(failure.rule)
    for message, rules in by_message.items():
        yield from layout.labelled("failed", f"{', '.join(rules)}: {message}", "red")
    for rule, count in shown.items():
        if count > FAILURES_SHOWN:
            yield from layout.labelled("failed", f"{rule}: {count - FAILURES_SHOWN} more like these", "red")


def _not_run(entries: tuple[NotRun, ...], layout: Layout) -> Iterator[str]:
    by_cause: dict[str, list[str]] = {}
    for entry in entries:
        by_cause.setdefault(entry.because, []).append(entry.rule)
    for cause, rules in by_cause.items():
        yield from layout.labelled("not run", f"{', '.join(rules)}: the circuit is broken, see {cause}", "yellow")


def _summary(report: Report) -> str:
    counts = [
        f"{report.count(Severity.MAJOR)} major",
        f"{report.count(Severity.MINOR)} minor",
        _counted(report.count(Severity.OBSERVATION), "observation"),
    ]
    if report.conceded:
        counts.append(f"{report.conceded} conceded")
    outcomes = [design.outcome for design in report.designs]
    parts = [f"{_counted(len(outcomes), 'design')}: {', '.join(counts)}"]
    if "unreadable" in outcomes:
        parts.append(f"{outcomes.count('unreadable')} cannot be used")
    if "incomplete" in outcomes:
        parts.append(f"{outcomes.count('incomplete')} incomplete, findings are missing")
    return "; ".join(parts) + f". As of {report.on}."


def _counted(count: int, word: str) -> str:
    return f"{count} {word}" if count == 1 else f"{count} {word}s"
