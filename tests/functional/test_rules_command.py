"""``rulecheck rules`` and ``rulecheck schema``, and how the program speaks of its commands."""

import json
import re

import pytest

from rulecheck import __version__


def test_rules_are_listed_with_severity_source_limits_and_origin(run):
    """Rules of all plugins, by name."""
    status, out, err = run("rules")
    assert (status, err) == (0, "")
    (block,) = [block for block in out.split("\n\n") if block.startswith("divider-ratio")]
    assert block.splitlines() == [
        "divider-ratio" + " " * 62 + "major",
        "  Divider with too low a ratio",
        "  source    common practice, no source",
        "  limits    ratio 50 %, least 10 ohm",
        "  from      plugin team (team 3.0)",
    ]
    names = [block.split()[0] for block in out.split("\n\n")[:-1]]
    assert names == sorted(names)
    assert out.endswith(f"{len(names)} rules in force\n")


def test_the_page_of_a_rule_has_all_that_is_to_be_said(run):
    """What it is, its reasoning, and its settings with defaults and units as a design writes them."""
    status, out, _ = run("rules", "divider-ratio")
    assert status == 0
    assert "A divider that takes away more than it should." in out
    assert "\n- of the amplifier behind it,\n- of the divider itself.\n" in out
    assert "A team's plugin for the checks of the program." in out
    assert "[rules.divider-ratio]" in out
    assert re.search(r"^ +ratio = 50 %\n +Least share of the input that is left\.$", out, re.MULTILINE)
    assert re.search(r"^ +enabled = true$", out, re.MULTILINE)
    assert "plugin team (team 3.0)" in out


def test_the_page_of_an_unknown_rule_gives_status_two_with_the_nearest(run):
    """Whoever misspells a rule is shown the right word."""
    status, out, err = run("rules", "divider-rato")
    assert (status, out) == (2, "")
    assert "did you mean 'divider-ratio'" in err


def test_a_plugin_that_failed_is_named_and_gives_status_three(run, team):
    """The rules of the others are listed."""
    (team / "team_rules.py").write_text("raise RuntimeError('broken')\n")
    status, out, err = run("rules")
    assert status == 3
    assert "RuntimeError: broken" in err
    assert "collector-strays" in out


def test_the_schema_of_the_design_file_is_printed(run):
    """As JSON that names the tables of a design."""
    status, out, _ = run("schema")
    assert status == 0
    assert {"format", "design", "nets", "parts"} <= set(json.loads(out)["properties"])


def test_the_version_is_that_of_the_package(run):
    """One line."""
    assert run("--version") == (0, f"rulecheck {__version__}\n", "")


@pytest.mark.parametrize("arguments", [("--help",), ("-h",), ("check", "--help")])
def test_help_is_given(run, arguments):
    """On stdout, with status 0."""
    status, out, _ = run(*arguments)
    assert status == 0
    assert "Usage: rulecheck" in out


def test_help_lists_the_commands(run):
    """In the order of use."""
    _, out, _ = run("--help")
    assert re.findall(r"^  (\w+)  +[A-Z]", out, re.MULTILINE) == [
        "check",
        "browse",
        "fix",
        "figures",
        "compare",
        "rules",
        "schema",
    ]


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (("chek", "x"), "did you mean 'check'"),
        (("zzz",), "there are check, browse, fix, figures, compare, rules, schema"),
        (("check",), "Missing argument"),
        (("check", "divider.toml", "--onyl", "x"), "--only"),
        (("check", "divider.toml", "--as", "jason"), "json"),
    ],
)
def test_a_command_line_that_cannot_be_used_gives_status_two(run, arguments, words):
    """The message says what could be meant."""
    status, out, err = run(*arguments)
    assert (status, out) == (2, "")
    assert words in err


def test_a_fault_of_the_program_is_no_finding(run, monkeypatch):
    """It gives status 3 and says that it is one."""
    from rulecheck.review import registry

    def broken():
        raise RuntimeError("cannot be")

    monkeypatch.setattr(registry, "installed_registry", broken)
    status, _, err = run("rules")
    assert status == 3
    assert "fault of the program" in err
    assert "RuntimeError: cannot be" in err
