"""From what a rule yields to complete findings: checked, named, placed, merged and put in order."""

from __future__ import annotations

import dataclasses
import math
from collections.abc import Iterable, Mapping, Sequence
from typing import TYPE_CHECKING

from rulecheck.design.keypath import join_key
from rulecheck.findings import Add, Evidence, Finding, Move, Remedy, Remove, Set, Severity, finding_id

if TYPE_CHECKING:
    from rulecheck.api import Rule
    from rulecheck.design.model import Design

RELATIONS = ("<=", "<", ">=", ">", "==")


def findings_from(found: object) -> list[Finding]:
    """The findings a rule's `check` gave, each of the right shape.

    Parameters
    ----------
    found : object
        What `check` returned; a generator is run to its end.

    Raises
    ------
    TypeError
        It is no iterable of proper findings; says what was found instead.
    """
    if isinstance(found, (str, Mapping)) or not isinstance(found, Iterable):
        raise TypeError(f"check gave {_kind(found)}, not findings; yield them, or return a list")
    findings = []
    for item in found:
        if not isinstance(item, Finding):
            raise TypeError(f"check gave {_kind(item)} among its findings")
        for fault in _faults(item):
            raise TypeError(f"finding {item.message!r}: {fault}")
        findings.append(item)
    return findings


def _faults(finding: Finding) -> Iterable[str]:
    """What is wrong with the shape of a finding."""
    if not _all((finding.message,), str) or not finding.message:
        yield "its message is empty or no text"
    for name in ("parts", "nets"):
        members = getattr(finding, name)
        if isinstance(members, str) or not _all(members, str):
            yield f"{name} is {members!r}, not a list of names"
    if finding.severity is not None and not isinstance(finding.severity, Severity):
        yield f"severity is {finding.severity!r}, not a Severity"
    if not _all(finding.evidence, Evidence):
        yield "evidence is not a list of Evidence"
    elif any(evidence.relation not in RELATIONS for evidence in finding.evidence):
        yield f"the relation of its evidence is none of {' '.join(RELATIONS)}"
    if not _all(finding.remedies, Remedy):
        yield "remedies is not a list of Remedy"
    elif not all(_all(remedy.edits, (Set, Add, Remove, Move)) for remedy in finding.remedies):
        yield "the edits of a remedy are not a list of Set, Add, Remove, Move"


def _all(members: object, kind: type | tuple[type, ...]) -> bool:
    return isinstance(members, Sequence) and all(isinstance(member, kind) for member in members)


def _kind(value: object) -> str:
    return "nothing" if value is None else f"a {type(value).__name__}"


def complete(finding: Finding, rule: Rule, cap: Severity, design: Design) -> Finding:
    """A finding with rule, severity, id, place and the ids of its remedies filled in.

    Parameters
    ----------
    finding : Finding
        As its rule gave it.
    rule : Rule
    cap : Severity
        The worst severity it may have.
    design : Design
        Where it is placed.
    """
    severity = rule.default_severity if finding.severity is None else finding.severity
    return dataclasses.replace(
        finding,
        rule=rule.name,
        severity=min(severity, cap),
        parts=tuple(finding.parts),
        nets=tuple(finding.nets),
        id=finding_id(rule.name, finding.parts, finding.nets, finding.subject),
        location=design.locate(_key(finding)),
        evidence=tuple(finding.evidence),
        remedies=tuple(
            dataclasses.replace(remedy, id=letters(i), proven=None) for i, remedy in enumerate(finding.remedies)
        ),
    )


def _key(finding: Finding) -> str:
    """Key path of a finding: what it says, else its first part, else its first net."""
    if finding.at is not None:
        return finding.at
    for table, members in (("parts", finding.parts), ("nets", finding.nets)):
        if members:
            return join_key((table, members[0]))
    return "design"


def letters(index: int) -> str:
    """Letters that count from 0: a, b, ... z, aa, ab."""
    more, last = divmod(index, 26)
    return (letters(more - 1) if more else "") + chr(ord("a") + last)


def severity_of(finding: Finding) -> Severity:
    """Severity of a completed finding."""
    return finding.severity if finding.severity is not None else Severity.OBSERVATION


def merged(findings: Iterable[Finding]) -> list[Finding]:
    """One finding an id: the most severe, of equals the one further beyond its limit, of those the first.

    Parameters
    ----------
    findings : iterable of Finding
        Completed.
    """
    worst: dict[str, Finding] = {}
    for finding in findings:
        known = worst.get(finding.id)
        if known is None or _gravity(finding) > _gravity(known):
            worst[finding.id] = finding
    return list(worst.values())


def _gravity(finding: Finding) -> tuple[Severity, float]:
    return severity_of(finding), max((_excess(evidence) for evidence in finding.evidence), default=0.0)


def _excess(evidence: Evidence) -> float:
    """How far a figure is beyond its limit, as a share of the limit; 0 where it is not or has none."""
    if evidence.limit is None or not math.isfinite(evidence.value):
        return 0.0
    over = evidence.value - evidence.limit
    beyond = {"<": over, "<=": over, ">": -over, ">=": -over, "==": abs(over)}[evidence.relation]
    return max(0.0, beyond) / (abs(evidence.limit) or 1.0)


def in_order(findings: Iterable[Finding]) -> tuple[Finding, ...]:
    """Findings by severity, then rule, then place in the file, then id.

    Parameters
    ----------
    findings : iterable of Finding
        Completed.
    """

    def order(finding: Finding) -> tuple[int, str, int, int, str]:
        place = finding.location
        line, column = (place.line, place.column) if place else (0, 0)
        return -severity_of(finding), finding.rule, line, column, finding.id

    return tuple(sorted(findings, key=order))
