"""What a class must satisfy to be taken as a rule."""

from __future__ import annotations

import inspect
import re
from collections.abc import Iterator

from pydantic import ValidationError

from rulecheck.api import BaseModel, Rule, Severity
from rulecheck.errors import PluginError

NAME = re.compile(r"[a-z][a-z0-9]*(-[a-z0-9]+)*")
#: Keys of ``[rules.NAME]`` that are the runner's, and the rule name that is.
RESERVED_SETTINGS = ("enabled", "severity")
RESERVED_RULE = "concession"


def validate_rule(rule: type[Rule], plugin: str) -> None:
    """Refuse a class that is no proper rule.

    Parameters
    ----------
    rule : type of Rule
    plugin : str
        Who brings it, in words.

    Raises
    ------
    PluginError
        Names plugin, class, file and line, with all that is wrong.
    """
    faults = [*_faults_of_words(rule), *_faults_of_settings(rule), *_faults_of_check(rule)]
    if faults:
        raise PluginError(f"{plugin}: {place_of(rule)}: {'; '.join(faults)}")


def place_of(rule: type[Rule]) -> str:
    """Class, file and line of a rule, in words."""
    try:
        return f"class {rule.__name__} ({inspect.getsourcefile(rule)}, line {inspect.getsourcelines(rule)[1]})"
    except (OSError, TypeError):  # made at run time, without a file
        return f"class {rule.__name__} (module {rule.__module__})"


def _faults_of_words(rule: type[Rule]) -> Iterator[str]:
    name: object = rule.name
    if not isinstance(name, str) or not NAME.fullmatch(name):
        yield f'name {name!r} is not lower-case words joined by hyphens, such as "matched-pair"'
    elif name == RESERVED_RULE:
        yield f"name {name!r} is taken by the review itself"
    for attribute, wanted in (
        ("title", "a line that says what it finds"),
        ("source", 'where it is published, or "common practice, no source"'),
    ):
        words = getattr(rule, attribute)
        if not isinstance(words, str) or not words.strip():
            yield f"{attribute} is {words!r}; it must be {wanted}"
    if not isinstance(rule.default_severity, Severity):
        yield f"default_severity is {rule.default_severity!r}, not a Severity"
    needs: object = rule.needs
    if not isinstance(needs, tuple) or not all(isinstance(need, str) for need in needs):
        yield f'needs is {needs!r}, not a tuple of names such as ("operating_points",)'


def _faults_of_settings(rule: type[Rule]) -> Iterator[str]:
    settings: object = rule.Settings
    if not isinstance(settings, type) or not issubclass(settings, BaseModel):
        yield "Settings does not derive from rulecheck.api.BaseModel"
        return
    for key in RESERVED_SETTINGS:
        if key in settings.model_fields:
            yield f"the setting {key!r} is taken: every rule has it"
    try:
        settings()
    except ValidationError as error:
        yield from (f"default of the setting {_key(e['loc'])}: {e['msg']}" for e in error.errors())


def _key(location: tuple[int | str, ...]) -> str:
    return repr(".".join(str(part) for part in location))


def _faults_of_check(rule: type[Rule]) -> Iterator[str]:
    check: object = rule.check
    if check is Rule.check:
        yield "it has no method check(self, review, settings)"
    elif not callable(check):
        yield f"check is {check!r}, not a method"
    elif inspect.iscoroutinefunction(check) or inspect.isasyncgenfunction(check):
        yield "check is asynchronous; it must be an ordinary method or generator"
    else:
        try:
            inspect.signature(check).bind(None, None, None)
        except TypeError as error:
            yield f"check must take (self, review, settings): {error}"
    try:
        rule()
    except Exception as error:  # noqa: BLE001 - a plugin's constructor may raise anything
        yield f"it cannot be made without arguments: {type(error).__name__}: {error}"
