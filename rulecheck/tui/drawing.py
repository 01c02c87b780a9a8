"""Diagrams as coloured text: a curve with its axes, and bars."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from textual.content import Content

from rulecheck.report.layout import quantity
from rulecheck.tui.braille import Axis, Canvas

Array = np.ndarray[Any, np.dtype[Any]]
WORST = "✖"
LEAST_WIDTH, LEAST_HEIGHT = 12, 4
BAR = " ▏▎▍▌▋▊▉█"


@dataclass(frozen=True)
class Diagram:
    """What is drawn in one diagram.

    Attributes
    ----------
    lines : sequence of (x, y)
        Arrays of equal length.
    limits : sequence of float
        Drawn dashed.
    mark : (x, y), optional
        The worst point.
    joined : bool
        Whether the points of a line belong together, and are joined.
    """

    lines: Sequence[tuple[Array, Array]]
    x_unit: str
    y_unit: str
    limits: Sequence[float] = ()
    mark: tuple[float, float] | None = None
    joined: bool = True


def draw(diagram: Diagram, width: int, height: int) -> list[Content]:
    """A diagram in so many characters, with ticks on both axes.

    Parameters
    ----------
    diagram : Diagram
    width, height : int
    """
    everything = np.concatenate([np.ravel(y) for _, y in diagram.lines] + [np.asarray(diagram.limits, float)])
    across = Axis.of(np.concatenate([np.ravel(x) for x, _ in diagram.lines]))
    up = Axis.of(everything, room=0.06)
    rows = max(height - 2, LEAST_HEIGHT)
    ticks = {tick: quantity(tick, diagram.y_unit) for tick in up.ticks(max(2, rows // 3))}
    margin = max(map(len, ticks.values()), default=0)
    canvas = Canvas(max(width - margin - 1, LEAST_WIDTH), rows)
    places = [(across.place(x), up.place(y)) for x, y in diagram.lines]
    for x, y in places:
        (canvas.line if diagram.joined else canvas.points)(x, y)
    overlay = Canvas(canvas.width, rows)
    for limit in diagram.limits:
        overlay.dashed(float(up.place(np.array(limit))))
    at = {canvas.cell(0, float(up.place(np.array(tick))))[0]: words for tick, words in ticks.items()}
    body = _rows(diagram, canvas, overlay, across, up)
    lines = [
        Content.assemble((at.get(row, "").rjust(margin), "$quiet"), ("┤" if row in at else "│", "$quiet"), content)
        for row, content in enumerate(body)
    ]
    return lines + [Content.styled(line, "$quiet") for line in _foot(across, diagram.x_unit, margin, canvas.width)]


def _rows(diagram: Diagram, canvas: Canvas, overlay: Canvas, across: Axis, up: Axis) -> list[Content]:
    """Rows of the field: the curve over the limit, the mark over both."""
    mark = None
    if diagram.mark is not None and np.isfinite(diagram.mark).all():
        x, y = (float(axis.place(np.array(v))) for axis, v in zip((across, up), diagram.mark, strict=True))
        mark = canvas.cell(x, y)
    rows = []
    for number, (curve, limit) in enumerate(zip(canvas.rows(), overlay.rows(), strict=True)):
        cells = [(_joined(a, b), "$strong" if a != " " else "$minor") for a, b in zip(curve, limit, strict=True)]
        if mark is not None and mark[0] == number:
            cells[mark[1]] = (WORST, "$major bold")
        rows.append(Content.assemble(*cells))
    return rows


def _joined(one: str, other: str) -> str:
    """Two Braille signs in one place."""
    codes = [ord(sign) - 0x2800 for sign in (one, other) if sign != " "]
    return chr(0x2800 + int(np.bitwise_or.reduce(codes))) if codes else " "


def _foot(axis: Axis, unit: str, margin: int, width: int) -> list[str]:
    """The abscissa with its ticks, and their words below."""
    rule, words, free = ["─"] * width, [" "] * (margin + 1 + width), 0
    for tick in sorted(axis.ticks(max(2, width // 9)), key=lambda tick: float(axis.place(np.array(tick)))):
        at = round(float(axis.place(np.array(tick))) * (width - 1))
        rule[at] = "┬"
        text = quantity(tick, unit)
        start = min(max(margin + 1 + at - len(text) // 2, 0), len(words) - len(text))
        if start >= free:
            words[start : start + len(text)] = text
            free = start + len(text) + 1
    return [" " * margin + "└" + "".join(rule), "".join(words).rstrip()]


def bar(share: float, width: int) -> str:
    """A bar of a share of so many characters, to an eighth of one."""
    eighths = round(min(max(share, 0.0), 1.0) * width * 8) if np.isfinite(share) else 0
    whole, rest = divmod(eighths, 8)
    return (BAR[8] * whole + (BAR[rest] if rest else "")).ljust(width)
