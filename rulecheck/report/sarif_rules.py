"""What SARIF says of the rules in force: title, description, page, source and level of each."""

from __future__ import annotations

import inspect
from typing import TYPE_CHECKING, Any

from rulecheck.findings import Severity
from rulecheck.report.rules_text import render_page
from rulecheck.review.validation import RESERVED_RULE

if TYPE_CHECKING:
    from rulecheck.review.registry import Registered, Registry

LEVELS = {Severity.MAJOR: "error", Severity.MINOR: "warning", Severity.OBSERVATION: "note"}
#: Kinds of notification, with what each is for.
NOTIFICATIONS = {
    "unreadable": "A file cannot be used, and nothing was judged of its design.",
    "failed": "A rule, an analysis or a plugin failed; its findings are missing.",
    "not-run": "A rule was not run because the circuit is broken.",
}


def rule_descriptors(registry: Registry) -> list[dict[str, Any]]:
    """Descriptors of the rules in force, and of what is found on concessions.

    Parameters
    ----------
    registry : Registry
    """
    return [*map(_descriptor, registry.entries.values()), _on_concessions()]


def _descriptor(entry: Registered) -> dict[str, Any]:
    rule = entry.rule
    return {
        "id": rule.name,
        "shortDescription": {"text": rule.title},
        "fullDescription": {"text": inspect.cleandoc(type(rule).__doc__ or rule.title)},
        "help": {"text": render_page(entry)},
        "defaultConfiguration": {"level": LEVELS[rule.default_severity]},
        "properties": {"source": rule.source, "plugin": entry.plugin},
    }


def _on_concessions() -> dict[str, Any]:
    title = "Concession that has expired or that covers nothing"
    return {
        "id": RESERVED_RULE,
        "shortDescription": {"text": title},
        "fullDescription": {"text": f"{title}: the record of what was agreed does not fit the design."},
        "help": {"text": "Agree on it anew and move its date, mend what it covered, remove it, or correct its names."},
        "defaultConfiguration": {"level": LEVELS[Severity.OBSERVATION]},
    }
