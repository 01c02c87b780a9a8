"""Conditions of the user's own, read from a CSV file."""

from __future__ import annotations

import csv
import io
from collections.abc import Collection, Mapping, Sequence
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np

from rulecheck.errors import CommandError, DesignError, Problem, QuantityError
from rulecheck.review.outcome import condition_units
from rulecheck.review.words import did_you_mean
from rulecheck.units import Unit

if TYPE_CHECKING:
    from rulecheck.design.model import Design

Columns = dict[str, "np.ndarray[tuple[int], np.dtype[np.float64]]"]


def read_points(file: Path, design: Design) -> Columns:
    """Conditions of a CSV file in SI, by name, one array entry a row.

    Parameters
    ----------
    file : Path
        Its first line names quantities of a condition; cells are quantities ("10 mV") or SI numbers.
    design : Design

    Raises
    ------
    CommandError
        The file cannot be read.
    DesignError
        With every fault of its content: line, and number and name of the column.
    """
    return ConditionTable(str(file), condition_units(design)).read(text_of(file))


def text_of(file: Path) -> str:
    """Text of a file of points.

    Parameters
    ----------
    file : Path

    Raises
    ------
    CommandError
        It cannot be read.
    """
    try:
        return file.read_text(encoding="utf-8-sig")
    except (OSError, UnicodeDecodeError) as error:
        reason = getattr(error, "strerror", None) or error
        raise CommandError(f"points {file} cannot be read: {reason}") from error


class ConditionTable:
    """A table of conditions, one a row, with columns of text beside them.

    Parameters
    ----------
    file : str
        Its name, for faults.
    units : mapping of str to str
        Of the quantities of a condition, by name.
    others : collection of str
        Names of the other columns.

    Attributes
    ----------
    texts : dict of str to list of str
        Cells of the other columns that there are, by name.
    lines : list of int
        Line of each row.
    """

    def __init__(self, file: str, units: Mapping[str, str], others: Collection[str] = ()) -> None:
        self._file = file
        self._units = units
        self._others = others
        self.texts: dict[str, list[str]] = {}
        self.lines: list[int] = []
        self._problems: list[Problem] = []

    def read(self, text: str) -> Columns:
        """Conditions in SI, by name; see `read_points`.

        Parameters
        ----------
        text : str
        """
        reader = csv.reader(io.StringIO(text), skipinitialspace=True, strict=True)
        rows: list[tuple[int, list[str]]] = []
        try:
            for row in reader:
                if any(cell.strip() for cell in row):
                    rows.append((reader.line_num, [cell.strip() for cell in row]))
        except csv.Error as error:
            self._add(reader.line_num, None, "", f"this is not CSV: {error}")
        if len(rows) < 2 and not self._problems:
            self._add(len(rows) + 1, None, "", "a line of names and at least one line of values are expected")
        values = self._values(rows) if not self._problems else {}
        if self._problems:
            raise DesignError(self._problems)
        return {name: np.array(column) for name, column in values.items()}

    def _values(self, rows: Sequence[tuple[int, list[str]]]) -> dict[str, list[float]]:
        (first, header), *body = rows
        self._check_header(first, header)
        values: dict[str, list[float]] = {name: [] for name in header if name not in self._others}
        self.texts = {name: [] for name in header if name in self._others}
        for line, row in body:
            if len(row) != len(header):
                self._add(line, None, "", f"found {len(row)} values; {len(header)} are expected, one a name")
                continue
            self.lines.append(line)
            for column, (name, cell) in enumerate(zip(header, row, strict=True), 1):
                if name in self._others:
                    self.texts[name].append(cell)
                elif name in self._units:
                    values[name].append(self._value(line, column, name, cell))
        return values

    def _check_header(self, line: int, header: Sequence[str]) -> None:
        for column, name in enumerate(header, 1):
            if name not in self._units and name not in self._others:
                known = (*self._units, *self._others)
                hint = did_you_mean(name, known) or f"there are {', '.join(known)}"
                self._add(line, column, name, f"there is nothing to set by this name ({hint})")
            elif name in header[: column - 1]:
                self._add(line, column, name, "this name stands twice")

    def _value(self, line: int, column: int, name: str, cell: str) -> float:
        unit = self._units[name]
        try:
            value = Unit(unit, allow_number=True).read(cell)
        except QuantityError as error:
            self._add(line, column, name, str(error))
            return np.nan
        if unit == "1" and not 0.0 <= value <= 1.0:
            self._add(line, column, name, f"found {cell!r}; the position of a potentiometer is 0 to 1")
        return value

    def _add(self, line: int, column: int | None, name: str, message: str) -> None:
        self._problems.append(Problem(self._file, name, message, line, column))
