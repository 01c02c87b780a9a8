"""The application: the designs on the screen, its themes, and what it shows first."""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from pathlib import Path
from typing import TYPE_CHECKING

from textual.app import App

from rulecheck.tui.document import Document
from rulecheck.tui.review_screen import ReviewScreen
from rulecheck.tui.themes import DARK, LIGHT, THEMES

if TYPE_CHECKING:
    from rulecheck.review.registry import Registry


class Browser(App[None]):
    """Designs reviewed on the screen.

    Parameters
    ----------
    paths : sequence of Path
        Design files, at least one.
    registry : Registry
    on : date
        Day of the review.
    watch : float
        Seconds between looks at the files on disk.
    """

    TITLE = "rulecheck"
    ENABLE_COMMAND_PALETTE = False

    def __init__(self, paths: Sequence[Path], registry: Registry, on: dt.date, watch: float = 1.0) -> None:
        super().__init__()
        self.documents = [Document(path, registry, on) for path in paths]
        self.watch_every = watch
        for theme in THEMES:
            self.register_theme(theme)
        self.theme = DARK.name

    def on_mount(self) -> None:
        """Show the review."""
        self.push_screen(ReviewScreen(self.documents, self.watch_every))

    def turn_theme(self) -> None:
        """From dark to light and back."""
        self.theme = LIGHT.name if self.theme == DARK.name else DARK.name
