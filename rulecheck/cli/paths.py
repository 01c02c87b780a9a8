"""The design files that a command's paths stand for."""

from __future__ import annotations

import os
from collections.abc import Iterable, Iterator
from pathlib import Path
from typing import Any

from rulecheck.cli.streams import narrate
from rulecheck.design.source import LARGEST_FILE
from rulecheck.errors import CommandError

DESIGN, CATALOGUE = "is a design", "is a catalogue of models"


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
            files.setdefault(_real(file), file)
    return list(files.values())


def changed_designs(paths: Iterable[Path]) -> list[Path]:
    """Files to review after a change of some: the designs among them, and those below here whose catalogue is.

    Parameters
    ----------
    paths : iterable of Path
        Files; one that is neither is passed over with a line on stderr.
    """
    designs: dict[Path, Path] = {}
    catalogues: set[Path] = set()
    for path in paths:
        kind = _kind(path)
        if kind == DESIGN:
            designs.setdefault(_real(path), path)
        elif kind == CATALOGUE:
            catalogues.add(_real(path))
        else:
            _pass_over(path, kind)
    if catalogues:
        for file in _toml_files(Path()):
            if catalogues & _catalogues_of(file):
                designs.setdefault(_real(file), file)
    return list(designs.values())


def _catalogues_of(file: Path) -> set[Path]:
    """The catalogues that a design names, wherever they are; none of a file that is no readable design."""
    data = _data(file) or {}
    names = data.get("catalogues") if "design" in data else None
    try:
        return {_real(file.parent / name) for name in names or () if isinstance(name, str)}
    except (OSError, RuntimeError, ValueError, TypeError):  # a name that no file can have, or no list of them
        return set()


def _in_folder(folder: Path) -> Iterator[Path]:
    for file in _toml_files(folder):
        kind = _kind(file)
        if kind == DESIGN:
            yield file
        else:
            _pass_over(file, kind)


def _toml_files(folder: Path) -> Iterator[Path]:
    for here, folders, names in os.walk(folder, onerror=_refuse):
        folders[:] = sorted(name for name in folders if not name.startswith("."))
        files = (Path(here) / name for name in sorted(names) if name.endswith(".toml"))
        yield from (file for file in files if not _is_special(file))


def _pass_over(file: Path, kind: str) -> None:
    narrate(f"{file}: passed over, it {kind}")


def _real(path: Path) -> Path:
    """A path without links; of one that leads to itself the path as it is, which the loader then refuses."""
    return Path(os.path.realpath(path))


def _is_special(file: Path) -> bool:
    """Whether a name stands for a pipe or a device, which would be waited for."""
    try:
        return file.exists() and not file.is_file()
    except OSError:  # a link that leads to itself: the loader says so
        return False


def _refuse(error: OSError) -> None:
    raise CommandError(f"{error.filename} cannot be read: {error.strerror}") from error


def _kind(file: Path) -> str:
    """What a file is; one that cannot be read is taken for a design, and the loader says why."""
    data = _data(file)
    if data is None or "design" in data:
        return DESIGN
    if "models" in data:
        return CATALOGUE
    return DESIGN if "format" in data else "has neither format nor [design]"


def _data(file: Path) -> dict[str, Any] | None:
    """The tables of a file, or None where they cannot be read."""
    import tomli

    try:
        if file.stat().st_size > LARGEST_FILE:
            return None
        return tomli.loads(file.read_text(encoding="utf-8-sig"))
    except (OSError, ValueError, RecursionError):
        return None
