"""A design file that is on the screen: read, reviewed, rewritten, and what was rewritten taken back."""

from __future__ import annotations

import datetime as dt
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rulecheck.errors import DesignError, EditError, Problem
from rulecheck.findings import Finding, Remedy
from rulecheck.review.outcome import ReviewedDesign

if TYPE_CHECKING:
    from rulecheck.analysis.review import Review
    from rulecheck.review.judging import Progress
    from rulecheck.review.registry import Registry
    from rulecheck.review.runner import DesignReview
    from rulecheck.tui.evidence_curve import Grids

Stamp = tuple[tuple[int, int] | None, ...]


@dataclass(frozen=True)
class Reading:
    """A design file as it was read, and what the review said.

    Attributes
    ----------
    text : str
    report : ReviewedDesign
        Its remedies may still be untried.
    review : DesignReview, optional
        None where the file cannot be used.
    numbers : Review, optional
        The analyses of the design.
    grids : Grids, optional
        Conditions of the figures; None where the circuit is too broken for any.
    cache : dict
        Solutions that reviews of nearly equal designs share.
    stamp : Stamp
        Of the watched files when they were read.
    watched : tuple of Path
        The design file and its catalogues.
    tried : bool
        Whether the remedies have been tried.
    """

    text: str
    report: ReviewedDesign
    review: DesignReview | None = None
    numbers: Review | None = None
    grids: Grids | None = None
    cache: dict[Any, Any] = field(default_factory=dict, repr=False)
    stamp: Stamp = ()
    watched: tuple[Path, ...] = ()
    tried: bool = False


@dataclass(frozen=True, slots=True)
class Change:
    """What a rewriting of the file did to the findings."""

    title: str
    gone: tuple[Finding, ...]
    come: tuple[Finding, ...]
    left: int


@dataclass(frozen=True, slots=True)
class Rewriting:
    """A text of the file and the one put in its place."""

    title: str
    before: str
    after: str


