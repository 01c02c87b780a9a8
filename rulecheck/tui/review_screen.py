"""The screen of the review: the list of findings, and beside it all about the chosen one."""

from __future__ import annotations

from collections.abc import Sequence
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import BindingType
from textual.containers import Container, Horizontal, Vertical
from textual.content import Content
from textual.widgets import Footer, Input, OptionList, Static

from rulecheck.findings import Finding, Remedy
from rulecheck.tui.circuit_page import CircuitPage
from rulecheck.tui.dialogs import Dialog, change_in_words, key_list
from rulecheck.tui.document import Document, Reading
from rulecheck.tui.errors_view import problems_in_words
from rulecheck.tui.evidence_plot import PlotPage
from rulecheck.tui.file_page import FilePage
from rulecheck.tui.file_screen import FileScreen, outcome_in_words
from rulecheck.tui.finding_list import FindingList
from rulecheck.tui.finding_page import FindingPage
from rulecheck.tui.grouping import ORDERS, counted, matching
from rulecheck.tui.jobs import Failed, Progressed, Read
from rulecheck.tui.keys import DIALOG_KEYS, MOVING, NUMBERS_KEYS, PAGES, REVIEW_KEYS
from rulecheck.tui.numbers_screen import NumbersScreen
from rulecheck.tui.remedies_page import RemediesPage

BAR = 12
#: Columns from which all pages are shown at once.
WIDE = 120


