"""The list of findings in their groups."""

from __future__ import annotations

from collections.abc import Sequence

from textual.content import Content
from textual.widgets import OptionList
from textual.widgets.option_list import Option

from rulecheck.findings import Finding
from rulecheck.tui.grouping import grouped, label, sign_of, style_of


class FindingList(OptionList):
    """Findings under the headings of their groups; a heading cannot be chosen."""

    def __init__(self) -> None:
        super().__init__(id="findings")
        self._rows: list[Finding | None] = []

    @property
    def chosen(self) -> Finding | None:
        """The highlighted finding."""
        at = self.highlighted
        return self._rows[at] if at is not None and at < len(self._rows) else None

    def fill(self, findings: Sequence[Finding], order: str) -> None:
        """Show other findings; the one chosen stays so where it is there still.

        Parameters
        ----------
        findings : sequence of Finding
        order : str
            What they are grouped by.
        """
        before, place = self.chosen, self.highlighted
        self._rows, options = [], []
        for group in grouped(findings, order):
            self._rows.append(None)
            options.append(Option(_heading(group.name, len(group.findings)), disabled=True))
            for finding in group.findings:
                self._rows.append(finding)
                options.append(Option(_row(finding, order)))
        self.set_options(options)
        self.highlighted = self._nearest(before, place)

    def choose(self, name: str) -> None:
        """Highlight the finding of an id, where it is in the list."""
        at = [row for row, finding in enumerate(self._rows) if finding and finding.id == name]
        if at:
            self.highlighted = at[0]

    def _nearest(self, before: Finding | None, place: int | None) -> int | None:
        rows = [row for row, finding in enumerate(self._rows) if finding]
        if not rows:
            return None
        same = [row for row in rows if before and (found := self._rows[row]) and found.id == before.id]
        return min(same or rows, key=lambda row: abs(row - (place or 0)))


def _heading(name: str, count: int) -> Content:
    return Content.assemble((name, "$strong bold"), (f"  {count}", "$quiet"))


def _row(finding: Finding, order: str) -> Content:
    return Content.assemble((f" {sign_of(finding)} ", f"{style_of(finding)} bold"), (label(finding, order), "$ink"))