@dataclass
class Document:
    """One design file on the screen.

    Parameters
    ----------
    path : Path
    registry : Registry
    on : date
        Day of the review.
    """

    path: Path
    registry: Registry
    on: dt.date
    reading: Reading | None = field(default=None, init=False)
    done: list[Rewriting] = field(default_factory=list, init=False)
    undone: list[Rewriting] = field(default_factory=list, init=False)

    def read(self, progress: Progress, shown: Callable[[Reading], None]) -> Reading:
        """Read and review the file.

        Parameters
        ----------
        progress : callable
            Told of progress.
        shown : callable
            Given the findings while their remedies are still being tried.

        Returns
        -------
        Reading
            With the errors of the file where it cannot be used.
        """
        from rulecheck.design.load import load
        from rulecheck.review.runner import DesignReview, Options

        watched: tuple[Path, ...] = (self.path,)
        stamp = stamp_of(watched)
        cache: dict[Any, Any] = {}
        try:
            design = load(self.path)
            watched = (self.path, *sorted({Path(model.file) for model in design.models.values()}))
            stamp = (*stamp, *stamp_of(watched[1:]))
            review = DesignReview(design, self.registry, Options(on=self.on, progress=progress), cache)
        except DesignError as error:
            watched = tuple(dict.fromkeys((self.path, *(Path(problem.file) for problem in error.problems))))
            stamp = (*stamp, *stamp_of(watched[1:]))
            unusable = ReviewedDesign(str(self.path), errors=error.problems)
            return Reading(_text(self.path), unusable, stamp=stamp, watched=watched)
        except OSError as error:
            problem = Problem(str(self.path), "", error.strerror or str(error))
            unusable = ReviewedDesign(str(self.path), errors=(problem,))
            return Reading("", unusable, stamp=stamp, watched=watched)
        return self._judged(review, cache, watched, stamp, shown)

    def _judged(
        self, review: DesignReview, cache: dict[Any, Any], watched: tuple[Path, ...], stamp: Stamp,
        shown: Callable[[Reading], None],
    ) -> Reading:  # fmt: skip
        from rulecheck.analysis.review import Review

        numbers, text = Review(review.design, cache=cache), review.design.text
        report = review.report(try_remedies=False)
        first = Reading(text, report, review, numbers, grids_of(numbers), cache, stamp, watched)
        shown(first)
        return replace(first, report=review.report(), tried=True)

    def apply(
        self, reading: Reading, finding: Finding, remedy: Remedy, shown: Callable[[Reading], None]
    ) -> tuple[Reading, Change]:
        """Write the edits of a proven remedy to the file and review it again.

        Raises
        ------
        RulecheckError
            The edits do not fit, or the file was changed by someone else; nothing is written then.
        """
        from rulecheck.design.edit import write_atomically
        from rulecheck.review import fixing

        if reading.review is None or not remedy.proven:
            raise EditError("only a proven remedy is applied from here", "'rulecheck fix' applies others")
        fixed = fixing.apply(reading.review, fixing.Step(finding, remedy))
        write_atomically(self.path, fixed.text, reading.text)
        title = f"{remedy.id}: {remedy.title}"
        self.done.append(Rewriting(title, reading.text, fixed.text))
        self.undone.clear()
        stamp = stamp_of(reading.watched)
        if _text(self.path) != fixed.text.removeprefix("\ufeff"):  # someone was quick: to be read again
            stamp = ()
        after = self._judged(fixed.review, reading.cache, reading.watched, stamp, shown)
        return after, changed(f"applied {title}", reading, after)

    def step_back(
        self, reading: Reading, progress: Progress, shown: Callable[[Reading], None], *, again: bool = False
    ) -> tuple[Reading, Change]:
        """Take back the last rewriting, or with `again` make the last one taken back again.

        Raises
        ------
        EditError
            There is none, or the file was changed by someone else.
        """
        from rulecheck.design.edit import write_atomically

        source, target = (self.undone, self.done) if again else (self.done, self.undone)
        if not source:
            raise EditError("there is nothing to take back" if not again else "nothing was taken back")
        last = source[-1]
        old, new = (last.before, last.after) if again else (last.after, last.before)
        write_atomically(self.path, new, old)
        target.append(source.pop())
        after = self.read(progress, shown)
        return after, changed(f"{'made again' if again else 'taken back'}: {last.title}", reading, after)

    def is_stale(self) -> bool:
        """Whether the file or one of its catalogues is not as it was read."""
        return self.reading is not None and stamp_of(self.reading.watched) != self.reading.stamp


def grids_of(review: Review) -> Grids | None:
    """Conditions of the figures of a review, or None where the circuit has no solution to start from."""
    from rulecheck.tui.evidence_curve import Grids

    try:
        return Grids.of(review)
    except Exception:  # noqa: BLE001 - the report tells of analyses that fail; here there is only nothing to draw
        return None


def changed(title: str, before: Reading, after: Reading) -> Change:
    """Which findings went and came between two readings."""
    old = {finding.id: finding for finding in before.report.findings}
    new = {finding.id: finding for finding in after.report.findings}
    return Change(
        title,
        tuple(finding for name, finding in old.items() if name not in new),
        tuple(finding for name, finding in new.items() if name not in old),
        len(old.keys() & new.keys()),
    )


def stamp_of(paths: tuple[Path, ...]) -> Stamp:
    """Time of the last change and size of each file; None for one that is not there."""
    return tuple(_stamp(path) for path in paths)


def _stamp(path: Path) -> tuple[int, int] | None:
    try:
        status = path.stat()
    except OSError:
        return None
    return status.st_mtime_ns, status.st_size


def _text(path: Path) -> str:
    """Text of a file that is no design, as far as it can be read."""
    try:
        return path.read_bytes().decode("utf-8-sig", errors="replace")
    except OSError:
        return ""
