"""Loading a design file: all that is wrong with it at once, or a frozen design."""

from __future__ import annotations

from pathlib import Path

from rulecheck.design.build import build_design
from rulecheck.design.catalogue import read_catalogues
from rulecheck.design.check import check_tables
from rulecheck.design.model import Design
from rulecheck.design.names import find_names
from rulecheck.design.read import read_tables
from rulecheck.design.requirements import read_requirement
from rulecheck.design.source import Problems, parse, read_file
from rulecheck.errors import DesignError, Problem


def load(path: Path | str) -> Design:
    """Load the design file at `path`.

    Raises
    ------
    DesignError
        With every problem of the file and of its catalogues, in the order of their lines.
    """
    return load_text(read_file(Path(path)), path)


def load_text(text: str, path: Path | str) -> Design:
    """Load a design from its text; catalogues are looked for beside `path`, where the text need not be written.

    Raises
    ------
    DesignError
        With every problem of the text and of its catalogues, in the order of their lines.
    """
    path = Path(path)
    source = parse(text, str(path))
    problems = Problems(source)
    tables, names = read_tables(source.data, problems), find_names(source.data)
    catalogue = read_catalogues(source, path.parent)
    check_tables(tables, names, catalogue, problems)
    requirements = {name: read_requirement(name, table, names, problems) for name, table in tables.requirements.items()}
    found = problems.found + catalogue.problems
    if found:
        raise DesignError(_in_order(found, source.file))
    return build_design(source, path, tables, names, catalogue, requirements)


def _in_order(problems: list[Problem], file: str) -> list[Problem]:
    """Problems without repetition by line, those of the design before those of its catalogues."""
    unique = dict.fromkeys(problems)
    return sorted(unique, key=lambda p: (p.file != file, p.file, p.line or 0, p.column or 0))
