"""Boards for the tests of rules: designs from files, changed where a test wants a fault."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from rulecheck.api import Design, Rule, Severity
from rulecheck.design.load import load_text
from rulecheck.testing import findings_of, mended

DESIGNS = Path(__file__).parent / "designs"
Board = Callable[..., Design]
Cures = Callable[..., dict[str, list[str]]]


@pytest.fixture
def board() -> Board:
    """Load the design of a name, with texts replaced: ``board("gas_log", ("22 ohm", "22 kohm"))``."""

    def load(name: str, *changes: tuple[str, str]) -> Design:
        path = DESIGNS / f"{name}.toml"
        text = path.read_text(encoding="utf-8")
        for old, new in changes:
            assert text.count(old) >= 1, f"{name} has no {old!r}"
            text = text.replace(old, new)
        return load_text(text, path)

    return load


@pytest.fixture
def cures() -> Cures:
    """Make the edits of each remedy of a rule, or of that with a title, and review again with every rule in force.

    Gives, by the remedy's title, what is wrong after it: the finding that is still there, and majors and minors
    that were not there before.
    """

    def after(design: Design, rule: type[Rule], title: str = "") -> dict[str, list[str]]:
        before = findings_of(design)
        known = {finding.id for finding in before}
        return {
            remedy.title: [
                f"{other.id} {other.message}"
                for other in findings_of(mended(design, remedy))
                if other.id == finding.id or (other.severity > Severity.OBSERVATION and other.id not in known)
            ]
            for finding in before
            if finding.rule == rule.name
            for remedy in finding.remedies
            if remedy.edits and title in (remedy.title, "")
        }

    return after
