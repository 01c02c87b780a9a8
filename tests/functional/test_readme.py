"""What the README shows is what the program does."""

import re
from pathlib import Path

from rulecheck.findings import Severity
from rulecheck.testing import design_from, findings_of

from .readme import FAULTY, PICTURED, ROOT, block, checked


def test_the_design_of_the_readme_is_sound():
    """Copied as it stands it has no major and no minor finding."""
    assert [f for f in findings_of(design_from(block("toml"))) if f.severity > Severity.OBSERVATION] == []


def test_the_finding_of_the_readme_is_the_real_one():
    """Word for word what the command prints."""
    assert block("console") == f"$ rulecheck check {FAULTY}\n{checked(FAULTY)}"


def test_the_picture_shows_the_real_output():
    """Every finding id that the command prints stands in the picture."""
    picture = (ROOT / "docs" / "check.svg").read_text(encoding="utf-8")
    ids = re.findall(r"[a-z-]+:[0-9a-f]{8}", checked(PICTURED))
    assert ids
    assert all(found in picture for found in ids)


def test_the_test_command_of_the_readme_is_that_of_the_check_script():
    """One command installs and tests, for people and for machines."""
    command = next(line for line in block("sh").splitlines() if line)
    test = re.findall(r"```sh\n(python3 .*pytest)\n```", (ROOT / "README.md").read_text(encoding="utf-8"))
    assert "example_designs/sound/nozzle_flow.toml" in command
    assert test
    assert test[0] in Path(ROOT / ".ci" / "run").read_text(encoding="utf-8")
