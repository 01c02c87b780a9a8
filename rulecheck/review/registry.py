"""The rules in force: found through entry points, checked, and kept by name."""

from __future__ import annotations

import importlib
import pkgutil
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from importlib.metadata import EntryPoint, entry_points
from types import MappingProxyType, ModuleType

from rulecheck.api import Rule
from rulecheck.errors import CommandError, PluginError
from rulecheck.findings import Failure
from rulecheck.review.validation import place_of, validate_rule
from rulecheck.review.words import did_you_mean

GROUP = "rulecheck.plugins"


@dataclass(frozen=True, slots=True)
class Registered:
    """A rule in force and the plugin that brings it, in words."""

    rule: Rule
    plugin: str


@dataclass(frozen=True, slots=True)
class Registry:
    """The rules in force, by name in alphabetic order, and the plugins that failed to give theirs."""

    entries: Mapping[str, Registered]
    failures: tuple[Failure, ...] = ()

    @property
    def rules(self) -> tuple[Rule, ...]:
        """All rules, by name in alphabetic order."""
        return tuple(entry.rule for entry in self.entries.values())

    def check_names(self, names: Iterable[str]) -> None:
        """Refuse a name that is no rule's.

        Parameters
        ----------
        names : iterable of str

        Raises
        ------
        CommandError
            With the nearest right name.
        """
        for name in names:
            if name not in self.entries:
                hint = did_you_mean(name, self.entries) or "'rulecheck rules' lists them"
                raise CommandError(f"there is no rule {name!r}", hint)


def registry_of(rules: Iterable[type[Rule]], plugin: str = "given") -> Registry:
    """Registry of the rule classes given.

    Parameters
    ----------
    rules : iterable of type of Rule
    plugin : str
        Who brings them, in words.

    Raises
    ------
    PluginError
        For a class that is no proper rule, or a second one of a name.
    """
    entries: dict[str, Registered] = {}
    for rule in rules:
        _register(entries, rule, plugin)
    return _registry(entries, ())


def installed_registry() -> Registry:
    """Registry of all rules that installed plugins bring.

    A plugin that cannot be imported, or a class in it that is no proper rule, becomes a failure; the
    other rules stand.
    """
    entries: dict[str, Registered] = {}
    failures: list[Failure] = []
    for entry in sorted(entry_points(group=GROUP), key=lambda entry: (entry.name, entry.value)):
        plugin = _words(entry)
        for found in _rules_of(entry.value, plugin):
            try:
                if isinstance(found, PluginError):
                    raise found
                _register(entries, found, plugin)
            except PluginError as error:
                failures.append(Failure(f"plugin {entry.name}", str(error)))
    return _registry(entries, tuple(failures))


def _registry(entries: dict[str, Registered], failures: tuple[Failure, ...]) -> Registry:
    return Registry(MappingProxyType(dict(sorted(entries.items()))), failures)


def _register(entries: dict[str, Registered], rule: type[Rule], plugin: str) -> None:
    validate_rule(rule, plugin)
    if rule.name in entries:
        other = entries[rule.name]
        raise PluginError(
            f"{plugin}: {place_of(rule)}: there is a rule {rule.name!r} already, "
            f"{place_of(type(other.rule))} of {other.plugin}",
            "give it a name of its own",
        )
    entries[rule.name] = Registered(rule(), plugin)


def _words(entry: EntryPoint) -> str:
    dist = entry.dist
    return f"plugin {entry.name} ({dist.name} {dist.version})" if dist else f"plugin {entry.name}"


def _rules_of(module_name: str, plugin: str) -> Iterator[type[Rule] | PluginError]:
    """Rule classes defined in a module and its submodules; what cannot be imported comes as its error."""
    try:
        module = importlib.import_module(module_name)
    except (Exception, SystemExit) as error:  # noqa: BLE001 - importing a plugin may raise anything
        yield PluginError(f"{plugin}: {module_name} cannot be imported: {type(error).__name__}: {error}")
        return
    yield from _rules_in(module)
    for info in pkgutil.iter_modules(getattr(module, "__path__", ())):
        yield from _rules_of(f"{module_name}.{info.name}", plugin)


def _rules_in(module: ModuleType) -> Iterator[type[Rule]]:
    for name, value in vars(module).items():
        defined_here = isinstance(value, type) and value.__module__ == module.__name__
        if defined_here and issubclass(value, Rule) and not name.startswith("_"):
            yield value
