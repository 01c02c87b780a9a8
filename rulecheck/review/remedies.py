"""Trying remedies: the edited design is reviewed again before a remedy is called proven."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterable
from dataclasses import replace
from typing import TYPE_CHECKING

from rulecheck.errors import RulecheckError
from rulecheck.findings import Failure, Finding, Remedy, Severity
from rulecheck.review.completion import severity_of
from rulecheck.review.judging import Judgement, Progress, words_of

if TYPE_CHECKING:
    from rulecheck.design.model import Design


def edited(text: str, remedy: Remedy) -> str:
    """Text of a design file with the edits of a remedy made.

    Parameters
    ----------
    text : str
    remedy : Remedy

    Raises
    ------
    EditError
        The edits do not fit the text.
    """
    from rulecheck.design.edit import apply_edits

    return apply_edits(text, remedy.edits)


class Trials:
    """Trials of the remedies of one design.

    Parameters
    ----------
    design : Design
    before : Judgement
        What the rules say of it as it is.
    judge_again : callable
        What the rules that ran say of a text in its place.

    Attributes
    ----------
    failures : list of Failure
        Remedies that could not be tried through a fault of their rule.
    """

    def __init__(self, design: Design, before: Judgement, judge_again: Callable[[str], Judgement]) -> None:
        self._text = design.text
        self._before = before
        self._judge_again = judge_again
        self._judgements: dict[str, Judgement | None] = {}
        self.failures: list[Failure] = []

    def proven(self, finding: Finding, remedy: Remedy) -> bool:
        """Whether the finding is gone after the edits, with no major or minor come and nothing failing anew.

        Parameters
        ----------
        finding : Finding
            Completed.
        remedy : Remedy
            One of its remedies.
        """
        if not remedy.edits:
            return False
        try:
            after = self._after(edited(self._text, remedy))
        except RulecheckError:  # the edits do not fit, or the edited design is no design: not proven
            return False
        except Exception as error:  # noqa: BLE001 - edits are a rule's, and may hold anything
            self.failures.append(Failure(finding.rule, f"remedy {remedy.title!r}: {words_of(error)}"))
            return False
        return after is not None and is_cured(finding, self._before, after)

    def tried(self, findings: Iterable[Finding], progress: Progress | None = None) -> list[Finding]:
        """Findings with every remedy marked proven or not.

        Parameters
        ----------
        findings : iterable of Finding
        progress : callable, optional
        """
        findings = list(findings)
        total, done = sum(len(finding.remedies) for finding in findings), 0
        marked = []
        for finding in findings:
            remedies = []
            for remedy in finding.remedies:
                if progress:
                    progress(done, total, f"remedy {remedy.id} of {finding.rule}")
                remedies.append(replace(remedy, proven=self.proven(finding, remedy)))
                done += 1
            marked.append(replace(finding, remedies=tuple(remedies)))
        return marked

    def _after(self, text: str) -> Judgement | None:
        """Judgement of a text; two remedies with the same edits are judged once."""
        if text not in self._judgements:
            self._judgements[text] = None  # stands where judging raises
            self._judgements[text] = self._judge_again(text)
        return self._judgements[text]


def is_cured(finding: Finding, before: Judgement, after: Judgement) -> bool:
    """Whether a finding is gone and nothing has come in its place.

    Parameters
    ----------
    finding : Finding
    before, after : Judgement
        Of the design as it was and as it is after the edits.
    """
    known = {other.id: severity_of(other) for other in before.findings}
    # what rules say that a broken circuit had silenced was there before, unheard
    silenced = {rule.rule for rule in before.not_run}
    for other in (other for other in after.findings if other.rule not in silenced):
        new = other.id not in known
        worse = severity_of(other) > known.get(other.id, Severity.OBSERVATION)
        if other.id == finding.id or worse or (new and _is_disguise(other, finding)):
            return False
    all_ran = set(before.ran) <= set(after.ran)  # a rule switched off, or stopped by a broken circuit, proves nothing
    return all_ran and not _failed(after) - _failed(before)


def _is_disguise(other: Finding, finding: Finding) -> bool:
    """Whether another finding is of the same rule at the same parts, or nets where there are none."""
    same_place = set(other.parts) == set(finding.parts) if finding.parts else set(other.nets) == set(finding.nets)
    return other.rule == finding.rule and same_place


def _failed(judgement: Judgement) -> Counter[str]:
    """Number of failures by rule or analysis."""
    return Counter(failure.rule for failure in judgement.failures)
