"""A bench sheet as text: a table a condition, and what could explain readings outside their limits."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Mapping
from typing import TYPE_CHECKING

import numpy as np

from rulecheck.report.layout import Layout, conditions_in_words, quantity, table
from rulecheck.review.outcome import condition_units

if TYPE_CHECKING:
    from rulecheck.analysis.bench import BenchSheet, Measured
    from rulecheck.design.model import Design

CAUTION = (
    "± worst case, by the budget of the parts' spreads; the meter's own error and load are not in it. Voltages are to "
    "ground; on parts from first pin to second, B to E, C to E, IN+ to IN-, END1 to END2."
)


def render(
    design: Design, sheet: BenchSheet, columns: Collection[str], measured: Measured | None = None,
    width: int = 80, color: bool = False,
) -> str:  # fmt: skip
    """Text of a bench sheet.

    Parameters
    ----------
    design : Design
    sheet : BenchSheet
    columns : collection of str
        Quantities of a condition to state.
    measured : Measured, optional
        Then only what was measured is there.
    width : int
        Of the lines, in characters.
    color : bool
        Whether to use colour.
    """
    layout, units = Layout(width, color), condition_units(design)
    lines = layout.wrapped(" · ".join(words for words in (str(design.path), design.title, "bench sheet") if words))
    for index in range(sheet.conditions.size):
        at = {name: value for name, value in sheet.conditions.at(index).items() if name in columns}
        where = f"at {conditions_in_words(at, units)}" if at else "at typical conditions"
        lines += ["", *(layout.styled(line, "bold") for line in layout.wrapped(where))]
        lines += _expected(sheet, index) if measured is None else _compared(measured, index, layout)
    if measured is not None:
        lines += _explanations(measured, layout)
    return "\n".join([*lines, "", *(layout.styled(line, "dim") for line in layout.wrapped(CAUTION))]) + "\n"


def _expected(sheet: BenchSheet, index: int) -> list[str]:
    rows = [
        (_short(name), *(quantity(float(array[index]), "V") for array in (r.expected, r.limit, r.rss)))
        for name, r in sheet.readings.items()
    ]
    return table([("", "expected", "±", "± likely (rss)"), *rows])


def _compared(measured: Measured, index: int, layout: Layout) -> Iterator[str]:
    rows = np.flatnonzero(measured.at == index).tolist()
    if not rows:
        yield "  nothing measured"
        return
    cells: list[tuple[str, ...]] = [("", "measured", "expected", "±", "")]
    for i in rows:
        name = measured.readings[i]
        figures = (measured.volts[i], measured.volts[i] - measured.off[i], measured.limit[i])
        cells.append((
            _short(name), *(quantity(float(figure), "V") for figure in figures), "" if measured.inside[i] else "outside"
        ))  # fmt: skip
    head, *lines = table(cells)
    yield head
    for i, line in zip(rows, lines, strict=True):
        yield line if measured.inside[i] else layout.styled(line, "red")


def _explanations(measured: Measured, layout: Layout) -> Iterator[str]:
    outside = int((~measured.inside).sum())
    yield ""
    if not outside:
        yield from layout.wrapped(f"all {len(measured.volts)} readings are inside")
        return
    yield from layout.wrapped(f"{outside} of {len(measured.volts)} readings outside")
    found = measured.explanations()
    if not found:
        yield from layout.wrapped("no single parameter with a spread explains any of them; look at wiring and values")
        return
    yield from layout.wrapped("what could explain them, each alone, by sensitivity:")
    for explanation in found:
        words = f"{explanation.half_spreads:+.3g} half-spreads; explains {len(explanation.explains)} of {outside}"
        if explanation.contradicts:
            names: Mapping[str, None] = dict.fromkeys(_short(measured.readings[i]) for i in explanation.contradicts)
            words += f", contradicts {', '.join(names)}"
        yield from layout.wrapped(f"{explanation.parameter}  {words}", 2)


def _short(name: str) -> str:
    """A reading without the table that it is of."""
    return name.partition(".")[2]
