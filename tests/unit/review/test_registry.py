"""The registry takes proper rules from plugins and says which class of which plugin is none."""

import sys
import textwrap
from importlib.metadata import entry_points

import pytest

from rulecheck.api import BaseModel, Rule
from rulecheck.errors import CommandError, PluginError
from rulecheck.review.registry import GROUP, installed_registry, registry_of

from .toys import LowResistor, rule


def faults(cls):
    """What is said of a class that is refused."""
    with pytest.raises(PluginError, match="given") as refused:
        registry_of([cls])
    return str(refused.value)


def changed(**attributes):
    """A rule class with some attributes changed."""
    return type("Changed", (LowResistor,), attributes)


def test_when_a_class_is_a_proper_rule_it_is_registered_by_name():
    """Rules stand by name, in alphabetic order, with who brings them."""
    registry = registry_of([rule("zeta"), rule("alpha")], plugin="a team")
    assert list(registry.entries) == ["alpha", "zeta"]
    assert registry.entries["zeta"].plugin == "a team"


@pytest.mark.parametrize("name", ["", "Upper", "two words", "-led", "trailing-", "a--b", "ünder", 7])
def test_when_a_name_is_not_words_joined_by_hyphens_it_is_refused(name):
    """The message shows the name, the class, and how a name looks."""
    message = faults(changed(name=name))
    assert repr(name) in message
    assert "Changed" in message
    assert "matched-pair" in message


@pytest.mark.parametrize("attribute", ["title", "source"])
def test_when_title_or_source_is_missing_it_is_refused(attribute):
    """Both are needed, and the message names the one."""
    assert attribute in faults(changed(**{attribute: "  "}))


def test_when_the_severity_is_a_word_it_is_refused():
    """A severity is a Severity."""
    assert "default_severity is 'major'" in faults(changed(default_severity="major"))


def test_when_needs_is_a_plain_text_it_is_refused():
    """A text would be taken for a tuple of letters."""
    assert "needs is 'operating_points'" in faults(changed(needs="operating_points"))


def test_when_settings_do_not_derive_from_the_base_they_are_refused():
    """Settings that would take unknown keys are no settings."""
    assert "rulecheck.api.BaseModel" in faults(changed(Settings=object))


def test_when_a_default_does_not_fit_its_type_it_is_refused():
    """Defaults are validated when the rule registers, not when a design meets them."""

    class Settings(BaseModel):
        limit: float = "much"  # type: ignore[assignment]

    assert "'limit'" in faults(changed(Settings=Settings))


def test_when_a_setting_takes_a_name_that_every_rule_has_it_is_refused():
    """`enabled` and `severity` are the runner's."""

    class Settings(BaseModel):
        enabled: bool = True

    assert "'enabled'" in faults(changed(Settings=Settings))


def test_when_check_takes_other_arguments_it_is_refused():
    """The message says what check must take."""
    assert "(self, review, settings)" in faults(changed(check=lambda self, review: []))


def test_when_check_is_asynchronous_it_is_refused():
    """A coroutine yields no findings."""

    async def check(self, review, settings):
        return []

    assert "asynchronous" in faults(changed(check=check))


def test_when_check_is_missing_it_is_refused():
    """A rule that checks nothing is none."""
    bare = type("Bare", (Rule,), {"name": "bare", "title": "t", "source": "s"})
    assert "no method check" in faults(bare)


def test_when_the_constructor_wants_arguments_it_is_refused():
    """The runner makes the instances."""

    def wants(self, limit):
        pass

    assert "without arguments" in faults(changed(__init__=wants))


def test_when_two_rules_have_one_name_the_second_is_refused_with_both_named():
    """The message names both classes and both plugins."""
    with pytest.raises(PluginError, match="'low-resistor' already") as refused:
        registry_of([LowResistor, changed()])
    assert "class Changed" in str(refused.value)
    assert "class LowResistor" in str(refused.value)


def test_when_all_is_wrong_all_is_said_at_once():
    """One message has every fault of a class."""
    message = faults(changed(name="No", title="", source=""))
    assert all(word in message for word in ("name", "title", "source"))


