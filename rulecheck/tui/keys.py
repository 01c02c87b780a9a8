"""The keys of every screen; what is not listed here does nothing."""

from __future__ import annotations

from textual.binding import Binding

#: Pages about a finding, and sheets of numbers, in the order of their keys.
PAGES = ("finding", "plot", "remedies", "file", "circuit")
SHEETS = ("transfer", "margins", "budget")
MOVING = [
    Binding("up,down", "", "", tooltip="Another finding; where a page has the focus, scroll it"),
    Binding("tab", "", "", tooltip="From the list to the page and back"),
]
REVIEW_KEYS = [
    Binding("question_mark", "help", "Keys", tooltip="List all keys"),
    Binding("g", "regroup", "Group", tooltip="Group by severity, part or rule"),
    Binding("slash", "search", "Search", tooltip="Keep the findings that hold the words typed; Enter: to the list"),
    Binding("escape", "leave_search", "All", show=False, tooltip="Show all findings again"),
    Binding("a", "apply", "Apply", tooltip="Write the chosen remedy to the file, where it is proven"),
    Binding("u", "undo", "Undo", tooltip="Take back the last remedy written"),
    Binding("n", "numbers", "Numbers", tooltip="Transfer error, margins, error budget"),
    Binding("e", "edit", "Edit", tooltip="Open the file at the line in $VISUAL or $EDITOR"),
    Binding("q", "app.quit", "Quit", tooltip="Leave"),
    *(Binding(str(n), f"page('{name}')", name.capitalize(), show=False, tooltip=f"Page of the {name}")
      for n, name in enumerate(PAGES, 1)),
    Binding("f", "widen", "Full width", show=False, tooltip="The page over the full width, and back"),
    Binding("v", "next_piece", "Evidence", show=False, tooltip="Plot the next piece of evidence"),
    Binding("x", "next_abscissa", "Abscissa", show=False, tooltip="Plot over the next quantity that varies"),
    Binding("r", "next_remedy", "Remedy", show=False, tooltip="Choose the next remedy"),
    Binding("U", "redo", "Redo", show=False, tooltip="Write the remedy again that was taken back"),
    Binding("y", "copy_id", "Copy id", show=False, tooltip="Copy the id of the finding to the clipboard"),
    Binding("f5", "review", "Review", show=False, tooltip="Review the file again"),
    Binding("c", "cancel", "Cancel", show=False, tooltip="Give up the review that is running"),
    Binding("d", "design(1)", "Design", show=False, tooltip="The next design"),
    Binding("D", "design(-1)", "Design", show=False, tooltip="The design before"),
    Binding("t", "theme", "Theme", show=False, tooltip="Dark or light"),
]  # fmt: skip
NUMBERS_KEYS = [
    Binding("escape,n,q", "dismiss", "Back", tooltip="Back to the review"),
    *(Binding(str(number), f"sheet('{name}')", name.capitalize(), tooltip=f"Sheet of the {name}")
      for number, name in enumerate(SHEETS, 1)),
    Binding("o", "next_item", "Other", tooltip="The next requirement or amplifier"),
    Binding("m", "next_ambient", "Ambient", tooltip="The next ambient temperature"),
    Binding("x", "next_input", "Input", tooltip="Over the next input"),
]  # fmt: skip
DIALOG_KEYS = [Binding("escape,enter,q", "dismiss", "Close", tooltip="Close")]
