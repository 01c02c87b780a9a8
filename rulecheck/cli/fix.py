"""``rulecheck fix``: remedies of a design, listed, shown as a diff or written."""

from __future__ import annotations

import datetime as dt
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rulecheck.cli.options import FILE, on_option
from rulecheck.cli.status import Status, status_of
from rulecheck.cli.streams import ProgressBar, emit, narrate, width_and_color
from rulecheck.findings import Report, Severity

if TYPE_CHECKING:
    from rulecheck.findings import DesignReport
    from rulecheck.review.fixing import Fixed
    from rulecheck.review.runner import DesignReview


@click.command("fix")
@click.argument("path", metavar="PATH", type=FILE)
@click.option("--finding", "selector", metavar="ID[:REMEDY]", help="Apply this remedy; else the first proven one.")
@click.option("--all-proven", is_flag=True, help="Apply one proven remedy after another, reviewing after each.")
@click.option("--preview", is_flag=True, help="Print the change as a unified diff and write nothing.")
@on_option
def command(path: Path, selector: str | None, all_proven: bool, preview: bool, on: dt.date) -> Status:
    """List the remedies of a design that were tried, or apply them.

    When something was written the exit status is that of a check of the design as it then is.
    """
    from rulecheck.design.load import load
    from rulecheck.review import fixing
    from rulecheck.review.registry import installed_registry
    from rulecheck.review.runner import DesignReview, Options

    if selector and all_proven:
        raise click.UsageError("--finding and --all-proven exclude each other")
    registry, design = installed_registry(), load(path)
    with ProgressBar(str(path)) as progress:
        options = Options(on=on, progress=progress)
        review = DesignReview(design, registry, options)
        if all_proven:
            return _apply(path, design.text, fixing.apply_all_proven(review), preview, on)
        if selector:
            step = fixing.choose(review, selector)
            if not review.trials.proven(step.finding, step.remedy):
                narrate(f"{path}: remedy {step.remedy.id} of {step.finding.id} is not proven")
            fixed = fixing.apply(review, step)
            return _apply(path, design.text, fixed, preview, on)
        report = review.report()
    return _list(report, review, preview)


def _list(report: DesignReport, review: DesignReview, preview: bool) -> Status:
    from rulecheck.report import remedies_text

    emit(_diffs(report, review) if preview else remedies_text.render(report, *width_and_color()))
    return _failures(report)


def _diffs(report: DesignReport, review: DesignReview) -> str:
    """The diff of each remedy that edits can make and that fits the file, under its name."""
    from rulecheck.errors import EditError
    from rulecheck.report.remedies_text import mark, unified_diff
    from rulecheck.review.remedies import edited

    diffs = ""
    for finding in report.findings:
        for remedy in (remedy for remedy in finding.remedies if remedy.edits):
            try:
                text = edited(review.design.text, remedy)
            except EditError:
                continue
            diffs += f"# {finding.id}:{remedy.id}  {remedy.title} [{mark(remedy)}]\n"
            diffs += unified_diff(review.design.text, text, report.file)
    return diffs


def _apply(path: Path, old: str, fixed: Fixed, preview: bool, on: dt.date) -> Status:
    """Show the change, or write it and say what it did."""
    from rulecheck.design.edit import write_atomically
    from rulecheck.report.remedies_text import render_fixed, unified_diff

    after = fixed.review.report(try_remedies=False)
    if preview:
        emit(unified_diff(old, fixed.text, str(path)))
        return _failures(after)
    if not fixed.steps:
        narrate(f"{path}: no remedy is proven, nothing was written")
    else:
        write_atomically(path, fixed.text, old)
        emit(render_fixed(fixed, width_and_color()[0]))
    _failures(after)
    return status_of(Report((after,), on), Severity.MINOR)


def _failures(report: DesignReport) -> Status:
    for failure in report.failures:
        narrate(f"{report.file}: {failure.rule} failed: {failure.message}")
    return Status.FAILED if report.failures else Status.CLEAN
