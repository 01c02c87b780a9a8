"""The page that shows the design file at the line of the finding."""

from __future__ import annotations

from textual.content import Content

from rulecheck.findings import Finding
from rulecheck.tui.document import Reading
from rulecheck.tui.page import Page

#: Lines shown before and after that of the finding; what is farther is read in the editor.
AROUND = 300
LINES_ABOVE = 4


class FilePage(Page):
    """The design file, the line of the finding marked."""

    title = "4 File"
    _row = 0

    def show(self, reading: Reading, finding: Finding | None) -> None:
        """Show the file at the line of a finding, or at the first error where it has any."""
        line = line_of(reading, finding)
        lines = reading.text.splitlines()
        start = max(line - 1 - AROUND, 0)
        digits = len(str(len(lines)))
        shown = enumerate(lines[start : line + AROUND], start + 1)
        self.write(Content("\n").join(_line(number, text, digits, line) for number, text in shown))
        self.border_subtitle = f"line {line}"
        self._row = line - 1 - start
        self._go()

    def on_show(self) -> None:
        """Go to the line; a page that is hidden cannot be scrolled."""
        self._go()

    def on_resize(self) -> None:
        """Keep the line in sight."""
        self._go()

    def _go(self) -> None:
        self.call_after_refresh(self.scroll_to, 0, max(self._row - LINES_ABOVE, 0), animate=False)


def line_of(reading: Reading, finding: Finding | None) -> int:
    """The line to look at, from 1."""
    if finding and finding.location:
        return finding.location.line
    here = [p.line for p in reading.report.errors if p.line and p.file == reading.report.file]
    return here[0] if here else 1


def _line(number: int, text: str, digits: int, chosen: int) -> Content:
    here = number == chosen
    head = (f"{'▶' if here else ' '}{number:>{digits}} ", "$strong bold" if here else "$quiet")
    style = "$quiet" if text.lstrip().startswith("#") else "$strong" if text.startswith("[") else ""
    line = Content.assemble(head, (text.expandtabs(4), style))
    return line.stylize("$ink on $chosen bold") if here else line
