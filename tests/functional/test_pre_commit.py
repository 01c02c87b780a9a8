"""The hook, run by the real pre-commit in a repository made for the purpose, from a clone of the working tree."""

import os
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from filelock import FileLock

ROOT = Path(__file__).parents[2]
PRE_COMMIT = Path(sys.executable).with_name("pre-commit")
SOUND = """\
format = 1
catalogues = ["parts.toml"]

[design]
title = "Divider with a clamp"

[nets]
GND = { role = "ground" }
VIN = { role = "input", drive = "voltage", range = ["1 V", "10 V"], survives = ["0 V", "10 V"] }
VOUT = { role = "output" }

[parts]
R1 = { kind = "resistor", value = "1 kohm", tolerance = "1 %", tempco = "100 ppm/K", power = "0.25 W", pins = ["VIN", "VOUT"] }
R2 = { kind = "resistor", value = "1 kohm", tolerance = "1 %", tempco = "100 ppm/K", power = "0.25 W", pins = ["VOUT", "GND"] }
D1 = { kind = "diode", model = "house", pins = { A = "GND", K = "VOUT" } }
"""
CATALOGUE = """\
[models.house]
kind = "diode"
saturation_current = "10 fA"
emission_coefficient = 1.05
series_resistance = "1 ohm"
capacitance = "1 pF"
transit_time = "400 ns"
reverse_leakage = "0.5 pA"
leakage_doubling = "10 K"
reverse_voltage = "70 V"
forward_current = "150 mA"
bandgap = "1.12 V"
temperature_exponent = 3
"""
FAULTY = SOUND.replace("0.25 W", "10 mW")


#: Nothing of the user's own git, nor of a commit that may be running these tests, has a say.
ENVIRONMENT = {name: value for name, value in os.environ.items() if not name.startswith(("GIT_", "PRE_COMMIT"))} | {
    "GIT_CONFIG_GLOBAL": os.devnull,
    "GIT_AUTHOR_NAME": "A. Designer",
    "GIT_AUTHOR_EMAIL": "designer@example.org",
    "GIT_COMMITTER_NAME": "A. Designer",
    "GIT_COMMITTER_EMAIL": "designer@example.org",
    "PIP_NO_COMPILE": "1",  # only what a check imports is compiled, when it first does
}


def called(folder, *command):
    """Runs a command in a folder; gives exit status and all that was printed."""
    done = subprocess.run(
        command, cwd=folder, env=ENVIRONMENT, stdout=subprocess.PIPE, stderr=subprocess.STDOUT, text=True, check=False
    )
    return done.returncode, done.stdout


def git(folder, *arguments):
    """Runs git, which must do as it is told."""
    status, printed = called(folder, "git", *arguments)
    assert status == 0, printed
    return printed


@pytest.fixture(scope="session")
def hooks(tmp_path_factory, worker_id):
    """A folder with a repository of the working tree in `rulecheck`, and pre-commit's environments in `home`."""
    base = tmp_path_factory.getbasetemp()
    folder = (base if worker_id == "master" else base.parent) / "hooks"
    with FileLock(f"{folder}.lock"):  # all workers share one
        if not folder.exists():
            clone = folder / "rulecheck"
            names = git(ROOT, "ls-files", "-z", "--cached", "--others", "--exclude-standard").split("\0")
            for name in filter(None, names):
                if (ROOT / name).is_file():
                    (clone / name).parent.mkdir(parents=True, exist_ok=True)
                    shutil.copy(ROOT / name, clone / name)
            git(clone, "init", "--quiet")
            git(clone, "add", "--all")
            git(clone, "commit", "--quiet", "--message", "The working tree")
    return folder


@pytest.fixture
def repository(tmp_path, hooks, monkeypatch):
    """A repository with the hook installed, and in it a sound design, its catalogue and another TOML file."""
    monkeypatch.setitem(ENVIRONMENT, "PRE_COMMIT_HOME", str(hooks / "home"))
    folder = tmp_path / "boards"
    folder.mkdir()
    revision = git(hooks / "rulecheck", "rev-parse", "HEAD").strip()
    (folder / ".pre-commit-config.yaml").write_text(
        f"repos:\n- repo: {hooks / 'rulecheck'}\n  rev: {revision}\n  hooks:\n  - id: rulecheck\n    verbose: true\n"
    )
    for name, text in (("sound.toml", SOUND), ("parts.toml", CATALOGUE), ("tools.toml", "[tool.lint]\nwide = 1\n")):
        (folder / name).write_text(text)
    git(folder, "init", "--quiet")
    git(folder, "add", "--all")
    git(folder, "commit", "--quiet", "--message", "Boards")
    status, printed = called(folder, PRE_COMMIT, "install", "--install-hooks")
    assert status == 0, printed
    return folder


