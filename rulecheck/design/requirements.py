"""Requirements: their laws parsed, their ranges and points in the units of what they name."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, TypeVar

from pydantic_core import PydanticCustomError, ValidationError

from rulecheck.design.check import unknown
from rulecheck.design.frozen import FrozenDict
from rulecheck.design.law import Law
from rulecheck.design.model import Bandwidth, Noise, Requirement
from rulecheck.design.names import Names
from rulecheck.design.readers import Range
from rulecheck.design.source import Problems
from rulecheck.design.tables import Accuracy, BandwidthTable, RequirementTable
from rulecheck.errors import LawError, QuantityError
from rulecheck.units import Unit

V = TypeVar("V")
Path = tuple[str, ...]


def read_requirement(name: str, table: RequirementTable, names: Names, problems: Problems) -> Requirement:
    """A requirement from its table; what is wrong with it is added to `problems`."""
    path = ("requirements", name)
    output = table.sound("output")
    if output is not None and output not in names.nets:
        problems.add([*path, "output"], *unknown(output, names.nets, "net"))
    _check_asks(table, path, problems)
    accuracy, constants = table.accuracy or Accuracy(), table.constants or {}
    return Requirement(
        name=name,
        output=table.output,
        law=_law(table, names, path, problems),
        constants=FrozenDict({key: value for key, (value, _) in constants.items()}),
        constant_dimensions=FrozenDict({key: dimension for key, (_, dimension) in constants.items()}),
        reading=accuracy.reading,
        absolute=accuracy.absolute,
        has_accuracy=table.accuracy is not None,
        range=FrozenDict(_ranges(table, names, path, problems)),
        bandwidth=_bandwidth(table.bandwidth, names, (*path, "bandwidth"), problems),
        phase_margin=table.phase_margin,
        noise=Noise(table.noise.max, table.noise.bandwidth) if table.noise else None,
    )


def _check_asks(table: RequirementTable, path: Path, problems: Problems) -> None:
    if not table.given & {"law", "bandwidth", "phase_margin", "noise"}:
        problems.add(path, "it asks for nothing; a requirement has a law, bandwidth, phase_margin or noise")
    if "law" not in table.given:
        for key in ("constants", "accuracy", "range"):
            if key in table.given:
                problems.add([*path, key], f"{key!r} belongs to a law, and there is none", of_key=True)


def _law(table: RequirementTable, names: Names, path: Path, problems: Problems) -> Law | None:
    constants = names.constants[path[-1]]
    for constant in constants:
        if constant in names.in_laws:
            message = f"{constant!r} is the name of an input, a reference, a potentiometer or the ambient temperature"
            problems.add([*path, "constants", constant], message, "the constant needs another name", of_key=True)
    if table.law is None:
        return None
    try:
        return Law.parse(table.law, [*names.in_laws, *constants])
    except LawError as error:
        problems.add([*path, "law"], str(error))
        return None


def _ranges(table: RequirementTable, names: Names, path: Path, problems: Problems) -> dict[str, tuple[float, float]]:
    ranges: dict[str, tuple[float, float]] = {}
    for name, value in (table.range or {}).items():
        here = (*path, "range", name)
        if name not in names.inputs:
            problems.add(here, *unknown(name, names.inputs, "input"), of_key=True)
            continue
        try:
            ranges[name] = Range(names.inputs[name]).read(value)
        except PydanticCustomError as error:
            problems.add(here, str(error))
        except ValidationError as error:
            for item in error.errors():
                problems.add([*here, *item["loc"]], str(item["ctx"]["message"]))
    return ranges


def _bandwidth(table: BandwidthTable | None, names: Names, path: Path, problems: Problems) -> Bandwidth | None:
    if table is None:
        return None
    at = _point(table.at or {}, names, (*path, "at"), problems)
    inputs = list(names.inputs)
    name = table.input or (inputs[0] if len(inputs) == 1 else None)
    if name is None:
        message = f"'input' is missing; there are {len(inputs)} inputs, and it says which one"
        problems.add([*path, "input"], message, f"inputs are {', '.join(inputs)}" if inputs else "")
        return None
    if name not in inputs:
        problems.add([*path, "input"], *unknown(name, inputs, "input"))
    return Bandwidth(table.min, name, FrozenDict(at))


def _point(point: Mapping[str, Any], names: Names, path: Path, problems: Problems) -> dict[str, float]:
    """Values of a point in SI."""
    units = {
        **dict.fromkeys([*names.with_role("supply"), *names.with_role("reference")], "V"),
        **names.inputs,
        **dict.fromkeys(names.potentiometers, "1"),
        "ambient": "degC",
    }
    values: dict[str, float] = {}
    for name, value in point.items():
        if name not in units:
            problems.add([*path, name], *unknown(name, units, "input, supply or potentiometer"), of_key=True)
            continue
        try:
            values[name] = Unit(units[name]).read(value)
        except QuantityError as error:
            problems.add([*path, name], str(error))
    return values
