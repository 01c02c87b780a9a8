"""The parts of the README that come from the program: its finding and its picture.

``python -m tests.functional.readme`` writes them anew after the program's words changed.
"""

from __future__ import annotations

import datetime as dt
import io
import os
import re
from pathlib import Path

from rulecheck.findings import Report
from rulecheck.report import text
from rulecheck.review.registry import installed_registry
from rulecheck.review.runner import Options, review_design

ROOT = Path(__file__).parents[2]
README = ROOT / "README.md"
FAULTY = "example_designs/faulty/unmatched_pair.toml"
PICTURED = "example_designs/faulty/no_clamp.toml"
ON = dt.date(2026, 12, 1)


def block(language: str) -> str:
    """Text of the fenced block of a language in the README."""
    found = re.search(rf"```{language}\n(.*?)```", README.read_text(encoding="utf-8"), re.DOTALL)
    assert found, f"the README has no block of {language}"
    return found[1]


def checked(path: str, color: bool = False) -> str:
    """What `rulecheck check` prints of a design, from the root of the project."""
    here = Path.cwd()
    os.chdir(ROOT)
    try:
        report = Report((review_design(Path(path), installed_registry(), Options(on=ON)),), ON)
    finally:
        os.chdir(here)
    return text.render(report, 80, color)


def write() -> None:
    """Put the program's present words into the README and its picture."""
    from rich.console import Console
    from rich.text import Text

    whole = README.read_text(encoding="utf-8")
    fresh = f"```console\n$ rulecheck check {FAULTY}\n{checked(FAULTY)}```"
    README.write_text(re.sub(r"```console\n.*?```", lambda _: fresh, whole, flags=re.DOTALL), encoding="utf-8")
    console = Console(record=True, width=82, file=io.StringIO())
    console.print(Text.from_ansi(checked(PICTURED, color=True)))
    picture = console.export_svg(title=f"rulecheck check {PICTURED}")
    # the frame of the exporter imitates a window: three dots that mean nothing here
    picture = re.sub(r'<g transform="translate\(26,22\)">.*?</g>', "", picture, flags=re.DOTALL)
    picture = re.sub(r"@font-face \{.*?\}", "", picture, flags=re.DOTALL)
    picture = picture.replace("font-family: Fira Code", "font-family: 'DejaVu Sans Mono'")
    (ROOT / "docs" / "check.svg").write_text(picture, encoding="utf-8")


if __name__ == "__main__":
    write()
