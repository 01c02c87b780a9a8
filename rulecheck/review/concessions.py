"""Concessions: which finding each covers, and what is to be said about the concessions themselves."""

from __future__ import annotations

import datetime as dt
from collections.abc import Iterable, Iterator
from typing import TYPE_CHECKING

from rulecheck.design.keypath import join_key
from rulecheck.findings import Concession, Finding, Remedy, Severity, finding_id
from rulecheck.review.validation import RESERVED_RULE
from rulecheck.review.words import did_you_mean

if TYPE_CHECKING:
    from rulecheck.design.model import Design


def covers(concession: Concession, finding: Finding) -> bool:
    """Whether a concession speaks of a finding: by its id, or by its rule and all of its parts or nets.

    Parameters
    ----------
    concession : Concession
    finding : Finding
        Completed.
    """
    if concession.finding:
        return finding.id == concession.finding
    if finding.rule != concession.rule or not (concession.parts or concession.nets):
        return False
    pairs = ((concession.parts, finding.parts), (concession.nets, finding.nets))
    return all(bool(found) and set(found) <= set(listed) for listed, found in pairs if listed)


def in_force(concession: Concession, on: dt.date) -> bool:
    """Whether a concession has not expired; its last day is `expires`.

    Parameters
    ----------
    concession : Concession
    on : date
        Day of the review.
    """
    return concession.expires is None or on <= concession.expires


def concession_for(finding: Finding, concessions: Iterable[Concession], on: dt.date) -> Concession | None:
    """The first concession in force that covers a finding.

    Parameters
    ----------
    finding : Finding
    concessions : iterable of Concession
    on : date
        Day of the review.
    """
    return next((c for c in concessions if in_force(c, on) and covers(c, finding)), None)


def findings_about(
    design: Design, findings: Iterable[Finding], on: dt.date, judged: Iterable[str], known: Iterable[str]
) -> Iterator[Finding]:
    """Observations on concessions that have expired or that cover nothing.

    Parameters
    ----------
    design : Design
    findings : iterable of Finding
        All findings of the design.
    on : date
        Day of the review.
    judged : iterable of str
        Rules that ran to their end; a concession of another rule is not said to cover nothing.
    known : iterable of str
        Rules in force.
    """
    findings, judged, known = list(findings), set(judged), set(known)
    for index, concession in enumerate(design.concessions):
        rule = rule_of(concession)
        covered = [finding.id for finding in findings if covers(concession, finding)]
        if not in_force(concession, on):
            open_again = f"; open again: {', '.join(covered)}" if covered else ""
            message = f"the concession for {rule} expired on {concession.expires}{open_again}"
            remedy = "agree on it anew and move its date, or mend what it covered"
            yield _observation(design, index, concession, message, remedy)
        elif not covered and (rule in judged or rule not in known):
            unknown = "" if rule in known else f"; there is no rule {rule!r} {did_you_mean(rule, known)}".rstrip()
            message = f"the concession for {rule} covers no finding{unknown}"
            yield _observation(design, index, concession, message, "remove it, or correct what it names")


def rule_of(concession: Concession) -> str:
    """The rule a concession speaks of, also where it names a finding only."""
    return concession.rule or concession.finding.partition(":")[0]


def _observation(design: Design, index: int, concession: Concession, message: str, remedy: str) -> Finding:
    subject = concession.finding or concession.rule
    key = join_key(("concessions", index))
    return Finding(
        message,
        parts=concession.parts,
        nets=concession.nets,
        severity=Severity.OBSERVATION,
        subject=subject,
        consequence="the record of what was agreed does not fit the design",
        remedies=(Remedy(remedy, id="a", proven=False),),
        at=key,
        rule=RESERVED_RULE,
        id=finding_id(RESERVED_RULE, concession.parts, concession.nets, subject),
        location=design.locate(key),
    )
