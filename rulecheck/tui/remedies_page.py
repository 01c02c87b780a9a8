"""The page of remedies: which are proven, and what the chosen one changes in the file."""

from __future__ import annotations

from collections.abc import Iterator

from textual.content import Content

from rulecheck.errors import EditError
from rulecheck.findings import Finding, Remedy
from rulecheck.report.remedies_text import edit_in_words, unified_diff
from rulecheck.review.remedies import edited
from rulecheck.tui.document import Reading
from rulecheck.tui.page import Page


class RemediesPage(Page):
    """The remedies of a finding and the diff of the chosen one."""

    title = "3 Remedies"

    def __init__(self) -> None:
        super().__init__(id="remedies")
        self._shown: tuple[Reading, Finding] | None = None
        self._chosen = 0
        self._picked = False

    @property
    def chosen(self) -> Remedy | None:
        """The chosen remedy, if the finding has any."""
        remedies = self._shown[1].remedies if self._shown else ()
        return remedies[self._chosen] if remedies else None

    def show(self, reading: Reading, finding: Finding | None) -> None:
        """Show the remedies of a finding; the first proven one is chosen until the user chooses another."""
        if not (self._shown and finding and self._shown[1].id == finding.id):
            self._picked = False
        self._shown = (reading, finding) if finding else None
        if finding and not (self._picked and self._chosen < len(finding.remedies)):
            marks = [bool(remedy.proven) for remedy in finding.remedies]
            self._chosen = marks.index(True) if True in marks else 0
        super().show(reading, finding)

    def choose_next(self) -> None:
        """Choose the next remedy."""
        if self._shown and self._shown[1].remedies:
            self._picked = True
            self._chosen = (self._chosen + 1) % len(self._shown[1].remedies)
            super().show(*self._shown)

    def content(self, reading: Reading, finding: Finding) -> Content:
        """The text about a finding."""
        if not finding.remedies:
            return Content.styled("No remedy is known for this finding.", "$quiet")
        return Content("\n").join(self._lines(reading, finding))

    def _lines(self, reading: Reading, finding: Finding) -> Iterator[Content]:
        for number, remedy in enumerate(finding.remedies):
            chosen = number == self._chosen
            words, style = mark(remedy)
            yield Content.assemble(
                ("▶ " if chosen else "  ", "$strong"), (f"{remedy.id}  ", "$strong bold"),
                (f"{words}  ", style), (remedy.title, "bold" if chosen else ""),
            )  # fmt: skip
        yield Content("")
        remedy = finding.remedies[self._chosen]
        yield from (Content.styled(edit_in_words(edit), "$quiet") for edit in remedy.edits)
        yield from _diff(reading, remedy)


def mark(remedy: Remedy) -> tuple[str, str]:
    """Whether a remedy is proven, in a word with a sign, and its style."""
    if not remedy.edits:
        return "by hand", "$quiet"
    if remedy.proven is None:
        return "… untried", "$quiet"
    return ("✔ proven", "$proven") if remedy.proven else ("✘ not proven", "$unproven")


def _diff(reading: Reading, remedy: Remedy) -> Iterator[Content]:
    if not remedy.edits:
        return
    try:
        text = edited(reading.text, remedy)
    except EditError as error:
        yield Content.styled(f"The file cannot be edited so: {error}", "$unproven")
        return
    styles = {"+": "$proven", "-": "$major", "@": "$strong"}
    for line in unified_diff(reading.text, text, reading.report.file).splitlines()[2:]:
        yield Content.styled(line, styles.get(line[:1], "$quiet"))
