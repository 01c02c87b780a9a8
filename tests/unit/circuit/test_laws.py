"""Laws of junction loops in words."""

import pytest

from rulecheck.circuit.laws import output_law, product_law
from rulecheck.circuit.pairings import Junction

PAIR = (Junction("Q1", 1, 1.0), Junction("Q2", -1, 1.0))
ONE = {"Q1": 1.0, "Q2": 1.0, "Q3": 1.0, "Q4": 1.0}


def test_product_law_with_exponents():
    """A cube root: the second pair counts for a third."""
    loop = (*PAIR, Junction("Q3", -1, 1 / 3), Junction("Q4", 1, 1 / 3))
    assert product_law(loop, ONE, {}, {}) == "I(Q1)·I(Q4)^0.333 = I(Q2)·I(Q3)^0.333"


def test_a_common_emission_coefficient_drops_out_of_a_product_law():
    """Junctions of one coefficient obey the same law as ideal ones; others keep the ratio."""
    assert product_law(PAIR, {"Q1": 1.8, "Q2": 1.8}, {}, {}) == "I(Q1) = I(Q2)"
    assert product_law(PAIR, {"Q1": 1.0, "Q2": 1.8}, {}, {}) == "I(Q1) = I(Q2)^1.8"


@pytest.mark.parametrize(
    ("rest", "units", "expected"),
    [
        ({"VIN": 0.0625}, {"VIN": "1"}, "I(Q1) = I(Q2)·exp(q/kT·0.0625·VIN)"),
        ({"VIN": -0.0625}, {"VIN": "1"}, "I(Q1) = I(Q2)·exp(q/kT·(−0.0625·VIN))"),
        ({"I(Q2)": 600.0}, {"I(Q2)": "ohm"}, "I(Q1) = I(Q2)·exp(q/kT·600 ohm·I(Q2))"),
        ({"A": 1.0, "B": -1.0}, {"A": "1", "B": "1"}, "I(Q1) = I(Q2)·exp(q/kT·(A − B))"),
    ],
)
def test_what_is_left_in_the_loop_stands_in_an_exponential(rest, units, expected):
    """Voltages and drops in the loop make up the ratio of the currents."""
    assert product_law(PAIR, ONE, rest, units) == expected


@pytest.mark.parametrize(
    ("gain", "expected"),
    [
        (16.9, "V = 16.9·kT/q·ln(I(Q1)/I(Q2))"),
        (-16.9, "V = 16.9·kT/q·ln(I(Q2)/I(Q1))"),
        (1.0, "V = kT/q·ln(I(Q1)/I(Q2))"),
    ],
)
def test_a_compensated_output_is_written_with_a_positive_slope(gain, expected):
    """The currents change places with the sign of the gain."""
    assert output_law("V", gain, PAIR, ONE, {}, {}) == expected


def test_an_output_with_products_on_both_sides():
    """A product below the line stands in parentheses."""
    loop = (*PAIR, Junction("Q3", 1, 1.0), Junction("Q4", -1, 1.0))
    assert output_law("V", 1.0, loop, ONE, {}, {}) == "V = kT/q·ln(I(Q1)·I(Q3)/(I(Q2)·I(Q4)))"


def test_an_uncompensated_output_names_the_saturation_current():
    """What does not cancel is written out, with what else adds to the output."""
    law = output_law("V", -2.0, PAIR[:1], ONE, {"I(Q1)": -4300.0, "VREF": 0.5}, {"I(Q1)": "ohm", "VREF": "1"})
    assert law == "V = −2·kT/q·ln(I(Q1)/I_S(Q1)) − 4.3 kohm·I(Q1) + 0.5·VREF"
