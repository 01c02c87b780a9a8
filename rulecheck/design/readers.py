"""Fields that are no plain quantity: ranges, lists of names, constants, pins."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler
from pydantic_core import CoreSchema, InitErrorDetails, ValidationError, core_schema

from rulecheck.design.fields import did_you_mean, fault, shown
from rulecheck.design.frozen import FrozenDict
from rulecheck.errors import QuantityError
from rulecheck.units import Unit, parse_any_quantity


def faults_by_key(faults: list[tuple[str | int, object, str]]) -> ValidationError:
    """Errors of several keys or elements of one field."""
    details = [InitErrorDetails(type=fault(message), loc=(loc,), input=value) for loc, value, message in faults]
    return ValidationError.from_exception_data("", details)


class _Field:
    """A field that is read by a method of its own."""

    def read(self, value: object) -> Any:  # noqa: ANN401
        """Read what stands in the file; raises what pydantic takes as an error of the field."""
        raise NotImplementedError

    def schema(self) -> dict[str, Any]:
        """JSON Schema of what is read."""
        raise NotImplementedError

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:  # noqa: ANN401
        return core_schema.no_info_plain_validator_function(self.read)

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        return self.schema()


class Range(_Field):
    """Annotation of a pair ``[low, high]`` of quantities in one unit."""

    def __init__(self, symbol: str) -> None:
        self.unit = Unit(symbol)

    def read(self, value: object) -> tuple[float, float]:
        """The pair in SI."""
        if not isinstance(value, list | tuple) or len(value) != 2:
            found = f"a list of {len(value)}" if isinstance(value, list | tuple) else shown(value)
            raise fault(f"{found} is no range; a list of two quantities, [low, high], is expected")
        ends: list[float] = []
        faults: list[tuple[str | int, object, str]] = []
        for index, end in enumerate(value):
            try:
                ends.append(self.unit.read(end))
            except QuantityError as error:
                faults.append((index, end, str(error)))
        if faults:
            raise faults_by_key(faults)
        low, high = ends
        if low > high:
            raise fault(f"the low end {value[0]} is above the high end {value[1]}; a range is [low, high]")
        return low, high

    def schema(self) -> dict[str, Any]:
        """JSON Schema of the pair."""
        return {"type": "array", "items": self.unit._quantity_schema(), "minItems": 2, "maxItems": 2}


class Names(_Field):
    """Annotation of a list of names, `count` of them where that is given."""

    def __init__(self, count: int = 0) -> None:
        self.count = count

    def read(self, value: object) -> tuple[str, ...]:
        """The names in their order."""
        wanted = f"a list of {self.count} names" if self.count else "a list of names"
        if not isinstance(value, list | tuple):
            raise fault(f"{shown(value)} is given; {wanted} is expected")
        if self.count and len(value) != self.count:
            raise fault(f"a list of {len(value)} is given; {wanted} is expected")
        faults: list[tuple[str | int, object, str]] = [
            (index, name, f"{shown(name)} is no name; a text in quotes is expected")
            for index, name in enumerate(value) if not isinstance(name, str)
        ]  # fmt: skip
        if faults:
            raise faults_by_key(faults)
        return tuple(value)

    def schema(self) -> dict[str, Any]:
        """JSON Schema of the list."""
        count = {"minItems": self.count, "maxItems": self.count} if self.count else {}
        return {"type": "array", "items": {"type": "string"}, "uniqueItems": True, **count}


class AnyQuantity(_Field):
    """Annotation of a quantity of any dimension: a number, or a string with a unit."""

    def read(self, value: object) -> Any:  # noqa: ANN401
        """SI value and dimension."""
        text = str(value) if isinstance(value, int | float) and not isinstance(value, bool) else value
        if not isinstance(text, str):
            raise fault(f'{shown(value)} is no quantity; a number or a quantity is expected, for instance "10 V"')
        try:
            return parse_any_quantity(text)
        except QuantityError as error:
            raise fault(str(error)) from None

    def schema(self) -> dict[str, Any]:
        """JSON Schema of the quantity."""
        return {"type": ["string", "number"], "examples": ["10 V", 0.5]}


class Pins(_Field):
    """Annotation of the pins of a part: a table of pin to net, a list of two nets, or either.

    Parameters
    ----------
    names : str
        Pins of the table in the order of the kind; none: no table, or any pin where `free`.
    listed : bool
        Two nets may be given as a list.
    free : bool
        Pins may have any name, and be any number.
    """

    def __init__(self, *names: str, listed: bool = False, free: bool = False) -> None:
        self.names = names
        self.listed = listed
        self.free = free

    @property
    def allowed(self) -> str:
        """Words for what is taken."""
        table = f"a table of the pins {', '.join(self.names)}" if self.names else ""
        both = [*([table] if table else []), *(["a list of two nets"] if self.listed else [])]
        return "a table of any pins, or a list of nets," if self.free else " or ".join(both)

    def read(self, value: object) -> Mapping[str, str]:
        """Net by pin; the pins of a list are ``"0"``, ``"1"``."""
        if isinstance(value, list) and (self.listed or self.free):
            if not self.free and len(value) != 2:
                raise fault(f"{len(value)} nets are given; this part has two pins, a list of two nets is expected")
            return self._read_nets({str(index): net for index, net in enumerate(value)})
        if isinstance(value, dict) and (self.names or self.free):
            return self._read_nets(value)
        raise fault(f"{shown(value)} is given; {self.allowed} is expected")

    def _read_nets(self, nets: Mapping[str, Any]) -> Mapping[str, str]:
        indices = [str(index) for index in range(len(nets))] if self.listed else []
        faults: list[tuple[str | int, object, str]] = []
        for pin, net in nets.items():
            if self.names and pin not in self.names and list(nets) != indices:
                hint = did_you_mean(pin, self.names)
                pins = f"pins are {', '.join(self.names)}"
                faults.append((pin, net, f"there is no pin {pin!r}; {hint} {pins}" if hint else
                               f"there is no pin {pin!r}; {pins}"))  # fmt: skip
            elif not isinstance(net, str):
                faults.append((pin, net, f"{shown(net)} is no net; the name of a net is expected, in quotes"))
        if faults:
            raise faults_by_key(faults)
        order = [pin for pin in self.names if pin in nets] or list(nets)
        return FrozenDict({pin: nets[pin] for pin in order})

    def schema(self) -> dict[str, Any]:
        """JSON Schema of the pins."""
        net = {"type": "string", "description": "name of a net"}
        table: dict[str, Any] = {"type": "object", "additionalProperties": net}
        if self.names:
            table = {"type": "object", "properties": dict.fromkeys(self.names, net), "additionalProperties": False}
        nets: dict[str, Any] = {"type": "array", "items": net}
        if not self.free:
            nets |= {"minItems": 2, "maxItems": 2}
        taken = [*([table] if self.names or self.free else []), *([nets] if self.listed or self.free else [])]
        return taken[0] if len(taken) == 1 else {"anyOf": taken}
