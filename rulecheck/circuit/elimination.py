"""Exact elimination on sparse linear relations.

Fractions keep what cancels in the circuit cancelled here, so that whether a junction takes part in a relation
is a plain question of zero or not.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Mapping
from fractions import Fraction
from typing import Any

Column = tuple[str, str]
Row = dict[Column, Fraction]
Cost = Callable[[Row], Any]


def subtract(row: Row, other: Mapping[Column, Fraction], factor: Fraction) -> Row:
    """Row minus factor times another, without its zeros."""
    result = dict(row)
    for column, value in other.items():
        rest = result.get(column, Fraction(0)) - factor * value
        if rest:
            result[column] = rest
        else:
            result.pop(column, None)
    return result


def eliminate(rows: Iterable[Row], columns: Iterable[Column], cost: Cost) -> tuple[dict[Column, Row], list[Row]]:
    """Eliminate columns one after the other.

    Parameters
    ----------
    rows : iterable of dict of column to Fraction
        Each a relation ``sum of coefficient · column = 0``.
    columns : iterable of column
        What to eliminate, in this order.
    cost : function of a row
        Of the rows that hold a column, the cheapest defines it.

    Returns
    -------
    pivots : dict of column to row
        The row that defines each column, its own coefficient 1; it may hold columns eliminated later.
    rest : list of row
        The relations without any of these columns.
    """
    left: dict[int, Row] = dict(enumerate(rows))
    where: dict[Column, set[int]] = {}
    for index, row in left.items():
        for column in row:
            where.setdefault(column, set()).add(index)
    pivots: dict[Column, Row] = {}
    for column in columns:
        holders = sorted(where.get(column, ()))
        if not holders:
            continue
        chosen = min(holders, key=lambda index: (cost(left[index]), index))
        pivot = left.pop(chosen)
        pivots[column] = pivot = {key: value / pivot[column] for key, value in pivot.items()}
        for key in pivot:
            where[key].discard(chosen)
        for index in holders:
            if index != chosen:
                left[index] = _replace(left[index], pivot, column, index, where)
    return pivots, [row for row in left.values() if row]


def _replace(row: Row, pivot: Row, column: Column, index: int, where: dict[Column, set[int]]) -> Row:
    result = subtract(row, pivot, row[column])
    for key in row.keys() - result.keys():
        where[key].discard(index)
    for key in result.keys() - row.keys():
        where.setdefault(key, set()).add(index)
    return result


def reduced(rows: Iterable[Row], columns: Iterable[Column], cost: Cost) -> dict[Column, Row]:
    """Fully reduced pivots: no pivot's row holds the column of another.

    Columns are tried in the order given; each row is a relation of least support in these columns.
    """
    return back_substituted(eliminate(rows, columns, cost)[0])


def back_substituted(pivots: Mapping[Column, Row]) -> dict[Column, Row]:
    """Pivots of an elimination with the columns eliminated later replaced in those before."""
    done: dict[Column, Row] = {}
    for column, row in reversed(list(pivots.items())):
        done[column] = substitute(row, done, column)
    return done


def substitute(row: Row, pivots: Mapping[Column, Row], spared: Column | None = None) -> Row:
    """Replace every column of a row that has a pivot but `spared`; pivots must be reduced."""
    for column in [c for c in row if c in pivots and c != spared]:
        row = subtract(row, pivots[column], row[column])
    return row


def blocks(rows: Iterable[Row], joins: Callable[[Column], bool]) -> list[list[Row]]:
    """Sort rows into groups that share no column for which `joins` holds, in the order of first rows."""
    rows = list(rows)
    parent = list(range(len(rows)))

    def find(index: int) -> int:
        while parent[index] != index:
            parent[index] = index = parent[parent[index]]
        return index

    first_with: dict[Column, int] = {}
    for index, row in enumerate(rows):
        for column in filter(joins, row):
            a, b = sorted((find(index), find(first_with.setdefault(column, index))))
            parent[b] = a
    groups: dict[int, list[Row]] = {}
    for index, row in enumerate(rows):
        groups.setdefault(find(index), []).append(row)
    return list(groups.values())
