"""``rulecheck figures``: the numbers of a design."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from rulecheck.cli.options import FILE, form_option
from rulecheck.cli.status import Status
from rulecheck.cli.streams import emit, narrate, width_and_color

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
def command(path: Path, form: str, points: Path | None) -> Status:
    """Print operating points, loops, temperatures and transfer of one design.

    Without --points at the conditions of the review.
    """
    from rulecheck.analysis.conditions import from_points
    from rulecheck.analysis.review import Review
    from rulecheck.cli.points_file import read_points
    from rulecheck.design.load import load

    design = load(path)
    conditions = None if points is None else from_points(design, read_points(points, design))
    review = Review(design, conditions=conditions)
    emit(_rendered(review, form))
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
