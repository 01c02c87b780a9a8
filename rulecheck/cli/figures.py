"""``rulecheck figures``: the numbers of a design."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from rulecheck.cli.options import FILE, form_option, samples_options
from rulecheck.cli.status import Status
from rulecheck.cli.streams import ProgressBar, emit, narrate, width_and_color

if TYPE_CHECKING:
    from rulecheck.analysis.review import Review


@click.command("figures")
@click.argument("path", metavar="PATH", type=FILE)
@form_option("text", "json", "csv")
@click.option(
    "--points", type=FILE, metavar="FILE.csv",
    help="Conditions, one a row: columns are inputs, ambient, supplies, potentiometers (0..1); "
    "cells quantities or SI numbers. What is not named is at its typ.",
)  # fmt: skip
@samples_options
@click.option("--bench", is_flag=True, help="Print what a voltmeter should read on nets and parts, with limits.")
@click.option(
    "--against", type=FILE, metavar="MEASURED.csv",
    help="Lay readings over the bench sheet: the sheet as CSV with its column measured filled in.",
)  # fmt: skip
def command(
    path: Path, form: str, points: Path | None, samples: int | None, seed: int, bench: bool, against: Path | None
) -> Status:
    """Print operating points, loops, temperatures, transfer and error budget of one design.

    Without --points at the conditions of the review; a bench sheet at typical ones, inputs in the middle and at the
    ends of their ranges. With --against the exit status is 1 where a reading is outside its limits.
    """
    if against and (points or not bench):
        raise click.UsageError("--against goes with --bench, and states its own points")
    if bench and samples is not None:
        raise click.UsageError("--bench and --samples exclude each other")
    from rulecheck.analysis.conditions import from_points
    from rulecheck.analysis.review import Review
    from rulecheck.analysis.samples import Sampling
    from rulecheck.cli.points_file import read_points
    from rulecheck.design.load import load

    design = load(path)
    if bench:
        from rulecheck.cli.bench import print_bench

        return print_bench(design, form, points, against)
    conditions = None if points is None else from_points(design, read_points(points, design))
    with ProgressBar(str(path)) as progress:
        sampling = None if samples is None else Sampling(samples, seed, progress)
        review = Review(design, conditions=conditions, sampling=sampling)
        text = _rendered(review, form)
    emit(text)
    failures = review.operating_points.failures()
    for failure in failures:
        narrate(f"{path}: {failure}")
    return Status.FAILED if failures else Status.CLEAN


def _rendered(review: Review, form: str) -> str:
    if form == "json":
        from rulecheck.report import figures_json

        return figures_json.render(review)
    if form == "csv":
        from rulecheck.report import figures_csv

        return figures_csv.render(review)
    from rulecheck.report import figures_text

    return figures_text.render(review, *width_and_color())
