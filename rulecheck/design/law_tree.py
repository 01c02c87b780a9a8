"""The tree of a law and its value over conditions."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rulecheck.errors import LawError

#: All that a law may call, each of one argument.
FUNCTIONS: dict[str, Callable[[Any], Any]] = {
    "sqrt": np.sqrt,
    "log": np.log,
    "log10": np.log10,
    "exp": np.exp,
    "abs": np.abs,
}

Values = Mapping[str, NDArray[np.float64] | float]


@dataclass(frozen=True, slots=True)
class Number:
    """A plain number. `span` is here, as in all nodes, the place in the text."""

    span: tuple[int, int]
    value: float


@dataclass(frozen=True, slots=True)
class Name:
    """An input, a reference, a constant."""

    span: tuple[int, int]
    name: str


@dataclass(frozen=True, slots=True)
class Negative:
    """A part with its sign turned."""

    span: tuple[int, int]
    operand: Node


@dataclass(frozen=True, slots=True)
class Sum:
    """Terms, each with its operator ``+`` or ``-``."""

    span: tuple[int, int]
    terms: tuple[tuple[str, Node], ...]


@dataclass(frozen=True, slots=True)
class Product:
    """Factors, each with its operator ``*`` or ``/``."""

    span: tuple[int, int]
    factors: tuple[tuple[str, Node], ...]


@dataclass(frozen=True, slots=True)
class Power:
    """A base and its exponent."""

    span: tuple[int, int]
    base: Node
    exponent: Node


@dataclass(frozen=True, slots=True)
class Call:
    """A function and its argument."""

    span: tuple[int, int]
    function: str
    argument: Node


Node = Number | Name | Negative | Sum | Product | Power | Call


def fault(text: str, position: int, message: str, hint: str = "") -> LawError:
    """Error at a position within the text of a law."""
    return LawError(f"in the law {text!r} at character {position + 1}: {message}", hint)


def evaluate(node: Node, values: Values) -> NDArray[np.float64]:
    """Value of a part over conditions; NaN or infinite where it has none.

    Raises
    ------
    KeyError
        `values` lacks a name of it.
    """
    with np.errstate(all="ignore"):
        return np.asarray(_value(node, values), dtype=float)


def _value(node: Node, values: Values) -> Any:  # noqa: ANN401
    match node:
        case Number(value=number):
            return np.float64(number)
        case Name(name=name):
            return np.asarray(values[name], dtype=float)
        case Negative(operand=operand):
            return -_value(operand, values)
        case Sum(terms=terms):
            return sum(_value(term, values) * (1.0 if sign == "+" else -1.0) for sign, term in terms)
        case Product(factors=factors):
            total = np.float64(1.0)
            for operator, factor in factors:
                value = _value(factor, values)
                total = total * value if operator == "*" else total / value
            return total
        case Power(base=base, exponent=exponent):
            return np.power(_value(base, values), _value(exponent, values))
        case Call(function=function, argument=argument):
            return FUNCTIONS[function](_value(argument, values))
