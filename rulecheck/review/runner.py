"""The review of one design, from its file to findings with tried remedies."""

from __future__ import annotations

import datetime as dt
from collections.abc import Collection, Iterable
from dataclasses import dataclass
from functools import partial
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rulecheck.errors import DesignError, Problem
from rulecheck.review.completion import in_order
from rulecheck.review.concessions import concession_for, findings_about
from rulecheck.review.judging import Judgement, Judging, Progress
from rulecheck.review.outcome import ReviewedDesign, condition_units
from rulecheck.review.remedies import Trials, edited
from rulecheck.review.settings import read_settings

if TYPE_CHECKING:
    from rulecheck.analysis.review import Review
    from rulecheck.analysis.samples import Sampling
    from rulecheck.api import Rule
    from rulecheck.design.model import Design
    from rulecheck.findings import Finding, Remedy
    from rulecheck.review.registry import Registry


@dataclass(frozen=True, slots=True)
class Options:
    """How designs are reviewed.

    Parameters
    ----------
    on : date
        Day of the review, for the expiry of concessions.
    only : collection of str
        Rules to run; none: all. Rules that can find the circuit broken run too, and are heard if they do.
    without : collection of str
        Rules to leave out.
    progress : callable, optional
        Told of progress.
    sampling : Sampling, optional
        Samples drawn for the rules; none are for the trials of remedies.
    """

    on: dt.date
    only: Collection[str] = ()
    without: Collection[str] = ()
    progress: Progress | None = None
    sampling: Sampling | None = None


class DesignReview:
    """What the rules say of one loaded design, and the trials of their remedies.

    Parameters
    ----------
    design : Design
    registry : Registry
    options : Options
    cache : dict, optional
        Solutions shared with reviews of nearly equal designs.

    Raises
    ------
    DesignError
        For settings of rules that will not do.
    """

    def __init__(
        self, design: Design, registry: Registry, options: Options, cache: dict[Any, Any] | None = None
    ) -> None:
        from rulecheck.analysis.review import Review

        self.design = design
        self._registry = registry
        self._options = options
        self._cache: dict[Any, Any] = {} if cache is None else cache
        review = Review(design, cache=self._cache, sampling=options.sampling)
        judgement = self._judge(review, options.only, options.progress)
        self._judgement = judgement
        self.trials = Trials(design, judgement, self._judge_again)

    @property
    def findings(self) -> tuple[Finding, ...]:
        """All findings in order, with those on concessions; their remedies untried."""
        found = [finding for finding in self._judgement.findings if self._is_asked_for(finding)]
        failed = {failure.rule for failure in self._judgement.failures}
        judged = {rule for rule in self._judgement.ran if rule not in failed and self._names(rule)}
        known = self._registry.entries
        return in_order([*found, *findings_about(self.design, found, self._options.on, judged, known)])

    def report(self, *, try_remedies: bool = True) -> ReviewedDesign:
        """The outcome.

        Parameters
        ----------
        try_remedies : bool
            Whether each remedy is tried; an untried one counts as not proven.
        """
        findings: Iterable[Finding] = self.findings
        if try_remedies:
            findings = self.trials.tried(findings, self._options.progress)
        return ReviewedDesign(
            file=str(self.design.path),
            title=self.design.title,
            revision=self.design.revision,
            findings=tuple(findings),
            failures=(*self._registry.failures, *self._judgement.failures, *self.trials.failures),
            not_run=self._judgement.not_run,
            units=condition_units(self.design),
            rules_run=len(self._judgement.ran),
            text=self.design.text,
        )

    def after(self, remedy: Remedy) -> DesignReview:
        """The review of the design with the edits of a remedy made.

        Parameters
        ----------
        remedy : Remedy

        Raises
        ------
        RulecheckError
            The edits do not fit, or what they make is no design.
        """
        from rulecheck.design.load import load_text

        changed = load_text(edited(self.design.text, remedy), self.design.path)
        return DesignReview(changed, self._registry, self._options, self._cache)

    def _judge(self, review: Review, only: Collection[str], progress: Progress | None) -> Judgement:
        def is_wanted(rule: Rule) -> bool:
            named = not only or rule.name in only or rule.blocks_analysis
            return named and rule.name not in self._options.without and settings[rule.name].enabled

        settings = read_settings(review.design, self._registry)
        rules = [rule for rule in self._registry.rules if is_wanted(rule)]
        covering = partial(concession_for, concessions=review.design.concessions, on=self._options.on)
        return Judging(review, settings, covering).run(rules, progress)

    def _judge_again(self, text: str) -> Judgement:
        from rulecheck.analysis.review import Review
        from rulecheck.design.load import load_text

        changed = Review(load_text(text, self.design.path), cache=self._cache, seeks_remedies=False)
        wanted = {*self._judgement.ran, *(rule.rule for rule in self._judgement.not_run)}
        return self._judge(changed, wanted, None)

    def _names(self, rule: str) -> bool:
        return not self._options.only or rule in self._options.only

    def _is_asked_for(self, finding: Finding) -> bool:
        """A finding that breaks the circuit is heard even where its rule was not asked for."""
        return self._names(finding.rule) or bool(self._judgement.not_run)


def review_design(path: Path | str, registry: Registry, options: Options) -> ReviewedDesign:
    """Review a design file; a file that cannot be used gives a report of its errors.

    Parameters
    ----------
    path : Path or str
    registry : Registry
    options : Options
    """
    from rulecheck.design.load import load

    try:
        return DesignReview(load(path), registry, options).report()
    except DesignError as error:
        return ReviewedDesign(str(path), errors=error.problems)
    except OSError as error:
        return ReviewedDesign(str(path), errors=(Problem(str(path), "", error.strerror or str(error)),))
