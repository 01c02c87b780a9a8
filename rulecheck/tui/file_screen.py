"""What the keys of the review do to the file: review it again, rewrite it, open it."""

from __future__ import annotations

from collections.abc import Sequence

from textual.content import Content
from textual.widgets import Static

from rulecheck.findings import Finding, Remedy
from rulecheck.tui import editor
from rulecheck.tui.document import Document, Reading
from rulecheck.tui.file_page import line_of
from rulecheck.tui.jobs import Working


class FileScreen(Working):
    """A screen of design files, of which one is shown.

    Parameters
    ----------
    documents : sequence of Document
    """

    def __init__(self, documents: Sequence[Document]) -> None:
        super().__init__()
        self.documents = documents
        self.at = 0
        self.busy = ""

    @property
    def document(self) -> Document:
        """The document on the screen."""
        return self.documents[self.at]

    @property
    def finding(self) -> Finding | None:
        """The chosen finding."""
        raise NotImplementedError

    @property
    def remedy(self) -> Remedy | None:
        """The chosen remedy."""
        raise NotImplementedError

    def show_reading(self, reading: Reading | None) -> None:
        """Show a reading of the document, or that there is none yet."""
        raise NotImplementedError

    def show_head(self, reading: Reading | None) -> None:
        """Show which design it is and what was found in it."""
        raise NotImplementedError

    def say(self, words: str, *, busy: bool = False) -> None:
        """Show words in the line of state; `busy` while the work they tell of is running."""
        self.busy = words if busy else ""
        self.query_one("#state", Static).update(Content.styled(words, "$quiet" if busy else "$ink"))

    def action_apply(self) -> None:
        """Apply the chosen remedy."""
        reading, finding, remedy = self.document.reading, self.finding, self.remedy
        document = self.document
        if reading is None or finding is None or remedy is None:
            self.notify("This finding has no remedy.", severity="warning")
        elif not remedy.proven:
            words = "is not proven" if reading.tried else "is still being tried"
            self.notify(f"Remedy {remedy.id} {words}; only proven ones are applied.", severity="warning")
        else:
            self.say(f"applying {remedy.id}: {remedy.title}", busy=True)
            self.work_on(document, lambda _, shown: document.apply(reading, finding, remedy, shown))

    def action_undo(self) -> None:
        """Take the last remedy back."""
        self._step(again=False)

    def action_redo(self) -> None:
        """Write the remedy again that was taken back."""
        self._step(again=True)

    def _step(self, *, again: bool) -> None:
        document, reading = self.document, self.document.reading
        if reading is None or not (document.undone if again else document.done):
            self.notify("There is nothing to take back." if not again else "Nothing was taken back.")
            return
        self.say("rewriting the file", busy=True)
        self.work_on(document, lambda progress, shown: document.step_back(reading, progress, shown, again=again))

    def action_review(self) -> None:
        """Review the file again."""
        document = self.document
        self.say(f"reading {document.path.name}", busy=True)
        self.show_head(document.reading)
        self.work_on(document, lambda progress, shown: (document.read(progress, shown), None))

    def action_cancel(self) -> None:
        """Give up the review that is running."""
        if self.busy:
            self.workers.cancel_group(self, "review")
            self.say("given up; F5 reviews again")

    def look_at_disk(self) -> None:
        """Review the file again where it has changed."""
        if not self.busy and self.document.is_stale():
            self.action_review()

    def action_edit(self) -> None:
        """Open the file in the editor."""
        reading = self.document.reading
        with self.app.suspend():
            status = editor.open_at(self.document.path, line_of(reading, self.finding) if reading else 1)
        self.refresh()
        if status:
            self.notify(f"the editor ended with status {status}", severity="warning")

    def action_design(self, step: int) -> None:
        """Go to another design."""
        if len(self.documents) > 1:
            self.at = (self.at + step) % len(self.documents)
            reading = self.document.reading
            self.show_reading(reading)
            if reading is None or not (reading.tried or reading.report.errors) or self.document.is_stale():
                self.action_review()
            else:
                self.say(outcome_in_words(reading))


def outcome_in_words(reading: Reading) -> str:
    """A line for the outcome of a review."""
    report = reading.report
    if report.errors:
        return "The file cannot be used; it is read again when it is saved."
    if report.failures:
        return f"incomplete: {report.failures[0].rule} failed: {report.failures[0].message}"
    if report.not_run:
        return f"{len(report.not_run)} rules were not run, the circuit is broken: see {report.not_run[0].because}"
    words = f"{report.rules_run} rules have been run"
    if not report.findings:
        return f"{words}."
    proven = sum(any(remedy.proven for remedy in finding.remedies) for finding in report.findings)
    return f"{words}; {proven} of {len(report.findings)} findings have a proven remedy."
