"""Applying remedies to the text of a design, one at a time, reviewed again after each."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from rulecheck.design.keypath import split_key
from rulecheck.errors import CommandError
from rulecheck.findings import Finding, Remedy
from rulecheck.review.remedies import edited
from rulecheck.review.runner import DesignReview
from rulecheck.review.words import did_you_mean

#: A remedy that is proven again and again without end would be a rule's fault; this ends it.
MOST_ROUNDS = 200


@dataclass(frozen=True, slots=True)
class Step:
    """One remedy applied for one finding."""

    finding: Finding
    remedy: Remedy


@dataclass(frozen=True, slots=True)
class Fixed:
    """What came of applying remedies: findings before, the steps, and the review of the design after them."""

    before: tuple[Finding, ...]
    steps: tuple[Step, ...]
    review: DesignReview

    @property
    def text(self) -> str:
        """Text of the design with all remedies applied."""
        return self.review.design.text


def choose(review: DesignReview, selector: str) -> Step:
    """The remedy that ``ID`` or ``ID:REMEDY`` names; without a remedy the first proven one.

    Parameters
    ----------
    review : DesignReview
    selector : str

    Raises
    ------
    CommandError
        There is no such finding or remedy, or nothing that may be applied.
    """
    findings = {finding.id: finding for finding in review.findings}
    rule, _, rest = selector.partition(":")
    number, _, letter = rest.partition(":")
    name = f"{rule}:{number}"
    if name not in findings:
        hint = did_you_mean(name, findings) or "'rulecheck fix FILE' lists them"
        raise CommandError(f"there is no finding {selector!r}", hint)
    finding = findings[name]
    remedies = {remedy.id: remedy for remedy in finding.remedies}
    if not letter:
        proven = [remedy for remedy in finding.remedies if review.trials.proven(finding, remedy)]
        if not proven:
            raise CommandError(f"no remedy of {name} is proven", f"name one to apply it nevertheless: {name}:a")
        return Step(finding, proven[0])
    if letter not in remedies:
        raise CommandError(f"{name} has no remedy {letter!r}", f"it has {', '.join(remedies) or 'none'}")
    if not remedies[letter].edits:
        raise CommandError(f"remedy {letter} of {name} is not one that an edit can make", remedies[letter].title)
    return Step(finding, remedies[letter])


def apply(review: DesignReview, step: Step) -> Fixed:
    """Apply one remedy and review the design again.

    Parameters
    ----------
    review : DesignReview
        Of the design as it is.
    step : Step

    Raises
    ------
    RulecheckError
        The edits do not fit, or what they make is no design.
    """
    return Fixed(review.findings, (step,), review.after(step.remedy))


def apply_all_proven(review: DesignReview) -> Fixed:
    """Apply one proven remedy after another until none is left; findings with a concession are let be.

    Parameters
    ----------
    review : DesignReview
        Of the design as it is.
    """
    before = review.findings
    steps: list[Step] = []
    seen = {review.design.text}
    while len(steps) < MOST_ROUNDS:
        step = next(_proven(review, seen), None)
        if step is None:
            break
        review = review.after(step.remedy)
        seen.add(review.design.text)
        steps.append(step)
    return Fixed(before, tuple(steps), review)


def _proven(review: DesignReview, seen: set[str]) -> Iterator[Step]:
    """Proven remedies that lead to a text not met before, so that two rules cannot undo each other for ever."""
    for finding in review.findings:
        for remedy in finding.remedies if finding.concession is None else ():
            if changes_what_is_asked(remedy):
                continue  # narrowing the task until the design passes is for people to decide
            if review.trials.proven(finding, remedy) and edited(review.design.text, remedy) not in seen:
                yield Step(finding, remedy)


ASKED = ("range", "survives", "cutoff", "role", "drive")


def changes_what_is_asked(remedy: Remedy) -> bool:
    """Whether a remedy changes the task instead of the circuit: inputs' ranges, requirements, ambient, concessions."""
    for edit in remedy.edits:
        table, *rest = split_key(edit.key)
        key = rest[1] if len(rest) > 1 else ""
        if table in ("requirements", "environment", "concessions", "rules") or (table == "nets" and key in ASKED):
            return True
        if table == "parts" and key in ("photocurrent", "survives"):
            return True
    return False
