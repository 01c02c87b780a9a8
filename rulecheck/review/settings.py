"""What a design says about the rules: their limits, whether they run, and how severe they may be."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

from pydantic import BaseModel, ValidationError

from rulecheck.design.keypath import join_key
from rulecheck.errors import DesignError, Problem
from rulecheck.findings import Severity
from rulecheck.review.validation import RESERVED_SETTINGS
from rulecheck.review.words import did_you_mean

if TYPE_CHECKING:
    from rulecheck.api import Rule
    from rulecheck.design.model import Design
    from rulecheck.review.registry import Registry


@dataclass(frozen=True, slots=True)
class RuleSettings:
    """How one rule is applied to one design; `cap` is the worst severity its findings may have."""

    values: BaseModel
    enabled: bool = True
    cap: Severity = Severity.MAJOR


def read_settings(design: Design, registry: Registry) -> dict[str, RuleSettings]:
    """Settings of every rule, the design's over the rule's defaults.

    Parameters
    ----------
    design : Design
    registry : Registry

    Returns
    -------
    dict of str to RuleSettings
        By rule, for all rules in force.

    Raises
    ------
    DesignError
        With all unknown rules, unknown keys and values that will not do, each with its place.
    """
    problems = [_unknown_rule(design, name, registry) for name in design.rule_settings if name not in registry.entries]
    settings = {}
    for name, entry in registry.entries.items():
        table = design.rule_settings.get(name, {})
        read, faults = _read(entry.rule, table)
        settings[name] = read
        problems += [_problem(design, ("rules", name, *key), message) for key, message in faults]
    if problems:
        raise DesignError(sorted(problems, key=lambda problem: (problem.line or 0, problem.column or 0)))
    return settings


_Faults = list[tuple[tuple[str, ...], str]]


def _read(rule: Rule, table: Mapping[str, Any]) -> tuple[RuleSettings, _Faults]:
    """Settings of one rule, defaults where there are faults, and the faults by key."""
    faults: _Faults = []
    enabled = table.get("enabled", True)
    if not isinstance(enabled, bool):
        faults.append((("enabled",), f"found {enabled!r}; true or false is expected"))
        enabled = True
    cap = Severity.MAJOR
    if "severity" in table:
        try:
            cap = Severity.parse(str(table["severity"]))
        except ValueError as error:
            faults.append((("severity",), str(error)))
    own = {key: value for key, value in table.items() if key not in RESERVED_SETTINGS}
    try:
        values: BaseModel = rule.Settings.model_validate(own)
    except ValidationError as error:
        faults += [_fault(rule, fault) for fault in error.errors()]
        values = rule.Settings()
    return RuleSettings(values, enabled, cap), faults


def _fault(rule: Rule, fault: Any) -> tuple[tuple[str, ...], str]:  # noqa: ANN401 - pydantic's own shape
    key = tuple(str(part) for part in fault["loc"])
    if fault["type"] == "extra_forbidden":
        known = [*rule.Settings.model_fields, *RESERVED_SETTINGS]
        hint = did_you_mean(key[-1], known) or "it has " + ", ".join(known)
        return key, f"the rule {rule.name} has no setting {key[-1]!r} ({hint})"
    message = str(fault["msg"]).removeprefix("Value error, ")
    return key, message if repr(fault["input"]) in message else f"found {fault['input']!r}; {message}"


def _unknown_rule(design: Design, name: str, registry: Registry) -> Problem:
    hint = did_you_mean(name, registry.entries)
    if registry.failures:
        hint = f"{hint} {'; '.join(failure.message for failure in registry.failures)}".strip()
    hint = hint or "'rulecheck rules' lists them"
    return _problem(design, ("rules", name), f"there is no rule {name!r} ({hint})")


def _problem(design: Design, path: tuple[str, ...], message: str) -> Problem:
    key = join_key(path)
    place = design.locate(key)
    return Problem(place.file, key, message, place.line, place.column)
