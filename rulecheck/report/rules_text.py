"""The rules in force as text: a list, and the page of one rule."""

from __future__ import annotations

import inspect
import re
import sys
from collections.abc import Iterator
from typing import TYPE_CHECKING, Any

from rulecheck.report.layout import LABEL_WIDTH, Layout, quantity
from rulecheck.units import Spread, Unit

if TYPE_CHECKING:
    from pydantic.fields import FieldInfo

    from rulecheck.api import Rule
    from rulecheck.review.registry import Registered, Registry


def render(registry: Registry, width: int = 80, color: bool = False) -> str:
    """All rules with their severity, source, limits and where each comes from.

    Parameters
    ----------
    registry : Registry
    width : int
        Of the lines, in characters.
    color : bool
        Whether to use colour.
    """
    layout = Layout(width, color)
    lines: list[str] = []
    for entry in registry.entries.values():
        lines += [*_summary(entry, layout), ""]
    count = len(registry.entries)
    return "\n".join([*lines, f"{count} rule{'s' if count != 1 else ''} in force"]) + "\n"


def render_page(entry: Registered, width: int = 80, color: bool = False) -> str:
    """All that is to be said of one rule.

    Parameters
    ----------
    entry : Registered
    width : int
        Of the lines, in characters.
    color : bool
        Whether to use colour.
    """
    layout = Layout(width, color)
    lines = list(_summary(entry, layout, with_limits=False))
    for words in (type(entry.rule).__doc__, sys.modules[type(entry.rule).__module__].__doc__):
        if words:
            lines += ["", *_paragraphs(inspect.cleandoc(words), layout)]
    lines += ["", *_settings(entry.rule, layout)]
    return "\n".join(lines) + "\n"


def _summary(entry: Registered, layout: Layout, with_limits: bool = True) -> Iterator[str]:
    rule = entry.rule
    for line in layout.between(rule.name, rule.default_severity.label):
        yield layout.styled(line, "bold")
    yield from layout.wrapped(rule.title, 2)
    yield from layout.labelled("  source", rule.source)
    if with_limits and rule.Settings.model_fields:
        limits = (f"{name} {_default(field)}" for name, field in rule.Settings.model_fields.items())
        yield from layout.labelled("  limits", ", ".join(limits))
    yield from layout.labelled("  from", entry.plugin)


def _settings(rule: Rule, layout: Layout) -> Iterator[str]:
    """Settings with defaults, as a design may write them."""
    yield from layout.wrapped(f"Settings, with their defaults, in [rules.{rule.name}] of a design:")
    for name, field in rule.Settings.model_fields.items():
        yield from layout.labelled("", f"{name} = {_default(field)}")
        if field.description:
            yield from layout.wrapped(field.description, LABEL_WIDTH + 4)
    yield from layout.labelled("", "enabled = true")
    yield from layout.labelled("", 'severity = "major"')
    yield from layout.wrapped("the worst its findings may have: major, minor or observation", LABEL_WIDTH + 4)


def _default(field: FieldInfo) -> str:
    unit = next((entry.symbol for entry in field.metadata if isinstance(entry, Unit)), "")
    return _value(field.get_default(call_default_factory=True), unit)


def _value(value: Any, unit: str) -> str:  # noqa: ANN401 - any default
    if isinstance(value, Spread):
        ends = (value.min, value.typ, value.max)
        return " / ".join(_value(end, unit) for end in dict.fromkeys(ends))
    if isinstance(value, float | int) and not isinstance(value, bool):
        return quantity(value, unit or "1")
    return f'"{value}"' if isinstance(value, str) else str(value).lower() if isinstance(value, bool) else str(value)


def _paragraphs(text: str, layout: Layout) -> Iterator[str]:
    """Paragraphs wrapped to the width; lists and what is indented keep their lines."""
    for number, paragraph in enumerate(re.split(r"\n\s*\n", text)):
        if number:
            yield ""
        kept = any(line.startswith((" ", "-", "*")) for line in paragraph.splitlines())
        yield from paragraph.splitlines() if kept else layout.wrapped(" ".join(paragraph.split()))
