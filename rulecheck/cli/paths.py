"""The design files that a command's paths stand for."""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator
from pathlib import Path

from rulecheck.cli.streams import narrate
from rulecheck.design.source import LARGEST_FILE
from rulecheck.errors import CommandError


def design_files(paths: Iterable[Path]) -> list[Path]:
    """Files to review, each once: those named, and in folders those that are meant as designs.

    Parameters
    ----------
    paths : iterable of Path
        A folder is searched to all depths, hidden folders excepted.

    Raises
    ------
    CommandError
        A folder holds no design, or cannot be read.
    """
    files: dict[Path, Path] = {}
    for path in paths:
        found = list(_in_folder(path)) if path.is_dir() else [path]
        if not found:
            raise CommandError(f"there is no design file in {path}", "a design is a .toml with format and [design]")
        for file in found:
            files.setdefault(file.resolve(), file)
    return list(files.values())


def _in_folder(folder: Path) -> Iterator[Path]:
    for here, folders, names in os.walk(folder, onerror=_refuse):
        folders[:] = sorted(name for name in folders if not name.startswith("."))
        for name in sorted(names):
            if name.endswith(".toml"):
                file = Path(here) / name
                reason = _why_not(file)
                if reason:
                    narrate(f"{file}: passed over, {reason}")
                else:
                    yield file


def _refuse(error: OSError) -> None:
    raise CommandError(f"{error.filename} cannot be read: {error.strerror}") from error


def _why_not(file: Path) -> str:
    """Why a file is not meant as a design, if so; one that cannot be read is left to the loader, which says why."""
    import tomli

    try:
        if file.stat().st_size > LARGEST_FILE:
            return ""
        data = tomli.loads(file.read_text(encoding="utf-8-sig"))
    except (OSError, ValueError, RecursionError):
        return ""
    if "design" in data:
        return ""
    if "models" in data:
        return "it is a catalogue of models"
    return "" if "format" in data else "it has neither format nor [design]"
