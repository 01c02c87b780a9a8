"""What the tables of a file are declared with: their base class, and fields that are no plain quantity."""

from __future__ import annotations

import datetime as dt
import difflib
import reprlib
from collections.abc import Callable, Iterable, Mapping
from typing import Annotated, Any, ClassVar

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    GetCoreSchemaHandler,
    GetJsonSchemaHandler,
    StrictBool,
    StrictStr,
    WithJsonSchema,
)
from pydantic_core import CoreSchema, InitErrorDetails, PydanticCustomError, ValidationError, core_schema

from rulecheck.design.frozen import FrozenDict
from rulecheck.errors import QuantityError
from rulecheck.units import Spread, Unit, parse_any_quantity

__all__ = [
    "FAULT",
    "FRACTION",
    "NON_NEGATIVE",
    "OUT_OF_BOUNDS",
    "POSITIVE",
    "TOLERANCE",
    "AnyQuantity",
    "Date",
    "Flag",
    "Names",
    "Pins",
    "Range",
    "Table",
    "Text",
    "did_you_mean",
    "fault",
    "key",
    "required",
    "shown",
]

# Types of errors whose text is ours already; that of the second does not say what was found.
FAULT = "fault"
OUT_OF_BOUNDS = "out_of_bounds"

LIKENESS = 0.5  # of two words that may be meant for one another; names of parts differ in one sign of two

Flag = StrictBool
Text = StrictStr


class Table(BaseModel):
    """A table of a file: no key but those declared, nothing changed once read."""

    model_config = ConfigDict(frozen=True, extra="forbid", defer_build=True)

    called: ClassVar[str] = "this table"
    """What messages call such a table."""

    @property
    def given(self) -> frozenset[str]:
        """Attributes that the file states."""
        return frozenset(self.model_fields_set)

    def sound(self, name: str) -> Any:  # noqa: ANN401
        """The value of an attribute, None where the file states it with an error or must and does not."""
        return getattr(self, name)


def key(description: str, default: Any = None, **options: Any) -> Any:  # noqa: ANN401
    """Declare a key that may be left out; the description goes into the JSON Schema and into messages."""
    return Field(default, description=description, **options)


def required(description: str, **options: Any) -> Any:  # noqa: ANN401
    """Declare a key that must be given."""
    return Field(description=description, **options)


def fault(message: str) -> PydanticCustomError:
    """Error of a field, shown word for word."""
    # The text goes in as a value: braces in it are the user's, not a template's.
    return PydanticCustomError(FAULT, "{message}", {"message": message})


def shown(value: object) -> str:
    """A value as found in a file, shortened."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a table"
    return "a list" if isinstance(value, list | tuple) else reprlib.repr(value)


def did_you_mean(word: object, allowed: Iterable[str]) -> str:
    """Question for the nearest right word, empty where none is near."""
    words = list(allowed)
    near = [w for w in words if w.lower() == str(word).lower()]
    near = near or difflib.get_close_matches(str(word), words, n=1, cutoff=LIKENESS)
    return f"did you mean {near[0]!r}?" if near else ""


class _Bound:
    """Annotation of a quantity, after its unit: what all of its spread must satisfy."""

    def __init__(self, fits: Callable[[float, float], bool], allowed: str) -> None:
        self.fits = fits
        self.allowed = allowed

    def check(self, value: Any) -> Any:  # noqa: ANN401
        """The value, where it fits."""
        ends = (value.min, value.max) if isinstance(value, Spread) else (value, value)
        if value is not None and not self.fits(*ends):
            raise PydanticCustomError(OUT_OF_BOUNDS, "{message}", {"message": self.allowed})
        return value

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:  # noqa: ANN401
        inner = handler(source)
        # The unit describes itself by what stands outermost, and must find there what it left within.
        metadata = {"spread": inner.get("metadata", {}).get("spread", False)}
        return core_schema.no_info_after_validator_function(self.check, inner, metadata=metadata)


POSITIVE = _Bound(lambda low, _: low > 0.0, "it must be greater than zero")
NON_NEGATIVE = _Bound(lambda low, _: low >= 0.0, "it must not be negative")
FRACTION = _Bound(lambda low, high: low >= 0.0 and high <= 1.0, "it lies from 0 to 1")
TOLERANCE = _Bound(lambda low, high: low >= 0.0 and high < 1.0, "a tolerance lies from 0 to below 100 %")


def _read_date(value: object) -> dt.date:
    if isinstance(value, dt.date) and not isinstance(value, dt.datetime):
        return value
    raise fault(f"{shown(value)} is no date; a date is expected without quotes, for instance 2027-06-30")


Date = Annotated[
    dt.date, BeforeValidator(_read_date), WithJsonSchema({"type": "string", "format": "date"}, mode="validation")
]


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
