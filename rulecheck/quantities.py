"""Reading quantities from text and writing them: ``"4.7 kohm"`` <-> 4700.0."""

from __future__ import annotations

import math
import re
from decimal import Decimal

from rulecheck.dimensions import KINDS, PREFIXED, PREFIXES, Dimension, Scale, dimension_of, read_unit, respell
from rulecheck.errors import QuantityError

ZERO_CELSIUS = 273.15  # K, exact by definition of the Celsius temperature

#: IEC 60062: the letter stands for the decimal point and for the multiplier.
LETTER_CODES = {
    "R": {"R": 0, "K": 3, "M": 6, "G": 9, "T": 12},
    "F": {"p": -12, "n": -9, "u": -6, "m": -3, "F": 0},
}
_CODED = {"R": ("ohm", ' or "4K7"'), "F": ("F", ' or "4n7"')}
_LETTER_CODE = re.compile(r"([0-9]*)([A-DF-Za-df-z])([0-9]*)")

_NUMBER = re.compile(r"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+))(?:[eE]([+-]?[0-9]+))?\s*")
_NOT_FINITE = re.compile(r"[+-]?(nan|inf|infinity)\b.*", re.IGNORECASE)
_LONGEST = 64
# Powers of ten and decibels beyond which no float holds the value.
_LARGEST_EXPONENT = 400
_LARGEST_DECIBELS = 6000.0


def parse_quantity(text: str, unit: str, letter_code: str = "") -> float:
    """SI value of a quantity that must have the dimension of `unit`.

    Parameters
    ----------
    text : str
        Number and unit, for instance ``"0.5 mV"``; the space may be left out.
    unit : str
        Symbol of the unit expected. ``degC`` takes an absolute temperature and gives kelvin, ``dB`` gives
        the voltage ratio, ``1`` takes a number without unit too.
    letter_code : str
        ``"R"`` or ``"F"``: takes IEC 60062 codes of resistors or capacitors as well.

    Raises
    ------
    QuantityError
        Says what was found, what is expected and how to mend it.
    """
    wanted = expected(unit, letter_code)
    plain = _respelt(text, wanted)
    if letter_code:
        coded = _letter_value(plain, letter_code)
        if coded is not None:
            return coded
    mantissa, exponent, symbol = _split(plain, wanted)
    scale = _scale(plain, symbol, unit, wanted)
    if symbol == "" and unit != "1":
        raise QuantityError(f"{plain!r} is a number without a unit, {wanted}")
    _check_dimension(plain, symbol, scale, unit, wanted)
    value = _si(mantissa, exponent, symbol, scale)
    if unit == "degC" and value < 0.0:
        raise QuantityError(f"{plain!r} is below absolute zero, {wanted}")
    return value


def parse_any_quantity(text: str) -> tuple[float, Dimension]:
    """SI value and dimension of a quantity whose unit is free, such as a constant of a law."""
    wanted = 'a number or a quantity is expected, for instance "10 V"'
    plain = _respelt(text, wanted)
    mantissa, exponent, symbol = _split(plain, wanted)
    scale = _scale(plain, symbol, "", wanted)
    return _si(mantissa, exponent, symbol, scale), scale.dimension


def kind_of(unit: str) -> tuple[str, str]:
    """Words for the kind of quantity that has `unit`, and an example of one."""
    name, example = KINDS.get(unit, ("a quantity", f"1 {unit}"))
    return (name if unit == "1" else f"{name} in {unit}"), example


def expected(unit: str, letter_code: str = "") -> str:
    """Words for what a key of `unit` takes, with an example."""
    name, example = kind_of(unit)
    code = _CODED[letter_code][1] if letter_code else ""
    return f'{name} is expected, for instance "{example}"{code}'


def _respelt(text: str, wanted: str) -> str:
    if len(text) > _LONGEST:
        raise QuantityError(f"{text[:_LONGEST]!r}... is too long for a quantity, {wanted}")
    plain = respell(text)
    if _NOT_FINITE.fullmatch(plain):
        raise QuantityError(f"{plain!r} is not finite, {wanted}")
    return plain


def _letter_value(plain: str, letter_code: str) -> float | None:
    """Value of an IEC 60062 code; None where the text is no such code."""
    match = _LETTER_CODE.fullmatch(plain)
    if match is None or not (match[1] or match[3]):
        return None
    whole, letter, part = match.groups()
    letters = LETTER_CODES[letter_code]
    if letter in letters:
        return float(f"{whole or 0}.{part or 0}e{letters[letter]}")
    if not part:  # a unit or a prefix; with digits behind it, it can be nothing but a code
        return None
    right = next((known for known in letters if known.lower() == letter.lower()), None)
    hint = f'write "{whole}{right}{part}"' if right else "the letters are " + ", ".join(letters)
    wanted = expected(_CODED[letter_code][0], letter_code)
    raise QuantityError(f"{plain!r} is no letter code of IEC 60062, {wanted}", hint)


