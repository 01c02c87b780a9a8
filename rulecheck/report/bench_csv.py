"""A bench sheet as CSV: a row a reading, to be filled in and laid over the figures again."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Collection
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from rulecheck.analysis.bench import BenchSheet, Measured

READING, MEASURED = "reading", "measured"
NOT_READ = ("expected", "low", "high", "inside")
"""Columns that are passed over when a sheet is read again."""


def render(sheet: BenchSheet, columns: Collection[str], measured: Measured | None = None) -> str:
    """Text of a bench sheet as CSV.

    Parameters
    ----------
    sheet : BenchSheet
    columns : collection of str
        Quantities of a condition to state.
    measured : Measured, optional
        Then only what was measured is there, and whether it is inside.
    """
    text = io.StringIO()
    writer = csv.writer(text, lineterminator="\n")
    head = [*columns, READING, *NOT_READ[:3], MEASURED]
    points = [[sheet.conditions.values[name][i] for name in columns] for i in range(sheet.conditions.size)]

    def row(name: str, index: int) -> list[float | str]:
        reading = sheet.readings[name]
        expected, limit = float(reading.expected[index]), float(reading.limit[index])
        figures = (expected, expected - limit, expected + limit)
        return [*points[index], name, *("" if math.isnan(figure) else figure for figure in figures)]

    if measured is None:
        writer.writerow(head)
        writer.writerows([*row(name, i), ""] for i in range(len(points)) for name in sheet.readings)
    else:
        writer.writerow([*head, NOT_READ[3]])
        rows = zip(measured.readings, measured.at, measured.volts, measured.inside, strict=True)
        writer.writerows([*row(name, i), volts, str(bool(inside)).lower()] for name, i, volts, inside in rows)
    return text.getvalue()
