"""Physical quantities: parsed from text with their unit, checked by dimension, kept in SI.

`Unit` is the annotation that makes a pydantic field read quantities; `Spread` holds the least, nominal and
greatest value.
"""

from __future__ import annotations

import difflib
import math
import reprlib
import types
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, TypeVar, Union, get_args, get_origin

from rulecheck.dimensions import NUMBER, Dimension, dimension_of, read_unit
from rulecheck.errors import QuantityError
from rulecheck.quantities import (
    LETTER_CODES,
    ZERO_CELSIUS,
    expected,
    format_quantity,
    kind_of,
    parse_any_quantity,
    parse_quantity,
)

if TYPE_CHECKING:
    from pydantic import GetCoreSchemaHandler, GetJsonSchemaHandler
    from pydantic_core import CoreSchema

__all__ = [
    "NUMBER",
    "ZERO_CELSIUS",
    "Dimension",
    "Spread",
    "Unit",
    "dimension_of",
    "format_quantity",
    "parse_any_quantity",
    "parse_quantity",
]

_ENDS = ("min", "typ", "max")
_T = TypeVar("_T")


@dataclass(frozen=True, slots=True)
class Spread:
    """Least, nominal and greatest value of a quantity, in SI."""

    min: float
    typ: float
    max: float

    @classmethod
    def exactly(cls, value: float) -> Spread:
        """Spread of a value known without error."""
        return cls(value, value, value)

    @classmethod
    def about_zero(cls, limit: float) -> Spread:
        """Spread of ± `limit` with nominal 0."""
        return cls(-limit, 0.0, limit)

    @property
    def half(self) -> float:
        """The larger one-sided distance from the nominal."""
        if self.min == self.max:  # also where all three are infinite
            return 0.0
        return max(self.typ - self.min, self.max - self.typ)


