"""``rulecheck rules``: the rules in force."""

from __future__ import annotations

import click

from rulecheck.cli.status import Status
from rulecheck.cli.streams import emit, narrate, width_and_color


@click.command("rules")
@click.argument("name", required=False)
def command(name: str | None) -> Status:
    """Show the rules in force; with a NAME, all that is to be said of that rule."""
    from rulecheck.report import rules_text
    from rulecheck.review.registry import installed_registry

    registry = installed_registry()
    if name is None:
        emit(rules_text.render(registry, *width_and_color()))
    else:
        registry.check_names([name])
        emit(rules_text.render_page(registry.entries[name], *width_and_color()))
    for failure in registry.failures:
        narrate(f"rulecheck: {failure.message}")
    return Status.FAILED if registry.failures else Status.CLEAN
