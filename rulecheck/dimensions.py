"""Unit symbols and the dimensions behind them, as exponents over volt, ampere, second, kelvin and degree.

Every unit here is a power of ten of its SI unit, so that scaling a decimal text never rounds.
"""

from __future__ import annotations

import difflib
import functools
import re
from dataclasses import dataclass
from fractions import Fraction

from rulecheck.errors import QuantityError

BASES = ("V", "A", "s", "K", "deg")

#: SI prefixes as powers of ten (SI brochure, 9th edition, with those of 2022).
PREFIXES = {
    "q": -30, "r": -27, "y": -24, "z": -21, "a": -18, "f": -15, "p": -12, "n": -9, "u": -6, "m": -3,
    "k": 3, "M": 6, "G": 9, "T": 12, "P": 15, "E": 18, "Z": 21, "Y": 24, "R": 27, "Q": 30,
}  # fmt: skip

_SPELLINGS = str.maketrans(
    {"Ω": "ohm", "\u2126": "ohm", "µ": "u", "μ": "u", "℃": "degC", "\u2212": "-", "·": "*", "√": "sqrt"}
    | dict.fromkeys("\u00a0\u2009\u202f", " ")
)

# An exponent is kept as a fraction, so that a cube root cubed is the quantity itself; a millionth
# part is finer than any exponent a circuit can realise.
_FINEST = 10**6


@dataclass(frozen=True, slots=True)
class Dimension:
    """Exponents over `BASES`; multiplies, divides and takes powers as its quantities do."""

    exponents: tuple[Fraction, ...] = (Fraction(0),) * len(BASES)

    @classmethod
    def of(cls, **exponents: float) -> Dimension:
        """Dimension from exponents by base, for instance ``Dimension.of(V=1, A=-1)``."""
        return cls(tuple(Fraction(exponents.get(base, 0)) for base in BASES))

    @property
    def is_number(self) -> bool:
        """Whether this is the dimension of a plain number."""
        return not any(self.exponents)

    def __mul__(self, other: Dimension) -> Dimension:
        return Dimension(tuple(a + b for a, b in zip(self.exponents, other.exponents, strict=True)))

    def __truediv__(self, other: Dimension) -> Dimension:
        return Dimension(tuple(a - b for a, b in zip(self.exponents, other.exponents, strict=True)))

    def __pow__(self, power: float | Fraction) -> Dimension:
        factor = Fraction(power).limit_denominator(_FINEST)
        return Dimension(tuple((a * factor).limit_denominator(_FINEST) for a in self.exponents))

    def __str__(self) -> str:
        named = next((symbol for symbol in KINDS if dimension_of(symbol) == self), None)
        if named is not None:
            return named
        pairs = list(zip(BASES, self.exponents, strict=True))
        above = "*".join(_power(base, n) for base, n in pairs if n > 0)
        return (above or "1") + "".join("/" + _power(base, -n) for base, n in pairs if n < 0)


def _power(base: str, exponent: Fraction) -> str:
    if exponent == 1:
        return base
    return f"{base}^{exponent}" if exponent.denominator == 1 else f"{base}^({exponent})"


NUMBER = Dimension()


@dataclass(frozen=True, slots=True)
class Scale:
    """What a unit symbol means: its dimension and its power of ten over the SI unit."""

    dimension: Dimension
    exponent: int = 0


PREFIXED = {
    "V": Dimension.of(V=1),
    "A": Dimension.of(A=1),
    "ohm": Dimension.of(V=1, A=-1),
    "S": Dimension.of(V=-1, A=1),
    "F": Dimension.of(V=-1, A=1, s=1),
    "Hz": Dimension.of(s=-1),
    "s": Dimension.of(s=1),
    "W": Dimension.of(V=1, A=1),
    "K": Dimension.of(K=1),
}
_UNPREFIXED = {
    "": Scale(NUMBER),
    "1": Scale(NUMBER),
    "%": Scale(NUMBER, -2),
    "ppm": Scale(NUMBER, -6),
    "deg": Scale(Dimension.of(deg=1)),
    "degC": Scale(Dimension.of(K=1)),
}

