"""Findings in groups by part, rule or severity, and the choice of those that hold the words searched for."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

from rulecheck.findings import Finding, Severity
from rulecheck.review.completion import severity_of

ORDERS = ("severity", "part", "rule")
#: A sign for each severity, so that it is told without colour.
SIGNS = {Severity.MAJOR: "▲", Severity.MINOR: "◆", Severity.OBSERVATION: "○"}
CONCEDED = "≈"


@dataclass(frozen=True, slots=True)
class Group:
    """Findings under one heading."""

    name: str
    findings: tuple[Finding, ...]


def grouped(findings: Sequence[Finding], order: str) -> list[Group]:
    """Findings in groups, the groups in the order of their first finding; by part a finding stands under each.

    Parameters
    ----------
    findings : sequence of Finding
        The worst first.
    order : str
        One of `ORDERS`.
    """
    groups: dict[str, list[Finding]] = {}
    for finding in findings:
        for name in _names(finding, order):
            groups.setdefault(name, []).append(finding)
    return [Group(name, tuple(members)) for name, members in groups.items()]


def _names(finding: Finding, order: str) -> Sequence[str]:
    if order == "rule":
        return (finding.rule,)
    if order == "severity":
        return ("conceded",) if finding.concession else (severity_of(finding).label,)
    return tuple(dict.fromkeys(finding.parts)) or tuple(dict.fromkeys(finding.nets)) or ("the whole design",)


def matching(findings: Sequence[Finding], words: str) -> list[Finding]:
    """Findings that hold every one of the words somewhere, whatever their case.

    Parameters
    ----------
    findings : sequence of Finding
    words : str
    """
    sought = words.casefold().split()
    return [finding for finding in findings if all(word in _text(finding) for word in sought)]


def _text(finding: Finding) -> str:
    parts = (finding.id, finding.message, finding.consequence, severity_of(finding).label, *finding.parts,
             *finding.nets)  # fmt: skip
    return "\n".join(parts).casefold()


def sign_of(finding: Finding) -> str:
    """The sign of a finding's severity, or that of a concession."""
    return CONCEDED if finding.concession else SIGNS[severity_of(finding)]


def style_of(finding: Finding) -> str:
    """The colour that goes with the sign."""
    return "$conceded" if finding.concession else f"${severity_of(finding).label}"


def label(finding: Finding, order: str) -> str:
    """A line for a finding, without what its group says already."""
    where = ", ".join(finding.parts) or ", ".join(finding.nets)
    return {"rule": where, "part": finding.rule}.get(order, f"{where} {finding.rule}".strip()) or finding.rule


def counted(findings: Sequence[Finding]) -> str:
    """How many findings there are of each severity: ``2 major, 1 minor``."""
    words = [
        f"{SIGNS[severity]} {count} {severity.label}"
        for severity in sorted(Severity, reverse=True)
        if (count := sum(severity_of(f) is severity and f.concession is None for f in findings))
    ]
    conceded = sum(f.concession is not None for f in findings)
    return ", ".join(words + ([f"{CONCEDED} {conceded} conceded"] if conceded else [])) or "no findings"