class Unit:
    """Annotation of a field that holds a quantity: ``Annotated[Spread, Unit("V")]``, also of a float.

    Parameters
    ----------
    symbol : str
        Unit expected; any prefix and any unit of the same dimension is taken.
    plus_minus : bool
        The quantity is a limit about zero: a single one gives a spread of ± that.
    letter_code : str
        ``"R"`` or ``"F"``: IEC 60062 codes of resistors or capacitors are taken too.
    allow_number : bool
        Numbers without unit are taken as SI, as those of unit ``1`` always are.
    """

    def __init__(
        self, symbol: str, *, plus_minus: bool = False, letter_code: str = "", allow_number: bool = False
    ) -> None:
        read_unit(symbol)
        if letter_code and letter_code not in LETTER_CODES:
            raise ValueError(f"no letter code {letter_code!r}; there are {', '.join(LETTER_CODES)}")
        self.symbol = symbol
        self.plus_minus = plus_minus
        self.letter_code = letter_code
        self.allow_number = allow_number

    def __repr__(self) -> str:
        return f"Unit({self.symbol!r})"

    @property
    def takes_number(self) -> bool:
        """Whether a number without unit is taken."""
        return self.allow_number or self.symbol == "1"

    def read(self, value: object) -> float:
        """SI value of a quantity string, or of a number where numbers are taken; QuantityError otherwise."""
        if isinstance(value, str) and not (self.allow_number and math.isfinite(_float(value))):
            return parse_quantity(value, self.symbol, self.letter_code)
        wanted = expected(self.symbol, self.letter_code)
        shown = reprlib.repr(value)
        if isinstance(value, bool) or not isinstance(value, int | float | str):
            raise QuantityError(f"{shown} is no quantity, {wanted}")
        number = _float(value)
        if not math.isfinite(number):
            raise QuantityError(f"{shown} is not finite, {wanted}")
        if not self.takes_number:
            hint = "write number and unit in quotes"
            raise QuantityError(f"{shown} is a number without a unit, {wanted}", hint)
        if self.symbol == "degC" and number < 0.0:
            raise QuantityError(f"{shown} K is below absolute zero, {wanted}")
        return number

    def read_spread(self, value: object) -> Spread:
        """Spread of a quantity, or of a table of `min`, `typ`, `max`.

        Raises
        ------
        QuantityError
            In a single quantity, or in the table as a whole.
        pydantic_core.ValidationError
            Errors in ends of a table, each with its key.
        """
        if isinstance(value, Spread):
            return value
        if not isinstance(value, Mapping):
            exact = self.read(value)
            return self._limits({"max": exact}) if self.plus_minus else Spread.exactly(exact)
        if not value:
            raise QuantityError(f"the table is empty, {expected(self.symbol)}", "give min, typ or max")
        ends = self._read_ends(value)
        return self._limits(ends) if self.plus_minus else _nominal(ends, self.symbol)

    def _read_ends(self, table: Mapping[Any, Any]) -> dict[str, float]:
        ends: dict[str, float] = {}
        faults: list[tuple[str, object, str]] = []
        for key, value in table.items():
            try:
                if key not in _ENDS:
                    near = difflib.get_close_matches(str(key), _ENDS, n=1)
                    hint = f"did you mean {near[0]!r}?" if near else ""
                    raise QuantityError(f"{key!r} is no key of a spread; these are min, typ, max", hint)
                ends[key] = self.read(value)
            except QuantityError as error:
                faults.append((str(key), value, str(error)))
        if faults:
            raise _errors_by_key(faults)
        return ends

    def _limits(self, ends: Mapping[str, float]) -> Spread:
        """Limits about zero; a typical value beside a limit says nothing about the limit."""
        high = ends.get("max", ends.get("typ"))
        low = ends.get("min")
        if high is None:
            high = -low if low is not None else 0.0
        if low is None:
            low = -high
        if not low <= 0.0 <= high:
            shown = f"{format_quantity(low, self.symbol)} to {format_quantity(high, self.symbol)}"
            hint = "it is a limit about zero: give its magnitude, without a sign"
            raise QuantityError(f"{shown} does not hold zero", hint)
        return Spread(low, 0.0, high)

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:  # noqa: ANN401
        from pydantic_core import core_schema

        kinds = [kind for kind in _alternatives(source) if kind is not type(None)]
        if kinds not in ([Spread], [float]):
            raise TypeError(f"{self} annotates a Spread or a float, not {source}")
        is_spread = kinds == [Spread]
        validate = _reporting(self.read_spread if is_spread else self.read)
        schema = core_schema.no_info_plain_validator_function(validate, metadata={"spread": is_spread})
        if len(_alternatives(source)) > 1:
            return core_schema.nullable_schema(schema, metadata=schema["metadata"])
        return schema

    def __get_pydantic_json_schema__(self, schema: CoreSchema, handler: GetJsonSchemaHandler) -> dict[str, Any]:
        taken = [self._quantity_schema()]
        if schema.get("metadata", {}).get("spread"):
            ends = dict.fromkeys(_ENDS, self._quantity_schema())
            taken += [{"type": "object", "properties": ends, "additionalProperties": False, "minProperties": 1}]
        if schema["type"] == "nullable":
            taken += [{"type": "null"}]
        return taken[0] if len(taken) == 1 else {"anyOf": taken}

    def _quantity_schema(self) -> dict[str, Any]:
        name, example = kind_of(self.symbol)
        pattern = "[0-9]" if self.letter_code else r"^\s*[-+−]?\.?[0-9]"
        text = {"type": "string", "description": name, "examples": [example], "pattern": pattern}
        return {"anyOf": [text, {"type": "number"}]} if self.takes_number else text


def _nominal(ends: Mapping[str, float], symbol: str) -> Spread:
    if "typ" in ends:
        typ = ends["typ"]
    else:
        given = list(ends.values())
        typ = sum(given) / len(given)
    spread = Spread(ends.get("min", typ), typ, ends.get("max", typ))
    if not spread.min <= spread.typ <= spread.max:
        shown = ", ".join(f"{end} {format_quantity(ends[end], symbol)}" for end in _ENDS if end in ends)
        raise QuantityError(f"{shown} are out of order", "min is at most typ, and typ at most max")
    return spread


def _float(value: str | float) -> float:
    """Float of a number or of its text; nan where it is none or too large for one."""
    try:
        return float(value)
    except (ValueError, OverflowError):
        return math.nan


def _alternatives(source: object) -> tuple[Any, ...]:
    return get_args(source) if get_origin(source) in (Union, types.UnionType) else (source,)


def _reporting(read: Callable[[object], _T]) -> Callable[[object], _T]:
    """Reader whose errors pydantic shows word for word."""
    from pydantic_core import PydanticCustomError

    def validate(value: object) -> _T:
        try:
            return read(value)
        except QuantityError as error:
            # The text goes in as a value: braces in it are the user's, not a template's.
            raise PydanticCustomError("quantity", "{message}", {"message": str(error)}) from None

    return validate


def _errors_by_key(faults: list[tuple[str, object, str]]) -> ValueError:
    from pydantic_core import InitErrorDetails, PydanticCustomError, ValidationError

    details = [
        InitErrorDetails(
            type=PydanticCustomError("quantity", "{message}", {"message": message}), loc=(key,), input=value
        )
        for key, value, message in faults
    ]
    return ValidationError.from_exception_data("Spread", details)