def commit(folder):
    """Commits what is staged; gives whether that went through, and all that was printed."""
    before = git(folder, "rev-parse", "HEAD")
    status, printed = called(folder, "git", "commit", "--message", "Change")
    went_through = status == 0
    assert went_through == (git(folder, "rev-parse", "HEAD") != before)
    return went_through, printed


def reviewed(printed):
    """Designs whose review was printed."""
    return re.findall(r"^(.*\.toml) · ", printed, re.MULTILINE)


def test_a_faulty_design_is_stopped_with_its_finding_and_a_sound_one_passes(repository):
    """What is wrong, the figure, its limit, the place and the mend are to be read; mended, it goes through."""
    file = repository / "divider.toml"
    file.write_text(FAULTY)
    git(repository, "add", ".")
    went_through, printed = commit(repository)
    assert not went_through
    assert "major       dissipation  R1\n            R1: 25.1 mW, 251 % of its rating of 10 mW" in printed
    assert "mend a    take a resistor of 63 mW for R1 [proven]" in printed
    assert "divider.toml:13:6" in printed
    file.write_text(SOUND)
    git(repository, "add", ".")
    went_through, printed = commit(repository)
    assert went_through
    assert reviewed(printed) == ["divider.toml"]


def test_only_what_is_staged_is_reviewed_and_as_it_is_staged(repository):
    """A fault in the working tree that is not staged stops nothing, in the same file or another."""
    (repository / "sound.toml").write_text(SOUND.replace("a clamp", "a diode"))
    (repository / "tools.toml").write_text("[tool.lint]\nwide = 2\n")
    git(repository, "add", ".")
    (repository / "sound.toml").write_text(FAULTY)
    (repository / "not_staged.toml").write_text(FAULTY)
    went_through, printed = commit(repository)
    assert went_through, printed
    assert reviewed(printed) == ["sound.toml"]
    assert "sound.toml · Divider with a diode" in printed
    assert "tools.toml: passed over, it has neither format nor [design]" in printed
    assert (repository / "sound.toml").read_text() == FAULTY


def test_a_change_of_a_catalogue_has_its_designs_reviewed(repository):
    """In all folders, each once, and no design of another catalogue."""
    (repository / "input").mkdir()
    (repository / "input" / "parts.toml").write_text(CATALOGUE)
    (repository / "input" / "other.toml").write_text(SOUND)
    (repository / "second.toml").write_text(SOUND)
    git(repository, "add", ".")
    assert commit(repository)[0]
    (repository / "parts.toml").write_text(CATALOGUE.replace("70 V", "3 V"))
    (repository / "second.toml").write_text(SOUND.replace("a clamp", "another clamp"))
    git(repository, "add", ".")
    went_through, printed = commit(repository)
    assert not went_through
    assert sorted(reviewed(printed)) == ["second.toml", "sound.toml"]
    assert printed.count("reverse voltage 5 V, allowed 3 V") == 2


def test_names_with_blanks_and_beyond_ascii_are_reviewed_from_any_folder(repository):
    """Committed from the folder of the design; the name is printed as it is."""
    folder = repository / "Messgeräte für Öl"
    folder.mkdir()
    (folder / "parts.toml").write_text(CATALOGUE)
    (folder / "Düse 1.toml").write_text(FAULTY)
    git(folder, "add", ".")
    went_through, printed = commit(folder)
    assert not went_through
    assert reviewed(printed) == ["Messgeräte für Öl/Düse 1.toml"]
    (folder / "Düse 1.toml").write_text(SOUND)
    git(folder, "add", ".")
    assert commit(folder)[0]
    status, printed = called(folder, PRE_COMMIT, "run", "--all-files")
    assert status == 0, printed
    assert sorted(reviewed(printed)) == ["Messgeräte für Öl/Düse 1.toml", "sound.toml"]


def test_a_commit_without_designs_goes_through(repository):
    """Of other TOML files each is named; where there is no TOML the hook does not run."""
    (repository / "tools.toml").write_text("[tool.lint]\nwide = 3\n")
    git(repository, "add", ".")
    went_through, printed = commit(repository)
    assert went_through
    assert "tools.toml: passed over" in printed
    assert "0 designs" in printed
    (repository / "notes.txt").write_text("notes\n")
    git(repository, "add", ".")
    went_through, printed = commit(repository)
    assert went_through
    assert "(no files to check)Skipped" in printed
