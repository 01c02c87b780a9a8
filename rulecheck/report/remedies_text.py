"""Remedies and what came of applying them, as text and as diffs."""

from __future__ import annotations

import difflib
import re
from collections.abc import Iterable, Iterator
from typing import TYPE_CHECKING

from rulecheck.design.edit import to_toml
from rulecheck.findings import Add, DesignReport, Edit, Move, Remedy, Remove, Set
from rulecheck.report.layout import Layout

if TYPE_CHECKING:
    from rulecheck.review.fixing import Fixed, Step


def render(design: DesignReport, width: int = 80, color: bool = False) -> str:
    """Every finding with its remedies, the edits that make each, and whether it is proven.

    Parameters
    ----------
    design : DesignReport
    width : int
        Of the lines, in characters.
    color : bool
        Whether to use colour.
    """
    layout = Layout(width, color)
    lines: list[str] = []
    for finding in design.findings:
        if finding.remedies:
            lines += [layout.styled(finding.id, "bold"), *layout.wrapped(finding.message, 4)]
            lines += [line for remedy in finding.remedies for line in _remedy(remedy, layout)]
            lines.append("")
    if not lines:
        return f"{design.file}: no finding has a remedy\n"
    hint = "Apply one with --finding ID:REMEDY, or all that are proven with --all-proven; --preview shows the diff."
    return "\n".join([*lines, *layout.wrapped(hint)]) + "\n"


def mark(remedy: Remedy) -> str:
    """Whether a remedy is proven, in words.

    Parameters
    ----------
    remedy : Remedy
    """
    return "proven" if remedy.proven else "tried, not proven" if remedy.edits else "by hand"


def _remedy(remedy: Remedy, layout: Layout) -> Iterator[str]:
    style = "green" if remedy.proven else "dim"
    yield from layout.labelled(f"  {remedy.id}", f"{remedy.title} [{mark(remedy)}]", style)
    for edit in remedy.edits:
        yield from layout.labelled("", edit_in_words(edit))


def edit_in_words(edit: Edit) -> str:
    """An edit as the file will say it.

    Parameters
    ----------
    edit : Set, Add, Remove or Move
    """
    match edit:
        case Set(key, to):
            return f"set {key} = {to_toml(to)}"
        case Add(key, table):
            return f"add {key} = {to_toml(dict(table))}"
        case Remove(key):
            return f"remove {key}"
        case Move(key, to):
            return f"connect {key} to {to}"


def render_fixed(fixed: Fixed, width: int = 80) -> str:
    """What was applied, and the findings that went and came.

    Parameters
    ----------
    fixed : Fixed
    width : int
        Of the lines, in characters.
    """
    layout = Layout(width)
    lines = [line for step in fixed.steps for line in layout.labelled("applied", _step(step))]
    before, after = ({finding.id for finding in findings} for findings in (fixed.before, fixed.review.findings))
    for label, ids in (("gone", before - after), ("come", after - before), ("left", after & before)):
        if ids:
            lines += layout.labelled(label, ", ".join(sorted(ids)))
    return "\n".join(lines) + "\n"


def _step(step: Step) -> str:
    return f"{step.finding.id}:{step.remedy.id}  {step.remedy.title}"


def unified_diff(old: str, new: str, file: str) -> str:
    """Unified diff from one text of a file to another.

    Parameters
    ----------
    old, new : str
    file : str
        Its name in the head of the diff.
    """
    return "".join(_closed(difflib.unified_diff(_lines(old), _lines(new), file, file)))


def _lines(text: str) -> list[str]:
    return re.findall(r"[^\n]*\n|[^\n]+", text)


def _closed(lines: Iterable[str]) -> Iterator[str]:
    """Lines of a diff, each ended; one without an end in the file is marked so."""
    for line in lines:
        yield line if line.endswith("\n") else f"{line}\n\\ No newline at end of file\n"
