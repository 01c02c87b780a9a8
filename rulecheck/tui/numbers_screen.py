"""The screen of numbers: error over input, margins over signal, the error budget as bars."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING, ClassVar

import numpy as np
from textual import work
from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import ScrollableContainer
from textual.content import Content
from textual.events import Resize
from textual.message import Message
from textual.screen import Screen
from textual.widgets import Footer, Static

from rulecheck.report.layout import conditions_in_words, quantity
from rulecheck.review.judging import words_of
from rulecheck.tui.drawing import WORST, Diagram, bar, draw
from rulecheck.tui.keys import NUMBERS_KEYS, SHEETS
from rulecheck.tui.numbers import Bars, Numbers, Sheet, numbers_of

if TYPE_CHECKING:
    from rulecheck.analysis.review import Review

BAR_WIDTH = 60


@dataclass
class Computed(Message):
    """The numbers are there, or words for why they are not."""

    numbers: Numbers | None
    words: str = ""


class NumbersScreen(Screen[None]):
    """Numbers of one design.

    Parameters
    ----------
    review : Review
    name : str
        Of the design.
    """

    CSS_PATH = "numbers_screen.tcss"
    BINDINGS: ClassVar[list[BindingType]] = [*NUMBERS_KEYS]

    def __init__(self, review: Review, name: str) -> None:
        super().__init__()
        self._review = review
        self._design = name
        self._sheet = SHEETS[0]
        self._item = self._ambient = self._input = 0
        self._numbers: Numbers | None = None
        self._words = "computing the numbers"

    def compose(self) -> ComposeResult:
        """Head, sheet, foot."""
        yield Static(id="numbers-head")
        with ScrollableContainer(id="sheet"):
            yield Static(id="sheet-text")
        yield Footer(show_command_palette=False, compact=True)

    def on_mount(self) -> None:
        """Start to compute."""
        self.query_one("#sheet").focus()
        self._compute()
        self._draw()

    @work(thread=True, group="numbers")
    def _compute(self) -> None:
        try:
            self.post_message(Computed(numbers_of(self._review)))
        except Exception as error:  # noqa: BLE001 - what an analysis raises is told, and the screen stays
            self.post_message(Computed(None, f"there are no numbers: {words_of(error)}"))

    def on_computed(self, message: Computed) -> None:
        """Show the numbers."""
        self._numbers, self._words = message.numbers, message.words
        if self._numbers is not None and self._numbers.typical["ambient"] in self._numbers.ambients:
            self._ambient = self._numbers.ambients.index(self._numbers.typical["ambient"])
        self._draw()

    def on_resize(self, event: Resize) -> None:
        """Draw anew in the new room."""
        self.call_after_refresh(self._draw)

    def action_sheet(self, name: str) -> None:
        """Show a sheet."""
        self._sheet, self._item = name, 0
        self._draw()

    def action_next_item(self) -> None:
        """Show the next requirement or amplifier."""
        self._item += 1
        self._draw()

    def action_next_ambient(self) -> None:
        """Show the next ambient."""
        self._ambient += 1
        self._draw()

    def action_next_input(self) -> None:
        """Draw over the next input."""
        self._input += 1
        self._draw()

    def _draw(self) -> None:
        head = [(f"{self._design}  ", "$strong bold")]
        head += [(f" {n} {name.capitalize()} ", "$ink on $chosen bold" if name == self._sheet else "$quiet")
                 for n, name in enumerate(SHEETS, 1)]  # fmt: skip
        self.query_one("#numbers-head", Static).update(Content.assemble(*head))
        self.query_one("#sheet-text", Static).update(self._content())

    def _content(self) -> Content:
        numbers = self._numbers
        if numbers is None:
            return Content.styled(self._words, "$quiet")
        if self._sheet == "budget":
            bars = numbers.budgets
            return _bars(bars[self._item % len(bars)], numbers, self._width()) if bars else _nothing("error budget")
        sheets = numbers.transfer if self._sheet == "transfer" else numbers.margins
        if not sheets or not numbers.inputs:
            return _nothing("requirement with a law" if self._sheet == "transfer" else "loop over an input")
        return self._diagram(numbers, sheets[self._item % len(sheets)], len(sheets))

    def _width(self) -> int:
        return max(self.query_one("#sheet").content_size.width, 40)

    def _diagram(self, numbers: Numbers, sheet: Sheet, count: int) -> Content:
        over = numbers.inputs[self._input % len(numbers.inputs)]
        ambients = numbers.ambients
        ambient = ambients[self._ambient % len(ambients)]
        x, y, allowed = numbers.section(sheet, over, ambient)
        head = Content.assemble(
            (sheet.name, "bold"), f" over {over}", (f"  ambient {quantity(ambient, 'degC')}", "$strong"),
            ("  ╌╌ allowed" if allowed is not None else "", "$minor"),
            (f"  ({count} by o)" if count > 1 else "", "$quiet"),
        )  # fmt: skip
        if not np.isfinite(y).any():
            return Content("\n").join([head, Content.styled("It has no figure here.", "$quiet")])
        height = max(self.query_one("#sheet").content_size.height - 4, 8)
        at = int(np.nanargmax(np.abs(y)) if self._sheet == "transfer" else np.nanargmin(y))
        limits = [] if allowed is None or not np.isfinite(allowed).any() else _limits(allowed)
        diagram = Diagram([(x, y)], numbers.units[over], sheet.unit, limits, (float(x[at]), float(y[at])))
        foot = f"{WORST} {quantity(float(y[at]), sheet.unit)} at {quantity(float(x[at]), numbers.units[over])}"
        held = {n: v for n, v in numbers.typical.items() if n not in (over, "ambient")}
        return Content("\n").join(
            [head, *draw(diagram, self._width(), height), Content.styled(foot, "$major"),
             Content.styled(f"all else typical: {conditions_in_words(held, numbers.units)}", "$quiet")]
        )  # fmt: skip


def _limits(allowed: np.ndarray) -> list[float]:
    """The least that is allowed at the conditions drawn, to either side."""
    least = float(np.nanmin(allowed))
    return [-least, least]


def _nothing(what: str) -> Content:
    return Content.styled(f"The design has no {what}.", "$quiet")


def _bars(bars: Bars, numbers: Numbers, width: int) -> Content:
    room = max(min(width - 44, BAR_WIDTH), 10)
    most = max((abs(value) for _, value in (*bars.contributions, *bars.totals)), default=0.0) or 1.0
    lines = [Content.styled(bars.name, "bold"),
             Content.styled(f"at {conditions_in_words(bars.at, numbers.units)}", "$quiet"), Content("")]  # fmt: skip
    for style, rows in (("$strong", bars.contributions), ("$minor", bars.totals)):
        lines += [
            Content.assemble(f"{name[:31]:<31} ", (bar(abs(value) / most, room), style), f" {quantity(value, 'V'):>10}")
            for name, value in rows
        ]
        lines.append(Content(""))
    return Content("\n").join(lines)
