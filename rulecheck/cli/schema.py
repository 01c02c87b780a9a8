"""``rulecheck schema``: the JSON Schema of the design file."""

from __future__ import annotations

import click

from rulecheck.cli.streams import emit


@click.command("schema")
def command() -> None:
    """Print the JSON Schema of the design file, for editors."""
    from rulecheck.design.schema import json_schema
    from rulecheck.report.json import dump

    emit(dump(json_schema()))
