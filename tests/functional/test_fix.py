"""``rulecheck fix``: remedies listed, shown as diffs, and written."""

import subprocess
from textwrap import dedent

import pytest

from rulecheck.findings import finding_id

from .conftest import DIVIDER

ID = finding_id("divider-ratio", ["R1", "R2"], ["VOUT"], "")
FIXED = DIVIDER.replace('"3 kohm"', '"1 kohm"')
DIFF = dedent("""\
    --- divider.toml
    +++ divider.toml
    @@ -11,7 +11,7 @@

     [parts.R1]
     kind = "resistor"
    -value = "3 kohm"   # from the drawer
    +value = "1 kohm"   # from the drawer
     pins = ["VIN", "VOUT"]

     [parts.R2]
    """).replace("\n\n", "\n \n")


@pytest.fixture
def only_team(monkeypatch):
    """Leave the standard rules out, which have their own checks."""
    from importlib import metadata

    from rulecheck.review import registry

    def team_points(group):
        return [entry for entry in metadata.entry_points(group=group) if entry.name == "team"]

    monkeypatch.setattr(registry, "entry_points", team_points)


@pytest.fixture
def fix(run, only_team):
    """Runs ``rulecheck fix divider.toml`` with options."""
    return lambda *options: run("fix", "divider.toml", *options)


def text(folder):
    """The design file as it stands."""
    return (folder / "divider.toml").read_bytes().decode()


def test_without_options_remedies_are_listed_with_their_edits_and_marks(fix, folder):
    """And nothing is written."""
    status, out, err = fix()
    assert (status, err) == (0, "")
    assert out == dedent(f"""\
        {ID}
            R1 and R2 leave 25% of VIN
          a         Make R1 as large as R2 [proven]
                    set parts.R1.value = "1 kohm"
          b         Make R1 a little smaller [tried, not proven]
                    set parts.R1.value = "2.9 kohm"
          c         Ask for a larger signal [by hand]

        Apply one with --finding ID:REMEDY, or all that are proven with --all-proven;
        --preview shows the diff.
        """)
    assert text(folder) == DIVIDER


@pytest.mark.parametrize("options", [("--all-proven",), ("--finding", ID), ("--finding", f"{ID}:a")])
def test_a_proven_remedy_is_written(fix, folder, options):
    """Comments stay; stdout says what was applied and what is gone; nothing is left, so the status is 0."""
    status, out, _ = fix(*options)
    assert status == 0
    assert text(folder) == FIXED
    assert f"applied     {ID}:a  Make R1 as large as R2" in out
    assert f"gone        {ID}" in out


def test_a_named_remedy_that_is_not_proven_is_written_with_a_warning(fix, folder):
    """The user asked for just that; the finding is left, so the status is 1."""
    status, out, err = fix("--finding", f"{ID}:b")
    assert status == 1
    assert "2.9 kohm" in text(folder)
    assert f"remedy b of {ID} is not proven" in err
    assert f"left        {ID}" in out


def test_line_ends_are_kept(fix, folder):
    """A file with CRLF has CRLF afterwards."""
    (folder / "divider.toml").write_bytes(DIVIDER.replace("\n", "\r\n").encode())
    fix("--all-proven")
    assert text(folder) == FIXED.replace("\n", "\r\n")


@pytest.mark.parametrize("options", [("--all-proven",), ("--finding", ID)])
def test_a_preview_is_the_diff_and_writes_nothing(fix, folder, options):
    """Just the unified diff on stdout."""
    assert fix(*options, "--preview") == (0, DIFF, "")
    assert text(folder) == DIVIDER


def test_a_preview_can_be_applied_with_patch(fix, folder):
    """Also where the last line has no end."""
    (folder / "divider.toml").write_text(DIVIDER + '[rules.crashing]\nseverity = "minor"')
    _, diff, _ = fix("--all-proven", "--preview")
    subprocess.run(["patch", "-p0"], input=diff, text=True, check=True, capture_output=True)
    assert text(folder) == FIXED + '[rules.crashing]\nseverity = "minor"'


def test_a_preview_without_a_choice_shows_the_diff_of_each_remedy(fix, folder):
    """Each under its name."""
    status, out, _ = fix("--preview")
    assert status == 0
    assert f"# {ID}:a  Make R1 as large as R2 [proven]\n{DIFF}" in out
    assert f"# {ID}:b  Make R1 a little smaller [tried, not proven]\n" in out
    assert "by hand" not in out
    assert text(folder) == DIVIDER


def test_where_nothing_is_proven_nothing_is_written(fix, folder):
    """A conceded finding is let be; stderr says so."""
    agreed = DIVIDER + '[[concessions]]\nrule = "divider-ratio"\nparts = ["R1", "R2"]\nreason = "agreed"\n'
    (folder / "divider.toml").write_text(agreed)
    status, out, err = fix("--all-proven")
    assert (status, out) == (0, "")
    assert "nothing was written" in err
    assert text(folder) == agreed


@pytest.mark.parametrize(
    ("options", "words"),
    [
        (("--finding", "divider-ratio:00000000"), f"did you mean '{ID}'"),
        (("--finding", f"{ID}:z"), "it has a, b, c"),
        (("--finding", ID, "--all-proven"), "exclude each other"),
    ],
)
def test_what_cannot_be_done_gives_status_two(fix, folder, options, words):
    """The message says what could be meant, and nothing is written."""
    status, out, err = fix(*options)
    assert (status, out) == (2, "")
    assert words in err.replace("\n", " ")
    assert text(folder) == DIVIDER


def test_a_file_that_changed_meanwhile_is_not_overwritten(fix, folder, monkeypatch):
    """Whoever saved it in between loses nothing."""
    from rulecheck.review import fixing

    real = fixing.apply_all_proven

    def slow(*arguments):
        fixed = real(*arguments)
        (folder / "divider.toml").write_text("# saved in between\n")
        return fixed

    monkeypatch.setattr(fixing, "apply_all_proven", slow)
    status, _, err = fix("--all-proven")
    assert status == 2
    assert "changed" in err
    assert text(folder) == "# saved in between\n"


def test_a_rule_that_fails_gives_status_three(fix, folder):
    """What is proven is written all the same; stderr says whose findings are missing."""
    (folder / "divider.toml").write_text(DIVIDER.replace('"Divider"', '"crash"'))
    status, _, err = fix("--all-proven")
    assert status == 3
    assert "crashing failed: ZeroDivisionError" in err
    assert '"1 kohm"   # from' in text(folder)


def test_a_design_that_cannot_be_read_gives_status_two(fix, folder):
    """With file, line and column."""
    (folder / "divider.toml").write_text(DIVIDER.replace("3 kohm", "3 kHz"))
    status, _, err = fix()
    assert status == 2
    assert "divider.toml:14:9: parts.R1.value" in err
