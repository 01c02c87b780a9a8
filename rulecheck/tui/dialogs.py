"""Screens laid over the review: all keys, and what a rewriting of the file did."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence
from typing import ClassVar

from textual.app import ComposeResult
from textual.binding import Binding, BindingType
from textual.containers import VerticalScroll
from textual.content import Content
from textual.screen import ModalScreen
from textual.widgets import Static

from rulecheck.findings import Finding
from rulecheck.tui.document import Change
from rulecheck.tui.grouping import sign_of, style_of
from rulecheck.tui.keys import DIALOG_KEYS

KEYS = {
    "question_mark": "?", "slash": "/", "escape": "Esc", "up": "↑", "down": "↓", "enter": "Enter", "f5": "F5",
    "tab": "Tab", "left": "←", "right": "→", "pageup": "PgUp", "pagedown": "PgDn",
}  # fmt: skip


class Dialog(ModalScreen[None]):
    """A text in a frame over the screen.

    Parameters
    ----------
    title : str
    content : Content
    """

    CSS_PATH = "dialogs.tcss"
    BINDINGS: ClassVar[list[BindingType]] = [*DIALOG_KEYS]

    def __init__(self, title: str, content: Content) -> None:
        super().__init__()
        self._title = title
        self.content = content

    def compose(self) -> ComposeResult:
        """The frame and its text."""
        frame = VerticalScroll(Static(self.content), id="frame")
        frame.border_title = self._title
        frame.border_subtitle = "Esc closes"
        yield frame


def key_list(sections: Iterable[tuple[str, Sequence[Binding]]]) -> Content:
    """Every key with what it does, by section."""
    return Content("\n").join(_key_lines(sections))


def _key_lines(sections: Iterable[tuple[str, Sequence[Binding]]]) -> Iterator[Content]:
    for title, bindings in sections:
        yield Content.styled(title, "$strong bold")
        for binding in bindings:
            keys = " ".join(KEYS.get(key, key) for key in binding.key.split(","))
            yield Content.assemble((f"  {keys:<10}", "$minor"), binding.tooltip or binding.description)
        yield Content("")


def change_in_words(change: Change) -> Content:
    """What went and what came."""
    lines = [Content.styled(change.title, "bold"), Content("")]
    for words, findings in (("gone", change.gone), ("come", change.come)):
        lines.append(Content.styled(f"{words}: {len(findings)}", "$strong bold"))
        lines += [_line(finding) for finding in findings]
    lines += [
        Content(f"left: {change.left}"),
        Content(""),
        Content.styled("Once this is closed, u takes it back.", "$quiet"),
    ]
    return Content("\n").join(lines)


def _line(finding: Finding) -> Content:
    return Content.assemble((f"  {sign_of(finding)} ", style_of(finding)), f"{finding.rule}: {finding.message}")
