"""Words that the reports for people share: of a finding, its figures, and the summary of a review."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from rulecheck.findings import DesignReport, Evidence, Failure, Finding, NotRun, Report, Severity
from rulecheck.report.layout import conditions_in_words, kept_together, quantity
from rulecheck.review.outcome import ReviewedDesign

CAUTIONS = (
    "A design aid, not an approval: figures rest on the catalogue data; bench-verify. Circuits that can hurt "
    "someone need independent review under their standards; mains-derived and stored-energy ones, licensed "
    "people under local codes."
)
RELATIONS = {"<=": "at most", "<": "below", ">=": "at least", ">": "above", "==": "exactly"}
#: Failures of one rule that are shown; the JSON has all of them.
FAILURES_SHOWN = 3


def units_of(design: DesignReport) -> Mapping[str, str]:
    """Units of the conditions of a design, where they are known.

    Parameters
    ----------
    design : DesignReport
    """
    return design.units if isinstance(design, ReviewedDesign) else {}


def rules_run(design: DesignReport) -> str:
    """What is said of a design without findings.

    Parameters
    ----------
    design : DesignReport
    """
    count = design.rules_run if isinstance(design, ReviewedDesign) else 0
    return f"nothing found by {counted(count, 'rule')}"


def members(finding: Finding) -> str:
    """The parts of a finding, else its nets.

    Parameters
    ----------
    finding : Finding
    """
    return ", ".join(finding.parts) or ", ".join(finding.nets)


def details(finding: Finding, units: Mapping[str, str]) -> Iterator[tuple[str, str]]:
    """Figures, scenario, conditions and effect of a finding, each behind its label.

    Parameters
    ----------
    finding : Finding
    units : mapping of str to str
        Of the conditions, by name.
    """
    for evidence in finding.evidence:
        yield "figure", _evidence(evidence)
    if finding.scenario:
        yield "when", finding.scenario
    if finding.conditions:
        yield "worst at", conditions_in_words(finding.conditions, units)
    if finding.consequence:
        yield "effect", finding.consequence


def _evidence(evidence: Evidence) -> str:
    bound = limit(evidence)
    return f"{evidence.quantity} {figure(evidence)}" + (f"; sound is {bound}" if bound else "")


def figure(evidence: Evidence) -> str:
    """A figure with its unit and what it rests on.

    Parameters
    ----------
    evidence : Evidence
    """
    basis = "typical" if evidence.basis == "typ" else "at limits"
    return f"{kept_together(quantity(evidence.value, evidence.unit))} ({basis})"


def limit(evidence: Evidence) -> str:
    """What a sound design has in place of a figure, or nothing.

    Parameters
    ----------
    evidence : Evidence
    """
    if evidence.limit is None:
        return ""
    return kept_together(f"{RELATIONS[evidence.relation]} {quantity(evidence.limit, evidence.unit)}")


def failures_in_words(failures: tuple[Failure, ...]) -> Iterator[str]:
    """Failures; rules that failed of one cause stand together, and of many alike the first are shown.

    Parameters
    ----------
    failures : tuple of Failure
    """
    by_message: dict[str, list[str]] = {}
    shown: dict[str, int] = {}
    for failure in failures:
        shown[failure.rule] = shown.get(failure.rule, 0) + 1
        if shown[failure.rule] <= FAILURES_SHOWN:
            by_message.setdefault(failure.message, []).append(failure.rule)
    for message, rules in by_message.items():
        yield f"{', '.join(rules)}: {message}"
    for rule, count in shown.items():
        if count > FAILURES_SHOWN:
            yield f"{rule}: {count - FAILURES_SHOWN} more like these"


def not_run_in_words(entries: tuple[NotRun, ...]) -> Iterator[str]:
    """Rules not run, together where they are for one cause.

    Parameters
    ----------
    entries : tuple of NotRun
    """
    by_cause: dict[str, list[str]] = {}
    for entry in entries:
        by_cause.setdefault(entry.because, []).append(entry.rule)
    for cause, rules in by_cause.items():
        yield f"{', '.join(rules)}: the circuit is broken, see {cause}"


def summary(report: Report) -> str:
    """Designs and findings of a review, counted.

    Parameters
    ----------
    report : Report
    """
    counts = [
        f"{report.count(Severity.MAJOR)} major",
        f"{report.count(Severity.MINOR)} minor",
        counted(report.count(Severity.OBSERVATION), "observation"),
    ]
    if report.conceded:
        counts.append(f"{report.conceded} conceded")
    outcomes = [design.outcome for design in report.designs]
    parts = [f"{counted(len(outcomes), 'design')}: {', '.join(counts)}"]
    if "unreadable" in outcomes:
        parts.append(f"{outcomes.count('unreadable')} cannot be used")
    if "incomplete" in outcomes:
        parts.append(f"{outcomes.count('incomplete')} incomplete, findings are missing")
    return "; ".join(parts) + f". As of {report.on}."


def counted(count: int, word: str) -> str:
    """A number of things, in words.

    Parameters
    ----------
    count : int
    word : str
        One of them.
    """
    return f"{count} {word}" if count == 1 else f"{count} {word}s"