class ReviewScreen(FileScreen):
    """Findings of one design at a time.

    Parameters
    ----------
    documents : sequence of Document
    watch : float
        Seconds between looks at the files on disk.
    """

    CSS_PATH = "review_screen.tcss"
    BINDINGS: ClassVar[list[BindingType]] = [*REVIEW_KEYS]

    def __init__(self, documents: Sequence[Document], watch: float) -> None:
        super().__init__(documents)
        self._watch = watch
        self.HORIZONTAL_BREAKPOINTS = [(0, "-narrow"), (WIDE, "-wide")]
        self._order = 0

    @property
    def finding(self) -> Finding | None:
        """The chosen finding."""
        return self.query_one(FindingList).chosen

    @property
    def remedy(self) -> Remedy | None:
        """The chosen remedy."""
        return self.query_one(RemediesPage).chosen

    def compose(self) -> ComposeResult:
        """Head, list and pages, foot."""
        yield Static(id="head")
        with Horizontal(id="body"):
            with Vertical(id="side"):
                yield Input(placeholder="words, Enter to end", id="search")
                yield FindingList()
            with Vertical(id="main"):
                yield Static(id="tabs")
                with Container(id="pages"):
                    yield FindingPage(id="finding")
                    yield PlotPage()
                    yield RemediesPage()
                    yield FilePage(id="file")
                    yield CircuitPage(id="circuit")
        yield Static(id="state")
        yield Footer(show_command_palette=False, compact=True)

    def on_mount(self) -> None:
        """Start the first review, and watch the file."""
        self.query_one(FindingList).focus()
        self.action_page("finding")
        self.set_interval(self._watch, self.look_at_disk)
        self.action_review()

    # -- what the work tells

    def on_progressed(self, message: Progressed) -> None:
        """Show how far the review is."""
        if message.document is self.document:
            full = BAR * message.done // max(message.total, 1)
            bar = "■" * full + "·" * (BAR - full)
            self.say(f"{bar} {message.done + 1} of {message.total}  {message.what}", busy=True)

    def on_read(self, message: Read) -> None:
        """Show what the review found."""
        message.document.reading = message.reading
        if message.document is not self.document:
            return
        self.show_reading(message.reading)
        if message.final:
            self.say(outcome_in_words(message.reading))
        if message.change is not None:
            self.app.push_screen(Dialog("What it did", change_in_words(message.change)))

    def on_failed(self, message: Failed) -> None:
        """Say why there is no outcome."""
        if message.document is self.document:
            self.say(message.words)
            self.notify(message.words, severity="error", title=str(message.document.path.name), markup=False)

    # -- what is shown

    def show_reading(self, reading: Reading | None) -> None:
        """Show a reading of the document, or that there is none yet."""
        self.show_head(reading)
        broken = reading is not None and bool(reading.report.errors)
        self.set_class(broken, "-broken")
        self._fill()
        if broken and reading is not None:
            self.action_page("finding")
            self.query_one(FindingPage).write(problems_in_words(reading.report.errors))
            self.query_one(FilePage).show(reading, None)

    def show_head(self, reading: Reading | None) -> None:
        """Show which design it is and what was found in it."""
        design = self.document.path.name
        if len(self.documents) > 1:
            design += f" ({self.at + 1} of {len(self.documents)})"
        report = reading.report if reading else None
        words = "" if report is None else "✖ cannot be used" if report.errors else counted(report.findings)
        title = report.title if report else ""
        self.query_one("#head", Static).update(
            Content.assemble((design, "$strong bold"), "  ", (words, "bold"), "  ", (title, "$quiet"))
        )

    def _fill(self) -> None:
        reading = self.document.reading
        words = self.query_one("#search", Input).value
        findings = matching(reading.report.findings, words) if reading else []
        order = ORDERS[self._order]
        side = self.query_one("#side")
        side.border_title = f"by {order}" + (f": {words}" if words else "")
        side.border_subtitle = f"{len(findings)} of {len(reading.report.findings)}" if words and reading else ""
        self.query_one(FindingList).fill(findings, order)
        self._show_finding()

    def _show_finding(self) -> None:
        reading, finding = self.document.reading, self.finding
        if reading is None or reading.report.errors:
            return
        self.query_one(FindingPage).show(reading, finding)
        self.query_one(PlotPage).show(reading, finding)
        self.query_one(RemediesPage).show(reading, finding)
        self.query_one(FilePage).show(reading, finding)
        self.query_one(CircuitPage).show(reading, finding)

    def on_option_list_option_highlighted(self, event: OptionList.OptionHighlighted) -> None:
        """Another finding was chosen."""
        self._show_finding()

    def on_input_changed(self, event: Input.Changed) -> None:
        """Other words are searched for."""
        self._fill()

    def on_input_submitted(self, event: Input.Submitted) -> None:
        """From the words to the list."""
        self.query_one("#search", Input).display = bool(event.value)
        self.query_one(FindingList).focus()

    # -- what the keys do

    def action_page(self, name: str) -> None:
        """Show a page; where all are shown, go to it."""
        for page in PAGES:
            self.query_one(f"#{page}").set_class(page == name, "-shown")
        tabs = [
            Content.styled(f" {number} {page.capitalize()} ", "$ink on $chosen bold" if page == name else "$quiet")
            .stylize(f"@click=screen.page('{page}')")
            for number, page in enumerate(PAGES, 1)
        ]  # fmt: skip
        self.query_one("#tabs", Static).update(Content("").join(tabs))
        if self.has_class("-wide"):
            self.query_one(f"#{name}").focus()

    def action_widen(self) -> None:
        """Hide or show the list."""
        self.toggle_class("-full")

    def action_regroup(self) -> None:
        """Group by the next order."""
        self._order = (self._order + 1) % len(ORDERS)
        self._fill()

    def action_search(self) -> None:
        """Type words to search for."""
        self.remove_class("-full")
        search = self.query_one("#search", Input)
        search.display = True
        search.focus()

    def action_leave_search(self) -> None:
        """Show all findings."""
        search = self.query_one("#search", Input)
        search.value = ""
        search.display = False
        self.query_one(FindingList).focus()

    def action_next_piece(self) -> None:
        """Plot the next piece of evidence."""
        self.query_one(PlotPage).next_piece()

    def action_next_abscissa(self) -> None:
        """Plot over the next quantity."""
        self.query_one(PlotPage).next_abscissa()

    def action_next_remedy(self) -> None:
        """Choose the next remedy."""
        self.query_one(RemediesPage).choose_next()

    def action_copy_id(self) -> None:
        """Copy the id of the finding."""
        if self.finding:
            self.app.copy_to_clipboard(self.finding.id)
            self.notify(f"copied {self.finding.id}", markup=False)

    def action_numbers(self) -> None:
        """Show the numbers."""
        reading = self.document.reading
        if reading is None or reading.numbers is None:
            self.notify("There are no numbers of a design that cannot be used.", severity="warning")
        else:
            self.app.push_screen(NumbersScreen(reading.numbers, self.document.path.name))

    def action_theme(self) -> None:
        """Turn from dark to light and back."""
        from rulecheck.tui.app import Browser

        if isinstance(self.app, Browser):
            self.app.turn_theme()

    def action_help(self) -> None:
        """List all keys."""
        sections = [("Review", MOVING + REVIEW_KEYS), ("Numbers", NUMBERS_KEYS), ("Help and notes", DIALOG_KEYS)]
        self.app.push_screen(Dialog("Keys", key_list(sections)))