#: Units by the name of their kind and an example, SI units first where several share a dimension.
KINDS = {
    "1": ("a plain number", "320"),
    "%": ("a ratio", "0.1 %"),
    "ppm": ("a ratio", "50 ppm"),
    "dB": ("a ratio in decibels", "100 dB"),
    "V": ("a voltage", "0.5 mV"),
    "A": ("a current", "10 uA"),
    "ohm": ("a resistance", "4.7 kohm"),
    "S": ("a conductance", "2 mS"),
    "F": ("a capacitance", "4.7 nF"),
    "Hz": ("a frequency", "1 kHz"),
    "s": ("a time", "0.6 ns"),
    "W": ("a power", "0.25 W"),
    "K": ("a temperature difference", "10 K"),
    "degC": ("a temperature", "-40 degC"),
    "1/K": ("a temperature coefficient", "25 ppm/K"),
    "ppm/K": ("a temperature coefficient", "25 ppm/K"),
    "K/W": ("a thermal resistance", "150 K/W"),
    "V/K": ("a voltage drift", "2 uV/K"),
    "V/s": ("a slew rate", "13 V/us"),
    "V/us": ("a slew rate", "13 V/us"),
    "V/sqrt(Hz)": ("a voltage noise density", "2 nV/sqrt(Hz)"),
    "A/sqrt(Hz)": ("a current noise density", "1 pA/sqrt(Hz)"),
    "deg": ("an angle", "55 deg"),
}

_FACTOR = re.compile(r"([*/]?)(?:sqrt\((?P<root>[A-Za-z]+)\)|(?P<unit>[A-Za-z%]+|1)(?:\^(?P<power>[1-9]))?)")


def respell(text: str) -> str:
    """Text with the other accepted spellings (``Ω``, ``°C``, ``µ``, ``√Hz``) brought to one."""
    plain = text.translate(_SPELLINGS).replace("°C", "degC").replace("°", "deg")
    return plain.replace("sqrtHz", "sqrt(Hz)").strip()


@functools.lru_cache(maxsize=256)
def read_unit(symbol: str) -> Scale:
    """Meaning of a unit symbol such as ``kohm``, ``ppm/K`` or ``nV/sqrt(Hz)``.

    ``dB`` and ``degC`` give the ratio and the kelvin; their logarithm and offset are the reader's business.

    Raises
    ------
    QuantityError
        No such unit; the message has the nearest right symbol.
    """
    if symbol == "dB":
        return Scale(NUMBER)
    total, end = Scale(NUMBER), 0
    while end < len(symbol):
        match = _FACTOR.match(symbol, end)
        if match is None or bool(match[1]) != (end > 0):
            raise _unknown(symbol)
        total = _combine(total, match[1], _factor(match, symbol))
        end = match.end()
    return total


def dimension_of(unit: str) -> Dimension:
    """Dimension of a unit symbol."""
    return read_unit(unit).dimension


def _factor(match: re.Match[str], symbol: str) -> Scale:
    if match["root"]:
        scale = _simple(match["root"])
        if scale is None or scale.exponent:  # the root of a prefix need not be a power of ten
            raise _unknown(symbol)
        return Scale(scale.dimension ** Fraction(1, 2))
    scale = _simple(match["unit"])
    if scale is None:
        raise _unknown(symbol)
    power = int(match["power"] or 1)
    return Scale(scale.dimension**power, scale.exponent * power)


def _simple(symbol: str) -> Scale | None:
    if symbol in _UNPREFIXED:
        return _UNPREFIXED[symbol]
    if symbol in PREFIXED:
        return Scale(PREFIXED[symbol])
    if symbol[:1] in PREFIXES and symbol[1:] in PREFIXED:
        return Scale(PREFIXED[symbol[1:]], PREFIXES[symbol[0]])
    return None


def _combine(total: Scale, operator: str, factor: Scale) -> Scale:
    if operator == "/":
        return Scale(total.dimension / factor.dimension, total.exponent - factor.exponent)
    return Scale(total.dimension * factor.dimension, total.exponent + factor.exponent)


def _unknown(symbol: str) -> QuantityError:
    known = [prefix + unit for unit in PREFIXED for prefix in ("", *PREFIXES)] + [*KINDS, "nV/sqrt(Hz)"]
    # A wrong case is the likeliest slip, and it may have two cures ("MOHM").
    near = [word for word in known if word.lower() == symbol.lower()] or difflib.get_close_matches(
        symbol, known, n=1, cutoff=0.6
    )
    hint = f"did you mean {' or '.join(map(repr, near))}? SI prefixes are case-sensitive" if near else ""
    return QuantityError(f"there is no unit {symbol!r}", hint or "units are " + ", ".join(KINDS))
