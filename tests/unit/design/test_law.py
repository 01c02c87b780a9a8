"""Laws: what they are worth, what dimension they have, and what is refused."""

import math

import numpy as np
import pytest
import sympy
from hypothesis import given
from hypothesis import strategies as st

from rulecheck.design.law import Law
from rulecheck.design.law_text import DEEPEST, LONGEST
from rulecheck.errors import LawError
from rulecheck.units import NUMBER, dimension_of

VOLT, AMPERE, OHM = dimension_of("V"), dimension_of("A"), dimension_of("ohm")
CONSTANTS = {"full_scale": 10.0, "n": 0.5, "third": 1 / 3, "R": 1e3}
DIMENSIONS = {
    "VIN": VOLT, "VREF": VOLT, "IIN": AMPERE, "POS": NUMBER, "ambient": dimension_of("K"),
    "full_scale": VOLT, "n": NUMBER, "third": NUMBER, "R": OHM,
}  # fmt: skip
VALUES = CONSTANTS | {
    "VIN": np.array([0.1, 2.5, 10.0]),
    "VREF": 5.0,
    "IIN": 2e-3,
    "POS": 0.3,
    "ambient": 300.0,
}

LAWS = [
    "full_scale * (VIN / full_scale) ** n",
    "VREF * log10(VIN / VREF)",
    "VREF * log(VIN / VREF) / 2 - VIN",
    "VREF * exp(-VIN / VREF)",
    "sqrt(VIN * VREF)",
    "abs(VIN - VREF) + 1.5e-1 * VREF",
    "-VIN ** 2 / -VREF",
    "VIN / 2 / 5 * 3 - VREF - VIN",
    "VREF * 2 ** 3 ** 2 / 2 ** -1",
    "VREF * (VIN / VREF) ** -n + IIN * R",
    "VIN ** third * VREF ** (2 / 3)",
    "VREF * (VIN / VREF) ** (POS + 1) * ambient / ambient",
    "+VIN - -VREF",
    "((VIN))",
]


def _law(text: str) -> Law:
    return Law.parse(text, DIMENSIONS)


@pytest.mark.parametrize("text", LAWS)
def test_a_law_has_the_value_of_an_independent_reading(text):
    """The value over conditions is that of sympy's own parser and arithmetic, point by point."""
    symbols = {name: sympy.Symbol(name) for name in DIMENSIONS}
    expression = sympy.parse_expr(text, symbols | {"log10": lambda x: sympy.log(x, 10)})
    points = [{symbols[k]: float(np.broadcast_to(v, 3)[i]) for k, v in VALUES.items()} for i in range(3)]
    found = np.broadcast_to(_law(text).evaluate(VALUES), 3)
    assert found == pytest.approx([float(expression.subs(point)) for point in points], rel=1e-12)


@pytest.mark.parametrize("text", LAWS)
def test_a_sound_law_has_the_dimension_of_the_output(text):
    """Each of the laws above is in volts."""
    law = _law(text)
    assert law.dimension(DIMENSIONS, CONSTANTS) == VOLT
    law.check(VOLT, DIMENSIONS, CONSTANTS)


def test_the_names_of_a_law_are_those_that_occur():
    """Functions are no names, and a name may occur twice."""
    assert _law("full_scale * sqrt(VIN / full_scale)").names == {"VIN", "full_scale"}


def test_values_broadcast_over_conditions():
    """One call serves all conditions, and a law without inputs is one figure."""
    values = {"VIN": np.linspace(1, 2, 6).reshape(3, 2), "VREF": np.array([1.0, 2.0])}
    assert np.array_equal(_law("VIN / VREF").evaluate(values), values["VIN"] / values["VREF"])
    assert _law("2 * 3").evaluate({}) == 6.0


