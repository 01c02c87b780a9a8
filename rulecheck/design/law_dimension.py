"""The dimension of a law, part by part, and the scale that is missing where parts do not agree."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from fractions import Fraction

from rulecheck.design.law_tree import (
    Call,
    Name,
    Negative,
    Node,
    Number,
    Power,
    Product,
    Sum,
    evaluate,
    fault,
)
from rulecheck.errors import LawError
from rulecheck.units import NUMBER, Dimension

LARGEST_POWER = 100.0  # no circuit comes near; a larger one is a slip


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
class DimensionCheck:
    """Finds dimensions of the parts of one law.

    Attributes
    ----------
    text : str
        Of the law, for messages.
    dimensions : mapping of str to Dimension
        For every name.
    constants : mapping of str to float
        Names whose values are known.
    """

    text: str
    dimensions: Mapping[str, Dimension]
    constants: Mapping[str, float]

    def of(self, node: Node) -> Dimension | None:
        """Dimension of a part; None for a bare zero, which fits any.

        Raises
        ------
        LawError
            Parts do not agree.
        """
        match node:
            case Number(value=value):
                return NUMBER if value else None
            case Name(name=name):
                return self.dimensions[name]
            case Negative(operand=operand):
                return self.of(operand)
            case Sum():
                return self._of_sum(node)
            case Product(factors=factors):
                total = NUMBER
                for operator, factor in factors:
                    found = self.of(factor) or NUMBER
                    total = total * found if operator == "*" else total / found
                return total
            case Power():
                return self._of_power(node)
            case Call():
                return self._of_call(node)

    def _of_sum(self, node: Sum) -> Dimension | None:
        common: Dimension | None = None
        first = ""
        for _, term in node.terms:
            found, shown = self.of(term), self._shown(term)
            if common is None:
                common, first = found, shown
            elif found is not None and found != common:
                message = f"{shown} is {in_unit(found)}, {first} is {in_unit(common)}: they cannot be added"
                raise self._fault(term, message, missing_scale(found, common, shown))
        return common

    def _of_power(self, node: Power) -> Dimension:
        base = self.of(node.base) or NUMBER
        exponent = self.of(node.exponent) or NUMBER
        shown = self._shown(node.exponent)
        if not exponent.is_number:
            message = f"the exponent {shown} is {in_unit(exponent)}"
            raise self._fault(node.exponent, message, missing_scale(exponent, NUMBER, shown))
        power = self._known(node.exponent)
        if power is not None and not abs(power) <= LARGEST_POWER:
            message = f"the exponent {shown} is {power:g}"
            raise self._fault(node.exponent, message, f"its magnitude is at most {LARGEST_POWER:g}")
        if base.is_number:
            return NUMBER
        if power is None:  # such as a potentiometer: then the dimension would turn with it
            shown = self._shown(node.base)
            message = f"{shown} is {in_unit(base)}, and its exponent is not a constant"
            raise self._fault(node, message, missing_scale(base, NUMBER, shown))
        return base**power

    def _of_call(self, node: Call) -> Dimension | None:
        found = self.of(node.argument)
        if node.function == "abs":
            return found
        if node.function == "sqrt":
            return None if found is None else found ** Fraction(1, 2)
        if found is not None and not found.is_number:
            shown = self._shown(node.argument)
            message = f"{shown} is {in_unit(found)}, {node.function} takes a plain number"
            raise self._fault(node.argument, message, missing_scale(found, NUMBER, shown))
        return NUMBER

    def _known(self, node: Node) -> float | None:
        """Value of a part made of numbers and constants alone."""
        try:
            return float(evaluate(node, self.constants))
        except KeyError:
            return None

    def _shown(self, node: Node) -> str:
        return repr(self.text[slice(*node.span)])

    def _fault(self, node: Node, message: str, hint: str) -> LawError:
        return fault(self.text, node.span[0], message, hint)
