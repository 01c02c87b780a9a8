"""The nodes of a law's tree: each knows its value over conditions and its dimension."""

from __future__ import annotations

import abc
from collections.abc import Callable, Mapping
from dataclasses import dataclass
from fractions import Fraction
from typing import Any

import numpy as np
from numpy.typing import NDArray

from rulecheck.errors import LawError
from rulecheck.units import NUMBER, Dimension

#: Functions of a law.
FUNCTIONS: dict[str, Callable[[Any], Any]] = {
    "sqrt": np.sqrt,
    "log": np.log,
    "log10": np.log10,
    "exp": np.exp,
    "abs": np.abs,
}

LARGEST_POWER = 100.0  # no circuit comes near; a larger one is a slip

Values = Mapping[str, NDArray[np.float64] | float]


@dataclass(frozen=True, slots=True)
class Context:
    """What the dimension of a law rests on: its text, for messages, dimensions and known values by name."""

    text: str
    dimensions: Mapping[str, Dimension]
    constants: Mapping[str, float]


def fault(text: str, position: int, message: str, hint: str = "") -> LawError:
    """Error at a position within the text of a law."""
    return LawError(f"in the law {text!r} at character {position + 1}: {message}", hint)


def in_unit(dimension: Dimension) -> str:
    """Words for the dimension of something: ``in V``, ``a plain number``."""
    return "a plain number" if dimension.is_number else f"in {dimension}"


def missing_scale(found: Dimension, wanted: Dimension, what: str = "it") -> str:
    """Words for the scale that brings `what` from one dimension to another."""
    ratio = found / wanted
    if next(exponent for exponent in ratio.exponents if exponent) > 0:
        return f"divide {what} by a scale in {ratio}"
    return f"multiply {what} by a scale in {wanted / found}"


@dataclass(frozen=True, slots=True)
class Node(abc.ABC):
    """A part of a law; `span` is its place in the text."""

    span: tuple[int, int]

    @abc.abstractmethod
    def evaluate(self, values: Values) -> NDArray[np.float64]:
        """Value over conditions."""

    @abc.abstractmethod
    def dimension(self, context: Context) -> Dimension | None:
        """Dimension; None for a bare zero, which fits any."""

    def fault(self, context: Context, message: str, hint: str = "") -> LawError:
        """Error about this part."""
        return fault(context.text, self.span[0], message, hint)

    def shown(self, context: Context) -> str:
        """Its text in quotes."""
        return repr(context.text[slice(*self.span)])


@dataclass(frozen=True, slots=True)
class Number(Node):
    """A plain number."""

    value: float

    def evaluate(self, values: Values) -> NDArray[np.float64]:  # noqa: D102
        return np.asarray(self.value)

    def dimension(self, context: Context) -> Dimension | None:  # noqa: D102
        return NUMBER if self.value else None


@dataclass(frozen=True, slots=True)
class Name(Node):
    """An input, a reference, a constant."""

    name: str

    def evaluate(self, values: Values) -> NDArray[np.float64]:  # noqa: D102
        return np.asarray(values[self.name], dtype=float)

    def dimension(self, context: Context) -> Dimension | None:  # noqa: D102
        return context.dimensions[self.name]


@dataclass(frozen=True, slots=True)
class Negative(Node):
    """A part with its sign turned."""

    operand: Node

    def evaluate(self, values: Values) -> NDArray[np.float64]:  # noqa: D102
        return -self.operand.evaluate(values)

    def dimension(self, context: Context) -> Dimension | None:  # noqa: D102
        return self.operand.dimension(context)


@dataclass(frozen=True, slots=True)
class Sum(Node):
    """Terms with their signs, +1 or -1."""

    terms: tuple[tuple[float, Node], ...]

    def evaluate(self, values: Values) -> NDArray[np.float64]:  # noqa: D102
        total = np.asarray(0.0)
        for sign, term in self.terms:
            total = total + sign * term.evaluate(values)
        return total

    def dimension(self, context: Context) -> Dimension | None:  # noqa: D102
        common: Dimension | None = None
        shown = ""
        for _, term in self.terms:
            found = term.dimension(context)
            if common is None:
                common, shown = found, term.shown(context)
            elif found is not None and found != common:
                message = f"{term.shown(context)} is {in_unit(found)}, {shown} is {in_unit(common)}"
                hint = missing_scale(found, common, term.shown(context))
                raise term.fault(context, f"{message}: they cannot be added", hint)
        return common


@dataclass(frozen=True, slots=True)
class Product(Node):
    """Factors with the operator before each, ``*`` or ``/``."""

    factors: tuple[tuple[str, Node], ...]

    def evaluate(self, values: Values) -> NDArray[np.float64]:  # noqa: D102
        total = np.asarray(1.0)
        for operator, factor in self.factors:
            value = factor.evaluate(values)
            total = total * value if operator == "*" else np.divide(total, value)
        return total

    def dimension(self, context: Context) -> Dimension | None:  # noqa: D102
        total = NUMBER
        for operator, factor in self.factors:
            found = factor.dimension(context) or NUMBER
            total = total * found if operator == "*" else total / found
        return total


@dataclass(frozen=True, slots=True)
class Power(Node):
    """A base and its exponent."""

    base: Node
    exponent: Node

    def evaluate(self, values: Values) -> NDArray[np.float64]:  # noqa: D102
        return np.asarray(np.power(self.base.evaluate(values), self.exponent.evaluate(values)))

    def dimension(self, context: Context) -> Dimension | None:  # noqa: D102
        raised_to = self.exponent.dimension(context) or NUMBER
        if not raised_to.is_number:
            message = f"the exponent {self.exponent.shown(context)} is {in_unit(raised_to)}"
            raise self.exponent.fault(context, message, missing_scale(raised_to, NUMBER))
        base = self.base.dimension(context) or NUMBER
        power = self._known_exponent(context)
        if power is not None and not abs(power) <= LARGEST_POWER:
            message = f"the exponent {self.exponent.shown(context)} is {power:g}"
            raise self.exponent.fault(context, message, f"at most {LARGEST_POWER:g} are taken")
        if base.is_number:
            return NUMBER
        if power is None:
            message = f"{self.base.shown(context)} is {in_unit(base)}, and its exponent is not a constant"
            raise self.fault(context, message, missing_scale(base, NUMBER, self.base.shown(context)))
        return base**power

    def _known_exponent(self, context: Context) -> float | None:
        try:
            with np.errstate(all="ignore"):
                return float(self.exponent.evaluate(context.constants))
        except KeyError:  # a name in it has no fixed value
            return None


@dataclass(frozen=True, slots=True)
class Call(Node):
    """A function of one argument."""

    function: str
    argument: Node

    def evaluate(self, values: Values) -> NDArray[np.float64]:  # noqa: D102
        return np.asarray(FUNCTIONS[self.function](self.argument.evaluate(values)))

    def dimension(self, context: Context) -> Dimension | None:  # noqa: D102
        found = self.argument.dimension(context)
        if self.function == "abs" or found is None:
            return found if self.function in ("abs", "sqrt") else NUMBER
        if self.function == "sqrt":
            return found ** Fraction(1, 2)
        if not found.is_number:
            shown = self.argument.shown(context)
            message = f"{shown} is {in_unit(found)}, {self.function} takes a plain number"
            raise self.argument.fault(context, message, missing_scale(found, NUMBER, shown))
        return NUMBER
