"""``rulecheck browse``: review designs on the screen."""

from __future__ import annotations

import datetime as dt
from pathlib import Path

import click

from rulecheck.cli.options import FILE, on_option
from rulecheck.cli.status import Status


@click.command("browse")
@click.argument("paths", metavar="PATH...", nargs=-1, required=True, type=FILE)
@on_option
def command(paths: tuple[Path, ...], on: dt.date) -> Status:
    """Review design files on the screen: findings, their evidence drawn, their remedies applied and undone.

    PATH is a design file, or a folder that is searched for them. The key ? lists all keys.
    """
    from rulecheck.cli.paths import design_files
    from rulecheck.tui import browse

    browse(design_files(paths), on)
    return Status.CLEAN
