"""``rulecheck compare``: what changed between two revisions of a design."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import click

from rulecheck.cli.options import FILE, form_option, on_option
from rulecheck.cli.status import Status
from rulecheck.cli.streams import ProgressBar, emit, width_and_color


@click.command("compare")
@click.argument("old", metavar="OLD", type=FILE)
@click.argument("new", metavar="NEW", type=FILE)
@form_option("text", "json")
@on_option
def command(old: Path, new: Path, form: str, on: dt.date) -> Status:
    """Set two revisions of a design side by side.

    Shown are parts and values that changed, findings gone, come and changed, and figures that moved: worst errors,
    least margins, room at outputs and inputs. Findings do not set the exit status; those of NEW are for check.
    """
    from rulecheck.design.load import load
    from rulecheck.review.comparing import compare_designs
    from rulecheck.review.registry import installed_registry
    from rulecheck.review.runner import Options

    registry, before, after = installed_registry(), load(old), load(new)
    with ProgressBar(f"{old}, {new}") as progress:
        comparison = compare_designs(before, after, registry, Options(on=on, progress=progress))
    if form == "json":
        from rulecheck.report import comparison_json

        emit(comparison_json.render(comparison, on))
    else:
        from rulecheck.report import comparison_text

        emit(comparison_text.render(comparison, *width_and_color()))
    return Status.FAILED if comparison.old.failures or comparison.new.failures else Status.CLEAN
