"""Reading the text of a law into its tree, against a closed list of signs and functions.

The parser is its own: a net may be called ``in`` or ``is``, which a programming language keeps for itself.
"""

from __future__ import annotations

import difflib
import math
import re
from collections.abc import Callable

from rulecheck.design.law_tree import (
    FUNCTIONS,
    Call,
    Name,
    Negative,
    Node,
    Number,
    Power,
    Product,
    Sum,
    fault,
)
from rulecheck.errors import LawError

LONGEST = 1000  # characters
DEEPEST = 32  # parentheses, functions, signs and powers within one another

_TOKEN = re.compile(
    r"\s*(?:(?P<number>(?:[0-9]+\.?[0-9]*|\.[0-9]+)(?:[eE][+-]?[0-9]+)?)"
    r"|(?P<name>[^\W\d]\w*)|(?P<operator>\*\*|[-+*/()]))"
)
_MEANT = {
    "^": "a power is written **",
    "×": "a product is written *",
    "·": "a product is written *",
    ",": "the decimal sign is a full stop, and functions take one argument",
}


def read_tree(text: str) -> tuple[Node, dict[str, int]]:
    """Tree of a law, and its names with the place where each first occurs.

    Raises
    ------
    LawError
        With the place within the law.
    """
    if len(text) > LONGEST:
        raise LawError(f"a law of {len(text)} characters is too long", f"at most {LONGEST} are read")
    if not text.strip():
        raise LawError("the law is empty", 'write for instance "full_scale * (VIN / full_scale) ** 0.5"')
    parser = _Parser(text)
    return parser.whole(), parser.names


class _Parser:
    """Recursive descent over the tokens of one law.

    Precedence is that of school and of most languages: ``**`` binds closest and to the right, so that
    ``-a ** 2`` is ``-(a ** 2)``; sums and products are read from the left.
    """

    def __init__(self, text: str) -> None:
        self.text = text
        self.names: dict[str, int] = {}
        self.depth = 0
        self.position, self.kind, self.token = 0, "", ""  # of the token at hand
        self._advance(0)

    def whole(self) -> Node:
        """Tree of the whole text."""
        tree = self._sum()
        if self.kind != "end":
            raise self._unexpected("an operator")
        return tree

    def _advance(self, end: int) -> None:
        match = _TOKEN.match(self.text, end)
        if match is not None:
            self.kind = match.lastgroup or ""
            self.position, self.token = match.start(self.kind), match[self.kind]
            return
        rest = self.text[end:].lstrip()
        self.position, self.kind, self.token = len(self.text) - len(rest), "end", ""
        if rest:
            allowed = "a law has numbers, names, parentheses, + - * / ** and " + ", ".join(FUNCTIONS)
            raise self._fault(f"{rest[0]!r} has no meaning", _MEANT.get(rest[0], allowed))

    def _fault(self, message: str, hint: str = "") -> LawError:
        return fault(self.text, self.position, message, hint)

    def _unexpected(self, wanted: str) -> LawError:
        found = repr(self.token) if self.token else "the end of the law"
        return self._fault(f"{wanted} is expected, not {found}")

    def _take(self) -> tuple[str, int]:
        """Token at hand with its position; the next one comes to hand."""
        token, position = self.token, self.position
        self._advance(position + len(token))
        return token, position

    def _span(self, start: int) -> tuple[int, int]:
        """Place of what has been read from `start` on."""
        return start, len(self.text[: self.position].rstrip())

    def _sum(self) -> Node:
        start = self.position
        terms = [("+", self._product())]
        while self.token in ("+", "-"):
            operator, _ = self._take()
            terms.append((operator, self._product()))
        return terms[0][1] if len(terms) == 1 else Sum(self._span(start), tuple(terms))

    def _product(self) -> Node:
        start = self.position
        factors = [("*", self._signed())]
        while self.token in ("*", "/"):
            operator, _ = self._take()
            factors.append((operator, self._signed()))
        return factors[0][1] if len(factors) == 1 else Product(self._span(start), tuple(factors))

    def _signed(self) -> Node:
        if self.token not in ("+", "-"):
            return self._power()
        sign, start = self._take()
        operand = self._nested(self._signed)
        return operand if sign == "+" else Negative(self._span(start), operand)

    def _power(self) -> Node:
        start = self.position
        base = self._atom()
        if self.token != "**":
            return base
        self._take()
        exponent = self._nested(self._signed)
        return Power(self._span(start), base, exponent)

    def _atom(self) -> Node:
        start = self.position
        if self.token == "(":
            return self._parenthesis()
        if self.kind == "number":
            return self._number()
        if self.kind != "name":
            raise self._unexpected("a number, a name or a parenthesis")
        name, _ = self._take()
        if self.token != "(":
            if name in FUNCTIONS and self.kind in ("name", "number"):
                raise self._fault(f"{name} takes its argument in parentheses", f"write {name}(...)")
            self.names.setdefault(name, start)
            return Name(self._span(start), name)
        if name not in FUNCTIONS:
            raise fault(self.text, start, f"there is no function {name!r}", _function_hint(name))
        argument = self._parenthesis()
        return Call(self._span(start), name, argument)

    def _number(self) -> Node:
        digits, start = self._take()
        if self.kind == "name" and self.position == start + len(digits):
            hint = 'a product is written with *; a quantity is named under constants: scale = "10 V"'
            raise self._fault(f"{self.token!r} follows a number", hint)
        if not math.isfinite(float(digits)):
            raise fault(self.text, start, f"{digits} is too large")
        return Number(self._span(start), float(digits))

    def _parenthesis(self) -> Node:
        self._take()
        inner = self._nested(self._sum)
        if self.token != ")":
            raise self._unexpected("an operator or a closing parenthesis")
        self._take()
        return inner

    def _nested(self, read: Callable[[], Node]) -> Node:
        """Read one level further in."""
        self.depth += 1
        if self.depth > DEEPEST:
            raise self._fault(f"it is nested deeper than {DEEPEST} levels", "name a part of it as a constant")
        inner = read()
        self.depth -= 1
        return inner


def _function_hint(name: str) -> str:
    if name == "ln":
        return "log is the natural logarithm, log10 the decimal one"
    near = difflib.get_close_matches(name, FUNCTIONS, n=1)
    return f"did you mean {near[0]!r}?" if near else "functions are " + ", ".join(FUNCTIONS)
