"""Running rules on one design, each on its own."""

from __future__ import annotations

import traceback
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

from rulecheck.findings import Failure, Finding, NotRun, Severity
from rulecheck.review.completion import complete, findings_from, merged

if TYPE_CHECKING:
    from rulecheck.api import Review, Rule
    from rulecheck.findings import Concession
    from rulecheck.review.settings import RuleSettings

#: Called with how much is done, of how much, and what comes now.
Progress = Callable[[int, int, str], None]


@dataclass(frozen=True, slots=True)
class Judgement:
    """What rules say of one design; `ran` names those that ran, also those that failed."""

    findings: tuple[Finding, ...]
    failures: tuple[Failure, ...]
    not_run: tuple[NotRun, ...]
    ran: tuple[str, ...]


class Judging:
    """One run of rules over one review.

    Parameters
    ----------
    review : Review
    settings : mapping of str to RuleSettings
        By rule.
    concession_for : callable
        The concession that covers a completed finding, or None.
    """

    def __init__(
        self,
        review: Review,
        settings: Mapping[str, RuleSettings],
        concession_for: Callable[[Finding], Concession | None],
    ) -> None:
        self._review = review
        self._settings = settings
        self._concession_for = concession_for
        self._analyses: dict[str, str] = {}

    def run(self, rules: Sequence[Rule], progress: Progress | None = None) -> Judgement:
        """Run rules, those first that can find the circuit broken.

        Parameters
        ----------
        rules : sequence of Rule
        progress : callable, optional
        """
        findings: list[Finding] = []
        failures: list[Failure] = []
        not_run: list[NotRun] = []
        ran: list[str] = []
        blocked_by = ""
        for done, rule in enumerate(sorted(rules, key=lambda rule: (not rule.blocks_analysis, rule.name))):
            if progress:
                progress(done, len(rules), rule.name)
            if blocked_by and rule.needs:
                not_run.append(NotRun(rule.name, blocked_by))
                continue
            ran.append(rule.name)
            result = self._judge(rule)
            if isinstance(result, Failure):
                failures.append(result)
                continue
            findings += result
            if rule.blocks_analysis and not blocked_by:
                blocked_by = next((f.id for f in result if f.severity is Severity.MAJOR and not f.concession), "")
        failures += self._points_without_solution()
        return Judgement(tuple(findings), tuple(failures), tuple(not_run), tuple(ran))

    def _judge(self, rule: Rule) -> list[Finding] | Failure:
        """Findings of one rule, or its failure; a rule that fails half-way gives none."""
        for need in rule.needs:
            if fault := self._analyse(need):
                return Failure(rule.name, fault)
        own = self._settings[rule.name]
        try:
            found = findings_from(rule.check(self._review, own.values))
            whole = merged(complete(finding, rule, own.cap, self._review.design) for finding in found)
        except (Exception, SystemExit) as error:  # noqa: BLE001 - a rule may raise anything, and fails alone
            return Failure(rule.name, words_of(error))
        return [replace(finding, concession=self._concession_for(finding)) for finding in whole]

    def _analyse(self, need: str) -> str:
        """Compute a member of the review; words for what failed, computed once, or nothing."""
        if need not in self._analyses:
            try:
                getattr(self._review, need)
                self._analyses[need] = ""
            except Exception as error:  # noqa: BLE001 - whatever an analysis raises, the other rules go on
                self._analyses[need] = f"{need.replace('_', ' ')}: {words_of(error)}"
        return self._analyses[need]

    def _points_without_solution(self) -> Iterator[Failure]:
        """A failure for every operating point that did not converge, of whatever the rules have asked for."""
        computed = vars(self._review)  # a member is kept there once it has been asked for
        for name in ("operating_points", "faults"):
            if name in computed:
                yield from (Failure(name.replace("_", "-"), line) for line in computed[name].failures())


def words_of(error: BaseException) -> str:
    """Kind, message and place of an error, in words."""
    frames = traceback.extract_tb(error.__traceback__)
    place = f" ({frames[-1].filename.rpartition('/')[2]}, line {frames[-1].lineno})" if frames else ""
    return f"{type(error).__name__}: {error}{place}"
