"""``rulecheck check``: review design files and print findings."""

from __future__ import annotations

import datetime as dt
import os
from pathlib import Path
from typing import TYPE_CHECKING

import click

from rulecheck.cli.options import FILE, form_option, on_option, samples_options
from rulecheck.cli.status import Status, status_of
from rulecheck.cli.streams import ProgressBar, emit, width_and_color
from rulecheck.errors import CommandError
from rulecheck.findings import Report, Severity

if TYPE_CHECKING:
    from rulecheck.review.registry import Registry

SEVERITIES = [severity.label for severity in sorted(Severity, reverse=True)]


@click.command("check")
@click.argument("paths", metavar="PATH...", nargs=-1, required=True, type=FILE)
@form_option("text", "json", "sarif", "markdown")
@click.option(
    "--changed", is_flag=True,
    help="The PATHs are files that changed: pass over those that are no design, and review the designs below this "
    "folder whose catalogue is among them.",
)  # fmt: skip
@click.option("--write", "file", type=FILE, metavar="FILE", help="Write the result to FILE, all of it or nothing.")
@click.option("--only", multiple=True, metavar="RULE", help="Run this rule only; may be given again.")
@click.option("--without", multiple=True, metavar="RULE", help="Leave out this rule; may be given again.")
@click.option(
    "--fail-on", type=click.Choice(SEVERITIES), default="minor", show_default=True,
    help="Least severity that makes the exit status 1.",
)  # fmt: skip
@samples_options
@on_option
def command(
    paths: tuple[Path, ...], form: str, changed: bool, file: Path | None, only: tuple[str, ...],
    without: tuple[str, ...], fail_on: str, samples: int | None, seed: int, on: dt.date,
) -> Status:  # fmt: skip
    """Review design files and print findings with evidence and tried remedies.

    PATH is a design file, or a folder that is searched for them.
    """
    from rulecheck.analysis.samples import Sampling
    from rulecheck.cli.paths import changed_designs, design_files
    from rulecheck.review.registry import installed_registry
    from rulecheck.review.runner import Options, review_design

    registry = installed_registry()
    registry.check_names((*only, *without))
    designs = []
    files = list(changed_designs(paths) if changed else design_files(paths))
    if file is not None and os.path.realpath(file) in {os.path.realpath(path) for path in files}:
        raise CommandError(f"{file} is one of the designs to review", "--write takes another file, which it replaces")
    for path in files:
        with ProgressBar(str(path)) as progress:
            sampling = None if samples is None else Sampling(samples, seed, progress)
            options = Options(on=on, only=only, without=without, progress=progress, sampling=sampling)
            designs.append(review_design(path, registry, options))
    report = Report(tuple(designs), on)
    emit(_rendered(report, registry, form, file), file)
    return status_of(report, Severity.parse(fail_on))


def _rendered(report: Report, registry: Registry, form: str, file: Path | None) -> str:
    if form == "json":
        from rulecheck.report import json

        return json.render(report)
    if form == "sarif":
        from rulecheck.report import sarif

        return sarif.render(report, registry)
    if form == "markdown":
        from rulecheck.report import markdown

        return markdown.render(report)
    from rulecheck.report import text

    width, color = width_and_color(to_file=file is not None)
    return text.render(report, width, color)
