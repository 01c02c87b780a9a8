"""A page about the chosen finding; every page shows the same finding in its own way."""

from __future__ import annotations

from textual.app import ComposeResult
from textual.containers import ScrollableContainer
from textual.content import Content
from textual.widgets import Static

from rulecheck.findings import Finding
from rulecheck.tui.document import Reading


class Page(ScrollableContainer):
    """A page with a title, scrolled where it is longer than its room."""

    title = ""

    def compose(self) -> ComposeResult:
        """The text of the page."""
        yield Static(classes="text")

    def on_mount(self) -> None:
        """Write the title into the border."""
        self.border_title = self.title

    def show(self, reading: Reading, finding: Finding | None) -> None:
        """Show a finding; None: there is none to show.

        Parameters
        ----------
        reading : Reading
        finding : Finding, optional
        """
        self.write(self.content(reading, finding) if finding else nothing(reading))
        self.scroll_to(0, 0, animate=False)

    def write(self, content: Content) -> None:
        """Put a text on the page."""
        self.query_one(".text", Static).update(content)

    def content(self, reading: Reading, finding: Finding) -> Content:
        """The text about a finding."""
        raise NotImplementedError


def nothing(reading: Reading) -> Content:
    """What a page says where no finding is chosen."""
    if reading.report.outcome == "clean":
        return Content.styled(f"✔ Nothing found by {reading.report.rules_run} rules.", "$proven")
    return Content.styled("No finding is chosen.", "$quiet")