def test_a_law_without_a_value_gives_no_number_and_no_warning():
    """A root of a negative value is NaN and a pole infinite; the others of the batch stand."""
    values = {"VIN": np.array([-1.0, 0.0, 4.0]), "VREF": 1.0}
    root = _law("(VIN / VREF) ** 0.5").evaluate(values)
    assert np.isnan(root[0])
    assert root[1:].tolist() == [0.0, 2.0]
    assert _law("VREF / VIN").evaluate(values)[1] == math.inf
    assert _law("9 ** 9 ** 9").evaluate({}) == math.inf


def test_any_identifier_can_be_a_name():
    """A net may bear a word that programming languages reserve, or the name of a function."""
    law = Law.parse("in / is + log * lambda", ["in", "is", "log", "lambda"])
    assert law.evaluate({"in": 6.0, "is": 2.0, "log": 1.0, "lambda": 4.0}) == 7.0


@pytest.mark.parametrize(
    ("text", "output", "message"),
    [
        ("VIN ** 2", VOLT, "'VIN \\*\\* 2' is in V\\^2, the output is in V .divide it by a scale in V"),
        ("VIN / VREF", VOLT, "is a plain number, the output is in V .multiply it by a scale in V"),
        ("IIN", VOLT, "is in A, the output is in V .multiply it by a scale in ohm"),
        ("VIN", AMPERE, "is in V, the output is in A .divide it by a scale in ohm"),
        ("VIN ** n", VOLT, "is in V\\^\\(1/2\\), the output is in V"),
        ("sqrt(VIN)", VOLT, "is in V\\^\\(1/2\\), the output is in V"),
        ("5", VOLT, "is a plain number, the output is in V"),
        ("VREF * ambient", VOLT, "is in V\\*K, the output is in V .divide it by a scale in K"),
        ("VREF + IIN", VOLT, "at character 8: 'IIN' is in A, 'VREF' is in V: .* by a scale in ohm"),
        ("VREF + 1", VOLT, "at character 8: '1' is a plain number, 'VREF' is in V"),
        ("VREF * (2 - VIN)", VOLT, "at character 13: 'VIN' is in V, '2' is a plain number"),
        ("VREF * log(VIN)", VOLT, "at character 12: 'VIN' is in V, log takes a plain number .divide 'VIN'"),
        ("VREF * exp(VIN / R)", VOLT, "'VIN / R' is in A, exp takes a plain number"),
        ("VREF * log10(2 * IIN)", VOLT, "'2 \\* IIN' is in A, log10 takes a plain number"),
        ("VIN ** POS", VOLT, "'VIN' is in V, and its exponent is not a constant .divide 'VIN'"),
        ("VREF ** (VIN / VREF)", VOLT, "'VREF' is in V, and its exponent is not a constant"),
        ("2 ** VIN", VOLT, "at character 6: the exponent 'VIN' is in V .divide 'VIN' by a scale in V"),
        ("VIN ** 200", VOLT, "at character 8: the exponent '200' is 200 .its magnitude is at most 100"),
        ("VREF * 9 ** 9 ** 9", VOLT, "the exponent '9 \\*\\* 9' is"),
        ("VIN ** (1 / 0)", VOLT, "the exponent '1 / 0' is inf"),
    ],
)
def test_dimensions_that_do_not_agree_name_the_missing_scale(text, output, message):
    """The message has the place, the dimensions met and the scale that is missing."""
    with pytest.raises(LawError, match=message):
        _law(text).check(output, DIMENSIONS, CONSTANTS)


@pytest.mark.parametrize("text", ["0", "-0.0", "VREF + 0", "0 - VREF", "sqrt(0) + VREF", "abs(0) + VREF"])
def test_zero_fits_any_dimension(text):
    """A bare zero can be added to a voltage."""
    _law(text).check(VOLT, DIMENSIONS, CONSTANTS)


