"""Relations between junction voltages alone: closed loops, and what reaches an output."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Sequence
from dataclasses import dataclass
from typing import Any

from .elimination import Column, Row, back_substituted, blocks, eliminate, reduced, substitute, subtract

MOST_ROOTS = 24  # junctions that a group's loops are laid out around, to find the shortest

Order = Callable[[str, str], int]


@dataclass(frozen=True)
class Relation:
    """A relation between junction voltages; `output` is the point it reaches, None for a closed loop."""

    row: Row
    output: str | None = None


def fixed_voltages(rows: Iterable[Row], is_fixed: Callable[[Column], bool]) -> dict[str, Row]:
    """Voltages of points that only fixed quantities set, as coefficients of their columns, by point."""
    found: dict[str, Row] = {}
    linear = (row for row in rows if not _junctions(row))
    bare = ({c: v for c, v in row.items() if c[0] != "eq"} for row in linear)
    for block in blocks(bare, lambda column: column[0] in "VJI"):
        columns = [c for kind in "VJI" for c in _columns(block, kind)]
        for column, row in reduced(block, columns, _cost).items():
            others = {c: -value for c, value in row.items() if c != column}
            if column[0] == "V" and all(map(is_fixed, others)):
                found[column[1]] = others
    return found


def junction_relations(
    rows: Iterable[Row], outputs: Sequence[str], order: Sequence[str], apart: Order
) -> Iterator[Relation]:
    """Relations between junction voltages, each of as few junctions as possible.

    Parameters
    ----------
    rows : iterable of row
        All relations of the circuit.
    outputs : sequence of str
        Points of outputs.
    order : sequence of str
        Junctions in the order of the file.
    apart : function of two references
        Distance of two junctions in the circuit; loops close between near ones where there is a choice.

    Notes
    -----
    Node voltages are eliminated first, then junction currents: what is left, and holds no current, are the
    loops. A relation that does hold a current, dropped across a resistor, is a loop as well where its
    junctions cancel; alone they would only say how a transistor is biased.
    """
    place = {ref: i for i, ref in enumerate(order)}
    for block in blocks(rows, lambda column: column[0] in "VJIv"):
        kept = dict.fromkeys(("V", point) for point in outputs)
        inner = [c for kind in "VJ" for c in _columns(block, kind) if c not in kept]
        _, rest = eliminate(block, inner, _cost)
        reaching, rest = eliminate(rest, kept, _cost)
        through, closed = eliminate(rest, _columns(rest, "I"), _cost)
        loops, layouts = _shortest(closed, place, apart)
        yield from (Relation(row) for row in loops)
        for row in through.values():
            short = _shortened(row, layouts, place)
            if len(_junctions(short)) > 1:
                yield Relation(short)
        reached = back_substituted(reaching)
        for column in reaching:
            short = _shortened(reached[column], layouts, place)
            if _junctions(short):
                yield Relation(short, column[1])


def _columns(rows: Iterable[Row], kind: str) -> list[Column]:
    return list(dict.fromkeys(column for row in rows for column in row if column[0] == kind))


def _junctions(row: Row) -> list[str]:
    return [name for kind, name in row if kind == "v"]


def _count(row: Row, kinds: str) -> int:
    return sum(kind in kinds for kind, _ in row)


def _cost(row: Row) -> tuple[int, int]:
    """Cost of defining a voltage by a row: relations between voltages alone come first."""
    return _count(row, "I"), _count(row, "VJIvKS")


def _length(row: Row, place: dict[str, int]) -> tuple[Any, ...]:
    """Length of a loop: junctions, other terms, equations; then its place in the file."""
    equations = sum(kind == "eq" for kind, _ in row)
    return len(_junctions(row)), _count(row, "IKS"), equations, sorted(place[ref] for ref in _junctions(row))


def _shortest(
    closed: list[Row], place: dict[str, int], apart: Order
) -> tuple[list[Row], list[list[dict[Column, Row]]]]:
    """Shortest independent loops, and for each group of loops the layouts they were taken from."""
    loops: list[Row] = []
    layouts: list[list[dict[Column, Row]]] = []
    for group in blocks(closed, lambda column: column[0] == "v"):
        found = _layouts(group, place, apart)
        layouts.append(found)
        choice = sorted((row for pivots in found for row in pivots.values()), key=lambda row: _length(row, place))
        loops += _independent(choice)
    return loops, layouts


def _layouts(group: list[Row], place: dict[str, int], apart: Order) -> list[dict[Column, Row]]:
    """Lay out the loops of a group around each of its junctions, far ones in terms of near ones."""
    junctions = sorted((name for _, name in _columns(group, "v")), key=place.__getitem__)
    found = []
    for root in junctions[:MOST_ROOTS]:
        far_first = sorted(junctions, key=lambda ref: (-apart(root, ref), -place[ref]))
        found.append(reduced(group, [("v", ref) for ref in far_first], _cost))
    return found


def _independent(rows: Iterable[Row]) -> list[Row]:
    """Rows that do not follow from those before, judged by their junctions."""
    chosen: list[Row] = []
    pivots: dict[Column, Row] = {}
    for row in rows:
        rest = {column: value for column, value in row.items() if column[0] == "v"}
        for column, pivot in pivots.items():
            if column in rest:
                rest = subtract(rest, pivot, rest[column])
        if rest:
            column = next(iter(rest))
            pivots[column] = {c: value / rest[column] for c, value in rest.items()}
            chosen.append(row)
    return chosen


def _shortened(row: Row, layouts: list[list[dict[Column, Row]]], place: dict[str, int]) -> Row:
    """Find the shortest form of a relation, loops added as that helps."""
    for group in layouts:
        row = min([row, *(substitute(row, pivots) for pivots in group)], key=lambda form: _length(form, place))
    return row
