"""Catalogues: files of models, the shipped one and those that a design names."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from functools import cache
from pathlib import Path
from typing import Any

from rulecheck.design.fields import shown
from rulecheck.design.frozen import FrozenDict
from rulecheck.design.model import Model
from rulecheck.design.names import entries
from rulecheck.design.parameters import MODEL_TABLES, NOT_PARAMETERS, ModelTable
from rulecheck.design.read import by_name, check_format, chosen
from rulecheck.design.source import Problems, Source, parse, read_file
from rulecheck.design.wording import unknown_key
from rulecheck.errors import DesignError, Problem

SHIPPED = Path(__file__).with_name("generic_parts.toml")


@dataclass
class Catalogue:
    """Models by name.

    Attributes
    ----------
    models : dict of str to Model
        Of one with errors, the keys that have them are None.
    is_complete : bool
        Whether every catalogue could be read.
    problems : list of Problem
    """

    models: dict[str, Model] = field(default_factory=dict)
    is_complete: bool = True
    problems: list[Problem] = field(default_factory=list)


@cache
def shipped_models() -> Mapping[str, Model]:
    """Models of the catalogue that ships, of generic parts with invented names."""
    catalogue = Catalogue()
    _add_models(catalogue, parse(read_file(SHIPPED), SHIPPED.name))
    if catalogue.problems:
        raise DesignError(catalogue.problems)
    return FrozenDict(catalogue.models)


def read_catalogues(design: Source, folder: Path) -> Catalogue:
    """Models of the shipped catalogue and of those that a design names.

    A catalogue may define a shipped name anew; two catalogues of one design may not have the same name.

    Parameters
    ----------
    design : Source
    folder : Path
        Where the design stands; catalogues stand there or below.
    """
    shipped = shipped_models()
    catalogue = Catalogue(dict(shipped))
    problems = Problems(design)
    own: set[str] = set()
    for index, name in _names(design.data, problems):
        source = _open(name, index, folder, problems, catalogue)
        if source is None:
            catalogue.is_complete = False
            continue
        for model in entries(source.data, "models"):
            if model in own:
                problems.add(["catalogues", index], f"{name!r} has a model {model!r}, as a catalogue before it has")
            own.add(model)
        _add_models(catalogue, source)
    catalogue.problems += problems.found
    return catalogue


def _names(data: Mapping[str, Any], problems: Problems) -> list[tuple[int, str]]:
    names = data.get("catalogues", [])
    if not isinstance(names, list):
        problems.add(["catalogues"], f"{shown(names)} is given; a list of file names is expected")
        return []
    for index, name in enumerate(names):
        if not isinstance(name, str):
            problems.add(["catalogues", index], f"{shown(name)} is given; a file name in quotes is expected")
        elif name in names[:index]:
            problems.add(["catalogues", index], f"{name!r} stands twice in the list")
    return [(i, name) for i, name in enumerate(names) if isinstance(name, str) and name not in names[:i]]


def _open(name: str, index: int, folder: Path, problems: Problems, catalogue: Catalogue) -> Source | None:
    """Read a catalogue; a file that is not there is an error at the key that names it."""
    path = folder / name
    try:
        inside = path.resolve().is_relative_to(folder.resolve())
        exists = inside and path.is_file()
    except (OSError, RuntimeError, ValueError):  # a loop of links, a name that no file can have
        inside, exists = True, False
    if not inside:
        hint = "a catalogue stands in the folder of the design or below it, and no link may lead out"
        problems.add(["catalogues", index], f"{name!r} leads out of the design's folder", hint)
        return None
    if not exists:
        problems.add(["catalogues", index], f"there is no file {name!r} beside the design or below")
        return None
    try:
        return parse(read_file(path), str(path))
    except DesignError as error:
        catalogue.problems += error.problems
        return None


def _add_models(catalogue: Catalogue, source: Source) -> None:
    problems = Problems(source)
    check_format(source.data, problems, needed=False)
    for key in source.data:
        if key not in ("format", "models"):
            problems.add([key], *unknown_key(key, ["format", "models"], "a catalogue"), of_key=True)
    tables = by_name(source.data, "models", _model_table, problems)
    catalogue.is_complete &= set(tables) == set(entries(source.data, "models"))
    for name, table in tables.items():
        given = table.given - NOT_PARAMETERS
        catalogue.models[name] = Model(name, table.kind, table.note, table, given, source.file)
    catalogue.problems += problems.found


def _model_table(entry: Mapping[str, Any], path: tuple[str | int, ...], problems: Problems) -> type[ModelTable] | None:
    return chosen(entry, "kind", MODEL_TABLES, path, problems)
