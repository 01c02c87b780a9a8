"""Where output goes: results to stdout or a file, narration and progress to stderr."""

from __future__ import annotations

import io
import os
import shutil
import sys
import tempfile
from collections.abc import Callable
from pathlib import Path
from types import TracebackType

from rulecheck.errors import CommandError

PLAIN_WIDTH = 80
#: For signs that the encoding lacks, and for file names that are no text.
_UNWRITABLE = "backslashreplace"
_BAR = 20


def prepare_streams() -> None:
    """Make stdout give the same bytes as a file, UTF-8, where it is no terminal; let no sign stop the output."""
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, io.TextIOWrapper):
            stream.reconfigure(errors=_UNWRITABLE)
    if isinstance(sys.stdout, io.TextIOWrapper) and not sys.stdout.isatty():
        sys.stdout.reconfigure(encoding="utf-8", errors=_UNWRITABLE, newline="\n")


def narrate(text: str) -> None:
    """Write a line to stderr, after all that went to stdout.

    Parameters
    ----------
    text : str
    """
    sys.stdout.flush()
    sys.stderr.write(text + "\n")
    sys.stderr.flush()


def width_and_color(to_file: bool = False) -> tuple[int, bool]:
    """Width of the terminal and whether to use colour: not in a pipe, a file, or where NO_COLOR is set.

    Parameters
    ----------
    to_file : bool
        The result goes to a file.
    """
    if to_file or not sys.stdout.isatty():
        return PLAIN_WIDTH, False
    color = not os.environ.get("NO_COLOR") and os.environ.get("TERM") != "dumb"
    return shutil.get_terminal_size((PLAIN_WIDTH, 24)).columns, color


def emit(text: str, file: Path | None = None) -> None:
    """Write a result to stdout, or to a file: all of it or nothing.

    Parameters
    ----------
    text : str
    file : Path, optional

    Raises
    ------
    CommandError
        The file cannot be written.
    """
    if file is None:
        sys.stdout.write(text)
        sys.stdout.flush()
        return
    try:
        _write(file, text.encode(errors=_UNWRITABLE))
    except OSError as error:
        raise CommandError(f"{file} cannot be written: {error.strerror or error}") from error


def _write(file: Path, content: bytes) -> None:
    target = file.resolve()
    if target.exists() and not target.is_file():  # a device or a pipe is written to, not replaced
        target.write_bytes(content)
        return
    with tempfile.TemporaryDirectory(dir=target.parent, prefix=".rulecheck-") as folder:
        fresh = Path(folder) / target.name
        fresh.write_bytes(content)
        if target.exists():
            fresh.chmod(target.stat().st_mode & 0o7777)
        fresh.replace(target)


class ProgressBar:
    """Progress on stderr where that is a terminal; nothing elsewhere.

    Parameters
    ----------
    subject : str
        What is worked on.
    """

    def __init__(self, subject: str) -> None:
        self._subject = subject
        self._shown = sys.stderr.isatty()

    def __enter__(self) -> Callable[[int, int, str], None]:
        return self._update

    def __exit__(
        self, kind: type[BaseException] | None, error: BaseException | None, trace: TracebackType | None
    ) -> None:
        if self._shown:
            sys.stderr.write("\r\x1b[K")
            sys.stderr.flush()

    def _update(self, done: int, total: int, what: str) -> None:
        if self._shown:
            full = _BAR * done // max(total, 1)
            line = f"{self._subject}  {'■' * full}{'·' * (_BAR - full)} {done + 1} of {total}  {what}"
            width = shutil.get_terminal_size((PLAIN_WIDTH, 24)).columns
            sys.stderr.write(f"\r\x1b[K{line[: width - 1]}")
            sys.stderr.flush()
