"""The user's own editor, opened at a line."""

from __future__ import annotations

import os
import shlex
import subprocess
from pathlib import Path

DEFAULT = "vi"


def open_at(path: Path, line: int) -> int:
    """Run ``$VISUAL`` or ``$EDITOR`` on a file and wait for its end.

    Parameters
    ----------
    path : Path
    line : int
        Given as ``+LINE`` before the file, as editors of terminals take it.

    Returns
    -------
    int
        Exit status of the editor.
    """
    editor = os.environ.get("VISUAL") or os.environ.get("EDITOR") or DEFAULT
    return subprocess.run([*shlex.split(editor), f"+{line}", str(path)], check=False).returncode
