"""The bench sheet of ``rulecheck figures --bench``, and readings laid over it."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

from rulecheck.cli.status import Status
from rulecheck.cli.streams import emit, narrate, width_and_color

if TYPE_CHECKING:
    from rulecheck.analysis.bench import BenchSheet, Measured
    from rulecheck.analysis.conditions import Conditions
    from rulecheck.analysis.review import Review
    from rulecheck.cli.points_file import Columns
    from rulecheck.design.model import Design


def print_bench(design: Design, form: str, points: Path | None, against: Path | None) -> Status:
    """Print the bench sheet of a design, or how readings compare with it.

    Parameters
    ----------
    design : Design
    form : str
        ``text``, ``json`` or ``csv``.
    points : Path, optional
        Conditions; else typical ones, inputs in the middle and at the ends of their ranges.
    against : Path, optional
        Readings, with their conditions.

    Returns
    -------
    Status
        That of findings where a reading is outside.
    """
    import numpy as np

    from rulecheck.analysis.bench import Measured, bench_sheet
    from rulecheck.analysis.review import Review
    from rulecheck.cli.readings_file import full_names, read_readings

    readings = None if against is None else read_readings(against, design)
    nominal = Review(design)
    conditions, columns = _conditions(nominal, points) if readings is None else _given(nominal, readings.points)
    review = Review(design, conditions=conditions)
    sheet = bench_sheet(review, columns)
    measured = None
    if readings is not None and against is not None:
        names = full_names(against, readings, sheet.readings)
        measured = Measured(sheet, names, np.array(readings.at), np.array(readings.volts))
    emit(_rendered(design, sheet, columns, measured, form))
    failures = review.operating_points.failures()
    for failure in failures:
        narrate(f"{design.path}: {failure}")
    if failures:
        return Status.FAILED
    return Status.CLEAN if measured is None or measured.inside.all() else Status.FINDINGS


def _conditions(nominal: Review, points: Path | None) -> tuple[Conditions, tuple[str, ...]]:
    """Conditions of a sheet, and the quantities that they state."""
    from rulecheck.analysis.conditions import corner_rows, from_rows
    from rulecheck.cli.points_file import read_points

    if points is not None:
        return _given(nominal, read_points(points, nominal.design))
    inputs = nominal.design.inputs
    return from_rows([{}, *corner_rows(inputs)], nominal.typical), ("ambient", *inputs)


def _given(nominal: Review, columns: Columns) -> tuple[Conditions, tuple[str, ...]]:
    from rulecheck.analysis.conditions import from_points

    return from_points(nominal.design, columns, nominal.typical), tuple(columns)


def _rendered(
    design: Design, sheet: BenchSheet, columns: tuple[str, ...], measured: Measured | None, form: str
) -> str:  # fmt: skip
    if form == "json":
        from rulecheck.report import bench_json

        return bench_json.render(design, sheet, measured)
    if form == "csv":
        from rulecheck.report import bench_csv

        return bench_csv.render(sheet, columns, measured)
    from rulecheck.report import bench_text

    return bench_text.render(design, sheet, columns, measured, *width_and_color())