def _split(plain: str, wanted: str) -> tuple[str, int, str]:
    """Mantissa, exponent and unit symbol of a text."""
    match = _NUMBER.match(plain)
    if match is None:
        raise QuantityError(f"{plain!r} does not begin with a number, {wanted}")
    symbol = plain[match.end() :]
    if symbol.startswith(","):
        raise QuantityError(f"{plain!r} has a comma, {wanted}", "the decimal sign is a full stop")
    return match[1], int(match[2] or 0), symbol


def _scale(plain: str, symbol: str, unit: str, wanted: str) -> Scale:
    try:
        return read_unit(symbol)
    except QuantityError as error:
        if symbol not in PREFIXES:
            raise QuantityError(f"{plain!r}: {error.message}, {wanted}", error.hint) from None
        hint = f'write "{plain.removesuffix(symbol).rstrip()} {symbol}{unit}"' if unit in PREFIXED else ""
        raise QuantityError(f"{plain!r} has a prefix without a unit, {wanted}", hint) from None


def _check_dimension(plain: str, symbol: str, scale: Scale, unit: str, wanted: str) -> None:
    hint = ""
    if symbol == "degC" and unit == "K":  # a temperature is no difference
        hint = f'write "{plain.removesuffix(symbol).rstrip()} K"'
    elif symbol == "dB" and unit not in ("1", "dB"):  # nor is a tolerance given in decibels
        pass
    elif scale.dimension == dimension_of(unit):
        return
    elif symbol == "K" and unit == "ohm":
        hint = "K is the kelvin; kilo is k with a unit, or K in a letter code"
    found = KINDS[symbol][0] if symbol in KINDS else _kind(scale.dimension)
    raise QuantityError(f"{plain!r} is {found}, {wanted}", hint)


def _kind(dimension: Dimension) -> str:
    names = (name for unit, (name, _) in KINDS.items() if dimension_of(unit) == dimension)
    return next(names, "another quantity")


def _si(mantissa: str, exponent: int, symbol: str, scale: Scale) -> float:
    value = math.inf
    if exponent <= _LARGEST_EXPONENT:
        # Joined as text, so that 25 fA is the float nearest to 25e-15 and not one beside it.
        value = float(f"{mantissa}e{exponent + scale.exponent}")
    if symbol == "dB":
        value = 10.0 ** (value / 20.0) if abs(value) <= _LARGEST_DECIBELS else math.inf
    if not math.isfinite(value):
        raise QuantityError(f"{mantissa}e{exponent} {symbol} is too large to be a quantity")
    if symbol == "degC":
        value = float(Decimal(str(value)) + Decimal(str(ZERO_CELSIUS)))
    return value


# Units shown with an engineering prefix before them; the others are shown as they stand.
_WITH_PREFIX = re.compile(rf"({'|'.join(PREFIXED)})(/.*)?")
_SHOWN_PREFIXES = {PREFIXES[letter]: letter for letter in "afpnumkMGT"} | {0: ""}


def format_quantity(value: float, unit: str, digits: int = 4) -> str:
    """Text of an SI value in a unit, for people; `parse_quantity` reads it back.

    Parameters
    ----------
    value : float
        In SI: kelvin for ``degC``, a fraction for ``%``, a voltage ratio for ``dB``.
    unit : str
        Symbol of the unit to show; an engineering prefix is chosen where it takes one.
    digits : int
        Significant digits.
    """
    if math.isnan(value):
        return "no figure"
    if math.isinf(value):
        return "infinite" if value > 0 else "minus infinite"
    if unit == "dB":
        return f"{_digits(_rounded(20.0 * math.log10(value), digits))} dB" if value > 0 else "no figure"
    if unit == "degC":
        return f"{_digits(_rounded(value - ZERO_CELSIUS, digits))} degC"
    if unit == "1":
        return _digits(_rounded(value, digits))
    unit = "ppm/K" if unit == "1/K" else unit
    number = _rounded(value, digits).scaleb(-read_unit(unit).exponent)
    if unit != "V/us" and _WITH_PREFIX.fullmatch(unit):
        decade = _decade(number)
        return f"{_digits(number.scaleb(-decade))} {_SHOWN_PREFIXES[decade]}{unit}"
    return f"{_digits(number)} {unit}"


def _rounded(value: float, digits: int) -> Decimal:
    """Value to so many significant digits.

    All else follows from the rounded value, so that 999.96 mV becomes 1 V and never 1000 mV.
    """
    return Decimal(f"{value:.{digits - 1}e}")


def _decade(number: Decimal) -> int:
    decade = 3 * (number.adjusted() // 3) if number else 0
    return min(max(decade, min(_SHOWN_PREFIXES)), max(_SHOWN_PREFIXES))


def _digits(number: Decimal) -> str:
    """Digits of a number, with an exponent only below a ten-thousandth and from a million on."""
    if not number:
        return "0"
    exponent = 0 if -4 <= number.adjusted() < 6 else number.adjusted()
    digits = f"{number.scaleb(-exponent).normalize():f}"
    return f"{digits}e{exponent}" if exponent else digits
