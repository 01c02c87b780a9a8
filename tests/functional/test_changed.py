"""``rulecheck check --changed``: which designs a change of files has reviewed."""

import json

import pytest

from .conftest import DIVIDER

JSON = ("--only", "divider-ratio", "--as", "json")
CATALOGUED = DIVIDER.replace("format = 1\n", 'format = 1\ncatalogues = ["house/parts.toml"]\n')
CATALOGUE = "[models]\n"


@pytest.fixture
def boards(folder):
    """Two designs of one catalogue, one of another of the same name, and one of none."""
    for name in ("input", "house", "input/house", ".hidden"):
        (folder / name).mkdir()
    for name in ("a.toml", "b.toml", "input/c.toml", ".hidden/d.toml"):
        (folder / name).write_text(CATALOGUED)
    for name in ("house/parts.toml", "input/house/parts.toml"):
        (folder / name).write_text(CATALOGUE)
    (folder / "tools.toml").write_text("[tool]\nwide = 1\n")
    return folder


@pytest.fixture
def reviewed(run, boards):
    """Runs the command on names; gives exit status, the designs reviewed, and stderr."""

    def run_changed(*names):
        status, out, err = run("check", "--changed", *names, *JSON)
        return status, [design["file"] for design in json.loads(out)["designs"]], err

    return run_changed


def test_designs_are_reviewed_and_other_files_passed_over(reviewed):
    """With a line on stderr for each of these."""
    assert reviewed("tools.toml", "divider.toml") == (
        1, ["divider.toml"], "tools.toml: passed over, it has neither format nor [design]\n",
    )  # fmt: skip


def test_the_designs_of_a_catalogue_are_reviewed(reviewed):
    """By its place, not its name; hidden folders are left out."""
    assert reviewed("house/parts.toml") == (1, ["a.toml", "b.toml"], "")
    assert reviewed("input/house/parts.toml") == (1, ["input/c.toml"], "")


def test_a_design_is_reviewed_once(reviewed, boards):
    """Also where it changed together with its catalogue, and by whatever path it is named."""
    assert reviewed("house/parts.toml", "b.toml", str(boards / "a.toml"))[1] == ["b.toml", str(boards / "a.toml")]


def test_nothing_to_review_is_no_fault(reviewed):
    """A commit of other files goes through."""
    assert reviewed("tools.toml")[:2] == (0, [])


@pytest.mark.parametrize("text", ['[design]\ntitle = "half', "[design]\n", "format = 1\n"])
def test_a_half_written_design_is_not_passed_over(reviewed, boards, text):
    """Nor what is no TOML: it could be a design."""
    (boards / "half.toml").write_text(text)
    assert reviewed("half.toml") == (2, ["half.toml"], "")


@pytest.mark.parametrize("catalogues", ["3", '"house/parts.toml"', "[3]", '["nul\\u0000"]', '["loop"]'])
def test_a_design_whose_catalogues_are_no_names_stops_no_search(reviewed, boards, catalogues):
    """It did not change, and is another's to mend."""
    (boards / "loop").symlink_to("loop")
    (boards / "a.toml").write_text(CATALOGUED.replace('["house/parts.toml"]', catalogues))
    assert reviewed("house/parts.toml") == (1, ["b.toml"], "")


def test_without_the_option_a_named_file_that_is_no_design_is_an_error(run, boards):
    """Who names it means it."""
    status, _, _ = run("check", "tools.toml", *JSON)
    assert status == 2
