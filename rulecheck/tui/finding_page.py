"""The page that tells what was found: message, consequence, evidence, conditions."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from textual.content import Content

from rulecheck.findings import Evidence, Finding
from rulecheck.report.layout import conditions_in_words, quantity, table
from rulecheck.review.completion import severity_of
from rulecheck.tui.document import Reading
from rulecheck.tui.grouping import sign_of, style_of
from rulecheck.tui.page import Page

RELATIONS = {"<=": "≤", "<": "<", ">=": "≥", ">": ">", "==": "="}


class FindingPage(Page):
    """What was found, in words and figures."""

    title = "1 Finding"

    def content(self, reading: Reading, finding: Finding) -> Content:
        """The text about a finding."""
        return Content("\n").join(_lines(reading, finding))


def _lines(reading: Reading, finding: Finding) -> Iterator[Content]:
    severity = severity_of(finding).label
    where = ", ".join([*finding.parts, *(f"net {net}" for net in finding.nets)])
    yield Content.assemble((f"{sign_of(finding)} {severity}", f"{style_of(finding)} bold"), f"  {where}")
    yield Content.styled(finding.id, "$quiet")
    yield Content("")
    yield Content.styled(finding.message, "bold")
    if finding.consequence:
        yield _labelled("Effect", finding.consequence)
    if finding.scenario:
        yield _labelled("When", finding.scenario)
    if finding.evidence:
        yield Content("")
        yield from _table(finding.evidence)
    if finding.conditions:
        yield Content("")
        yield _labelled("Worst at", conditions_in_words(finding.conditions, reading.report.units))
    yield Content("")
    yield _labelled("Mending", _mending(reading, finding))
    if finding.concession:
        yield from _concession(finding)


def _labelled(name: str, text: str) -> Content:
    return Content.assemble((f"{name}: ", "$strong bold"), text)


def _table(evidence: Sequence[Evidence]) -> Iterator[Content]:
    rows = [("  Figure", "value", "sound is")]
    for piece in evidence:
        limit = "" if piece.limit is None else f"{RELATIONS[piece.relation]} {quantity(piece.limit, piece.unit)}"
        rows.append((f"{_verdict(piece) or ' '} {piece.quantity}", quantity(piece.value, piece.unit), limit))
    head, *body = table(rows, indent=0)
    yield Content.styled(head, "$strong bold")
    for line, piece in zip(body, evidence, strict=True):
        yield Content.styled(line, "$major" if _verdict(piece) else "")


def _verdict(piece: Evidence) -> str:
    """A sign where the figure is beyond its limit."""
    if piece.limit is None:
        return ""
    sound = {
        "<=": piece.value <= piece.limit, "<": piece.value < piece.limit, ">=": piece.value >= piece.limit,
        ">": piece.value > piece.limit, "==": piece.value == piece.limit,
    }[piece.relation]  # fmt: skip
    return "" if sound else "✖"


def _mending(reading: Reading, finding: Finding) -> str:
    if not finding.remedies:
        return "no remedy is known"
    if not reading.tried:
        return "remedies are being tried"
    proven = sum(bool(remedy.proven) for remedy in finding.remedies)
    return f"{len(finding.remedies)} remed{'y' if len(finding.remedies) == 1 else 'ies'}, {proven} proven"


def _concession(finding: Finding) -> Iterator[Content]:
    concession = finding.concession
    if concession is not None:
        until = f" until {concession.expires}" if concession.expires else ""
        by = f" by {concession.approved_by}" if concession.approved_by else ""
        yield _labelled("Conceded", f"{concession.reason}{by}{until}")
