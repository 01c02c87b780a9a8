"""The numbers of a design as CSV: a row a condition, a column a figure, named as in the JSON."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

from rulecheck.design.keypath import join_key
from rulecheck.report.figures_json import design_figures

if TYPE_CHECKING:
    from rulecheck.analysis.review import Review


def render(review: Review) -> str:
    """Text of the numbers as CSV; a cell is empty where there is no figure.

    Parameters
    ----------
    review : Review
    """
    columns = dict(_columns(design_figures(review)))
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    writer.writerow(columns)
    writer.writerows([_cell(value) for value in row] for row in zip(*columns.values(), strict=True))
    return text.getvalue()


def _columns(table: Mapping[str, Any], path: tuple[str, ...] = ()) -> Iterator[tuple[str, list[Any]]]:
    """Columns below a table, named by their key paths."""
    for name, value in table.items():
        if isinstance(value, Mapping):
            yield from _columns(value, (*path, name))
        elif name == "budget":
            yield from ((join_key((*path, name, c["parameter"])), c["contribution"]) for c in value)
        elif isinstance(value, list):
            yield join_key((*path, name)), value


def _cell(value: float | str | bool | None) -> float | str:
    if isinstance(value, bool):
        return str(value).lower()
    return "" if value is None else value