def test_a_refused_class_is_named_with_its_file_and_line(tmp_path, monkeypatch):
    """Whoever wrote it finds the place."""
    (tmp_path / "toy_refused.py").write_text(
        "from rulecheck.api import Rule\n\n\nclass Wrong(Rule):\n    name = 'Wrong'\n"
    )
    monkeypatch.syspath_prepend(tmp_path)
    monkeypatch.delitem(sys.modules, "toy_refused", raising=False)
    message = faults(__import__("toy_refused").Wrong)
    assert f"{tmp_path / 'toy_refused.py'}, line 4" in message


def test_an_unknown_name_is_refused_with_the_nearest():
    """Whoever misspells a rule is shown the right word."""
    with pytest.raises(CommandError, match="did you mean 'low-resistor'"):
        registry_of([LowResistor]).check_names(["low-resistors"])


@pytest.fixture
def plugin(tmp_path, monkeypatch):
    """Installs a distribution of modules under an entry point."""

    def install(entry_point, **modules):
        info = tmp_path / "toy_plugin-2.1.dist-info"
        info.mkdir()
        (info / "METADATA").write_text("Metadata-Version: 2.1\nName: toy-plugin\nVersion: 2.1\n")
        (info / "entry_points.txt").write_text(f"[{GROUP}]\nteam = {entry_point}\n")
        package = tmp_path / "toy_plugin"
        package.mkdir()
        (package / "__init__.py").write_text("")
        for name, text in modules.items():
            (package / f"{name}.py").write_text(textwrap.dedent(text))
        monkeypatch.syspath_prepend(tmp_path)
        for name in [name for name in sys.modules if name.partition(".")[0] == "toy_plugin"]:
            monkeypatch.delitem(sys.modules, name)

    return install


def team_failures():
    """Failures of the toy plugin among those of all that is installed."""
    return [failure for failure in installed_registry().failures if failure.rule == "plugin team"]


TOY = """
    from rulecheck.api import Rule

    class _Base(Rule):
        title = "A toy"
        source = "none"

        def check(self, review, settings):
            return []

    class Toy(_Base):
        name = "{name}"
"""


def test_rules_of_all_modules_of_a_package_are_registered(plugin):
    """Every rule in the package that the entry point names is taken, bases with an underscore are not."""
    plugin("toy_plugin", one=TOY.format(name="toy-one"), two=TOY.format(name="toy-two"))
    registry = installed_registry()
    assert registry.entries["toy-one"].plugin == "plugin team (toy-plugin 2.1)"
    assert "toy-two" in registry.entries
    assert not team_failures()


def test_a_rule_imported_from_elsewhere_is_registered_once(plugin):
    """A class counts where it is defined."""
    plugin("toy_plugin", one=TOY.format(name="toy-one"), two="from toy_plugin.one import Toy\n")
    assert not team_failures()


def test_a_module_that_cannot_be_imported_is_a_failure_and_the_others_stand(plugin):
    """The failure names plugin, module and cause; rules beside it and the standard rules are there."""
    plugin("toy_plugin", broken="import no_such_thing\n", two=TOY.format(name="toy-two"))
    (failure,) = team_failures()
    assert "toy_plugin.broken" in failure.message
    assert "ModuleNotFoundError" in failure.message
    assert "toy-two" in installed_registry().entries


def test_a_module_that_leaves_the_program_is_a_failure(plugin):
    """Importing a plugin cannot end the program."""
    plugin("toy_plugin", leaving="import sys\nsys.exit(4)\n")
    assert "SystemExit" in team_failures()[0].message


def test_an_entry_point_without_a_module_is_a_failure(plugin):
    """A plugin whose package is not there is reported."""
    plugin("toy_nowhere")
    assert "toy_nowhere" in team_failures()[0].message


def test_a_plugin_cannot_take_the_name_of_another_rule(plugin):
    """The second of a name is a failure that names both."""
    plugin("toy_plugin", one=TOY.format(name="same"), two=TOY.format(name="same"))
    (failure,) = team_failures()
    assert type(installed_registry().entries["same"].rule).__module__ == "toy_plugin.one"
    assert "'same' already" in failure.message


def test_the_standard_rules_come_by_the_same_way():
    """The shipped rules are an ordinary plugin."""
    (standard,) = [entry for entry in entry_points(group=GROUP) if entry.name == "standard"]
    assert standard.value == "rulecheck_rules"
    registry = installed_registry()
    assert registry.failures == ()
    assert {entry.plugin for entry in registry.entries.values()} == {"plugin standard (rulecheck 0.1.0)"}
