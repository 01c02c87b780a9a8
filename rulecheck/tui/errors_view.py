"""The errors of a design file in words."""

from __future__ import annotations

from collections.abc import Sequence

from textual.content import Content

from rulecheck.errors import Problem


def problems_in_words(problems: Sequence[Problem]) -> Content:
    """Every error with its place.

    Parameters
    ----------
    problems : sequence of Problem
    """
    lines = [Content.styled("✖ The file cannot be used.", "$major bold"), Content("")]
    for problem in problems:
        place = ":".join(str(part) for part in (problem.file, problem.line, problem.column) if part is not None)
        lines.append(Content.assemble((f"{place}  ", "$strong"), (problem.key, "bold")))
        lines += [Content(f"  {problem.message}"), Content("")]
    return Content("\n").join(lines)
