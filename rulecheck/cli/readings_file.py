"""Readings taken at the bench, read from a CSV file: a filled-in bench sheet."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from rulecheck.cli.points_file import Columns, ConditionTable, text_of
from rulecheck.errors import DesignError, Problem, QuantityError
from rulecheck.report.bench_csv import MEASURED, NOT_READ, READING
from rulecheck.review.outcome import condition_units
from rulecheck.review.words import did_you_mean
from rulecheck.units import Unit

if TYPE_CHECKING:
    from collections.abc import Iterable

    from rulecheck.design.model import Design


@dataclass(frozen=True)
class Readings:
    """Measurements as the file has them, those without a value left out.

    Attributes
    ----------
    points : mapping of str to ndarray
        Conditions, each once, in SI by name.
    names : tuple of str
        What was read.
    at : list of int
        The condition of each.
    volts : list of float
    lines : list of int
        Where each stands.
    """

    points: Columns
    names: tuple[str, ...]
    at: list[int]
    volts: list[float]
    lines: list[int]


def read_readings(file: Path, design: Design) -> Readings:
    """Measurements of a CSV file, one a row.

    Parameters
    ----------
    file : Path
        With columns ``reading`` and ``measured`` (quantities in V or SI numbers; empty where nothing was measured),
        and columns of conditions as in a file of points.
    design : Design

    Raises
    ------
    CommandError
        The file cannot be read.
    DesignError
        With every fault of its content.
    """
    table = ConditionTable(str(file), condition_units(design), (READING, MEASURED, *NOT_READ))
    columns = table.read(text_of(file))
    missing = [name for name in (READING, MEASURED) if name not in table.texts]
    if missing:
        raise DesignError([Problem(str(file), name, "this column is missing", 1) for name in missing])
    rows = list(zip(*(column.tolist() for column in columns.values()), strict=True)) or [()] * len(table.lines)
    conditions = {row: index for index, row in enumerate(dict.fromkeys(rows))}
    points = {name: np.array([row[i] for row in conditions]) for i, name in enumerate(columns)}
    kept = [i for i, cell in enumerate(table.texts[MEASURED]) if cell]
    volts, problems = [], []
    for i in kept:
        try:
            volts.append(Unit("V", allow_number=True).read(table.texts[MEASURED][i]))
        except QuantityError as error:
            problems.append(Problem(str(file), MEASURED, str(error), table.lines[i]))
    if not kept:
        problems.append(Problem(str(file), MEASURED, "no row has a measured value", 2))
    if problems:
        raise DesignError(problems)
    names = tuple(table.texts[READING][i] for i in kept)
    return Readings(points, names, [conditions[rows[i]] for i in kept], volts, [table.lines[i] for i in kept])


def full_names(file: Path, readings: Readings, known: Iterable[str]) -> tuple[str, ...]:
    """Readings by the names of the sheet, where ``nets.`` and ``parts.`` may be left out.

    Parameters
    ----------
    file : Path
    readings : Readings
    known : iterable of str

    Raises
    ------
    DesignError
        With every name that the sheet does not have.
    """
    names: Mapping[str, str] = {alias: name for name in known for alias in (name.partition(".")[2], name)}
    problems = []
    for name, line in zip(readings.names, readings.lines, strict=True):
        if name not in names:
            hint = did_you_mean(name, names) or "the sheet that --bench prints has the names"
            problems.append(Problem(str(file), READING, f"there is no reading {name!r} ({hint})", line))
    if problems:
        raise DesignError(problems)
    return tuple(names[name] for name in readings.names)
