"""What the tables of a file are declared with: their base class, bounds of quantities, words for messages."""

from __future__ import annotations

import datetime as dt
import difflib
import reprlib
from collections.abc import Callable, Iterable
from typing import Annotated, Any, ClassVar

from pydantic import (
    BaseModel,
    BeforeValidator,
    ConfigDict,
    Field,
    GetCoreSchemaHandler,
    StrictBool,
    StrictStr,
    WithJsonSchema,
)
from pydantic_core import CoreSchema, PydanticCustomError, core_schema

from rulecheck.units import Spread

__all__ = [
    "FAULT",
    "FRACTION",
    "NON_NEGATIVE",
    "OUT_OF_BOUNDS",
    "POSITIVE",
    "TOLERANCE",
    "Date",
    "Flag",
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
