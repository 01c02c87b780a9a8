"""The page that draws the evidence over what varies, with its limit and the worst point."""

from __future__ import annotations

from textual.app import ComposeResult
from textual.containers import Vertical
from textual.content import Content
from textual.events import Resize
from textual.widgets import Static

from rulecheck.findings import Evidence, Finding
from rulecheck.report.layout import conditions_in_words, quantity
from rulecheck.tui.document import Reading
from rulecheck.tui.drawing import WORST, Diagram, bar, draw
from rulecheck.tui.evidence_curve import Curve, Scenario, curves, scenarios


class PlotPage(Vertical):
    """Evidence as a diagram; one piece and one abscissa at a time."""

    can_focus = True
    title = "2 Plot"

    def __init__(self) -> None:
        super().__init__(id="plot")
        self._shown: tuple[Reading, Finding] | None = None
        self._piece = 0
        self._abscissa = 0

    def compose(self) -> ComposeResult:
        """The diagram with words above and below."""
        yield Static(id="plot-head")
        yield Static(id="plot-body")
        yield Static(id="plot-foot")

    def on_mount(self) -> None:
        """Write the title into the border."""
        self.border_title = self.title

    def on_resize(self, event: Resize) -> None:
        """Draw anew in the new room."""
        self.call_after_refresh(self._draw)

    def show(self, reading: Reading, finding: Finding | None) -> None:
        """Show the evidence of a finding."""
        if not (finding and self._shown and self._shown[1].id == finding.id):
            self._piece = self._abscissa = 0
        self._shown = (reading, finding) if finding else None
        self._draw()

    def next_piece(self) -> None:
        """Draw the next piece of evidence."""
        self._piece, self._abscissa = self._piece + 1, 0
        self._draw()

    def next_abscissa(self) -> None:
        """Draw over the next quantity that varies."""
        self._abscissa += 1
        self._draw()

    def _draw(self) -> None:
        head, body, foot = self._parts()
        self.query_one("#plot-head", Static).update(head)
        self.query_one("#plot-body", Static).update(body)
        self.query_one("#plot-foot", Static).update(foot)

    def _parts(self) -> tuple[Content, Content, Content]:
        blank = Content("")
        if self._shown is None:
            return blank, blank, blank
        reading, finding = self._shown
        grids = reading.grids
        drawable = [] if grids is None else [
            (piece, conditions) for piece in finding.evidence
            if (conditions := grids.under(finding, piece)) is not None
        ]  # fmt: skip
        if not drawable:
            words = "The evidence of this finding is no figure over the conditions."
            return Content.styled(words, "$quiet"), blank, blank
        piece, conditions = drawable[self._piece % len(drawable)]
        head = _head(piece, self._piece % len(drawable) + 1, len(drawable))
        if conditions.scenario is not None:
            return head, _bars(piece, scenarios(piece, conditions), *self._room()), blank
        found = curves(finding, piece, conditions)
        if not found:
            return head, Content.styled("It was computed at too few conditions for a curve.", "$quiet"), blank
        curve = found[self._abscissa % len(found)]
        return head, self._diagram(reading, piece, curve), _foot(reading, piece, curve, len(found))

    def _room(self) -> tuple[int, int]:
        """Columns and rows of the diagram; the words above take one row, those below three."""
        return max(self.content_size.width, 30), max(self.content_size.height - 5, 6)

    def _diagram(self, reading: Reading, piece: Evidence, curve: Curve) -> Content:
        limits = [] if piece.limit is None else [piece.limit]
        mark = (float(curve.x[curve.worst]), float(curve.y[curve.worst]))
        unit = reading.report.units.get(curve.over, "1")
        diagram = Diagram([(curve.x, curve.y)], unit, piece.unit, limits, mark, joined=bool(curve.held))
        return Content("\n").join(draw(diagram, *self._room()))


def _head(piece: Evidence, number: int, count: int) -> Content:
    more = f"  ({number} of {count}, v: next)" if count > 1 else ""
    limit = "" if piece.limit is None else f"  ╌╌ limit {piece.relation} {quantity(piece.limit, piece.unit)}"
    return Content.assemble((piece.quantity, "bold"), (limit, "$minor"), (more, "$quiet"))


def _foot(reading: Reading, piece: Evidence, curve: Curve, count: int) -> Content:
    units = reading.report.units
    x, y = float(curve.x[curve.worst]), float(curve.y[curve.worst])
    more = f" (x: another of {count})" if count > 1 else ""
    if curve.held:
        held = f"at {conditions_in_words(curve.held, units)}"
    else:
        held = f"points: the worst of all conditions at each {curve.over}"
    return Content.assemble(
        (f"over {curve.over}{more}", "$strong"), "  ",
        (f"{WORST} {quantity(y, piece.unit)} at {quantity(x, units.get(curve.over, '1'))}", "$major"),
        (f"\n{held}", "$quiet"),
    )  # fmt: skip


def _bars(piece: Evidence, found: list[Scenario], width: int, height: int) -> Content:
    """The worst fault scenarios as bars."""
    most = max((abs(s.value) for s in found), default=0.0) or 1.0
    most = max(most, abs(piece.limit or 0.0))
    lines = []
    for scenario in found[: max(height // 2, 1)]:
        value = quantity(scenario.value, piece.unit)
        beyond = piece.limit is not None and not _holds(scenario.value, piece.relation, piece.limit)
        style = "$major" if beyond else "$strong"
        sign = f"{WORST} " if beyond else "  "
        lines.append(Content(f"{sign}{scenario.words}"))
        lines.append(Content.assemble("  ", (bar(abs(scenario.value) / most, max(width - 16, 8)), style), f" {value}"))
    return Content("\n").join(lines)


def _holds(value: float, relation: str, limit: float) -> bool:
    return {"<=": value <= limit, "<": value < limit, ">=": value >= limit, ">": value > limit,
            "==": value == limit}[relation]  # fmt: skip