@given(st.floats(-4, 4).map(lambda x: round(x, 4)))
def test_exponents_that_sum_to_one_leave_the_dimension(n):
    """A power law split over input and reference is in volts for every exponent."""
    law = Law.parse("VIN ** n * VREF ** (1 - n)", ["VIN", "VREF", "n"])
    assert law.dimension(DIMENSIONS, {"n": n}) == VOLT


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("", "the law is empty"),
        ("   ", "the law is empty"),
        ("VIN +", "at character 6: a number, a name or a parenthesis is expected, not the end of the law"),
        ("* VIN", "at character 1: a number, a name or a parenthesis is expected, not '\\*'"),
        ("(VIN", "at character 5: .*closing parenthesis is expected, not the end"),
        ("VIN)", "at character 4: an operator is expected, not '\\)'"),
        ("VIN VREF", "at character 5: an operator is expected, not 'VREF'"),
        ("VIN(2)", "there is no function 'VIN'.*functions are sqrt, log, log10, exp, abs"),
        ("2VIN", "at character 2: 'VIN' follows a number.*written with \\*"),
        ("10V * VIN", "at character 3: 'V' follows a number.*under constants"),
        ("VIN ^ 2", "at character 5: '\\^' has no meaning .a power is written \\*\\*"),
        ("VIN, 2", "at character 4: ',' has no meaning"),
        ("VIN // 2", "at character 6: a number, a name or a parenthesis is expected, not '/'"),
        ("VIN.real", "at character 4: '.' has no meaning"),
        ("VIN[0]", "at character 4: '\\[' has no meaning"),
        ("'VIN'", 'at character 1: "\'" has no meaning'),
        ("__import__('os')", "at character 1: there is no function '__import__'"),
        ("lambda: VIN", "':' has no meaning"),
        ("1e999", "at character 1: 1e999 is too large"),
        ("ln(VIN)", "there is no function 'ln' .log is the natural logarithm"),
        ("sqr(VIN)", "there is no function 'sqr' .did you mean 'sqrt'"),
        ("sqrt VIN", "sqrt takes its argument in parentheses"),
        ("sqrt()", "at character 6: a number, a name or a parenthesis is expected, not '\\)'"),
        ("VINN / REF", "'VINN' at character 1, 'REF' at character 8.*'VIN' for 'VINN'.*'VREF' for 'REF'"),
        ("q", "unknown names: 'q' at character 1 .names known here are IIN, POS"),
        ("VIN²", "unknown names: 'VIN²'.*did you mean 'VIN'"),
    ],
)
def test_what_is_no_law_is_refused_with_its_place(text, message):
    """A law that cannot be read says where, and what would be right."""
    with pytest.raises(LawError, match=message):
        _law(text)


@pytest.mark.parametrize("opening", ["(", "-", "sqrt(", "2 ** "])
def test_nesting_has_a_limit(opening):
    """Thirty-two levels are read and one more is refused, whatever nests."""
    closing = ")" * opening.count("(")
    _law(opening * DEEPEST + "VIN" + closing * DEEPEST)
    with pytest.raises(LawError, match="nested deeper than 32 levels"):
        _law(opening * (DEEPEST + 1) + "VIN" + closing * (DEEPEST + 1))


def test_length_has_a_limit():
    """A law of the greatest length is read and worth its value, a longer one refused."""
    text = "+".join(["1"] * (LONGEST // 2))
    assert _law(text).evaluate({}) == LONGEST // 2
    with pytest.raises(LawError, match="of 1001 characters is too long"):
        _law(text + " " * (LONGEST + 1 - len(text)))


@given(st.text(alphabet="VIN2.e+-*/() sqrtlogn", max_size=40) | st.text(max_size=40))
def test_any_text_is_read_or_refused(text):
    """Whatever the text, it is a law or a LawError, and never another error."""
    try:
        law = _law(text)
    except LawError:
        return
    law.evaluate(VALUES)
    try:
        law.dimension(DIMENSIONS, CONSTANTS)
    except LawError:
        return
