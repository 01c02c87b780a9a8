"""The text UI: designs reviewed on the screen, their evidence drawn, their remedies applied.

The only package that imports textual.
"""

from __future__ import annotations

import datetime as dt
from collections.abc import Sequence
from pathlib import Path

__all__ = ["browse"]


def browse(paths: Sequence[Path], on: dt.date) -> None:
    """Show the designs at `paths` until the user leaves.

    Parameters
    ----------
    paths : sequence of Path
        Design files, at least one.
    on : date
        Day of the review, for the expiry of concessions.
    """
    from rulecheck.review.registry import installed_registry
    from rulecheck.tui.app import Browser

    Browser(paths, installed_registry(), on).run()
