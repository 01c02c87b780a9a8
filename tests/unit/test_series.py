"""Preferred values against IEC 60063 and an independent table of them."""

import math

import eseries
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rulecheck.series import SERIES, decade_values, in_series, nearest, series_for_tolerance, values

# IEC 60063, as published: the whole E6 and E24.
E6 = (1.0, 1.5, 2.2, 3.3, 4.7, 6.8)
E24 = (
    1.0, 1.1, 1.2, 1.3, 1.5, 1.6, 1.8, 2.0, 2.2, 2.4, 2.7, 3.0,
    3.3, 3.6, 3.9, 4.3, 4.7, 5.1, 5.6, 6.2, 6.8, 7.5, 8.2, 9.1,
)  # fmt: skip

# Where E24 differs from 10^(i/24) rounded, recomputed: eight values and no more.
E24_EXCEPTIONS = {
    2.7: 2.6, 3.0: 2.9, 3.3: 3.2, 3.6: 3.5, 3.9: 3.8, 4.3: 4.2, 4.7: 4.6, 8.2: 8.3,
}  # fmt: skip

finite_values = st.floats(1e-15, 1e12)
series_names = st.sampled_from(SERIES)


def test_e6_and_e24_are_those_of_the_standard():
    """The coarse series hold the values of IEC 60063."""
    assert values("E6") == E6
    assert values("E24") == E24
    assert values("E3") == (1.0, 2.2, 4.7)


def test_e24_differs_from_rounded_powers_in_eight_values():
    """The agreed values of E24 are exactly the known exceptions."""
    powers = [round(10 ** (i / 24), 1) for i in range(24)]
    found = {value: power for value, power in zip(values("E24"), powers, strict=True) if value != power}
    assert found == E24_EXCEPTIONS


@pytest.mark.parametrize("series", ["E48", "E96"])
def test_fine_series_are_rounded_powers(series):
    """E48 and E96 follow d·10^(i/N) to three digits without exception (IEC 60063)."""
    count = int(series[1:])
    assert values(series) == tuple(round(10 ** (i / count), 2) for i in range(count))


def test_e192_has_one_exception():
    """E192 has 9.20 where rounding gives 9.19 (IEC 60063, from memory; 10^(185/192) = 9.1948)."""
    powers = [round(10 ** (i / 192), 2) for i in range(192)]
    found = [pair for pair in zip(values("E192"), powers, strict=True) if pair[0] != pair[1]]
    assert found == [(9.2, 9.19)]


@pytest.mark.parametrize("series", SERIES)
def test_series_agree_with_an_independent_table(series):
    """All values are those of the eseries package, which keeps its own tables."""
    theirs = tuple(float(value) for value in eseries.series(eseries.ESeries[series]))
    assert values(series) == pytest.approx([value / theirs[0] for value in theirs], rel=1e-12)


@given(finite_values, series_names)
def test_the_nearest_value_is_the_nearest_by_ratio(value, series):
    """No value of the series is closer on a logarithmic scale."""
    found = nearest(value, series)
    around = decade_values(series, value / 10, value * 10)
    assert found in around
    assert abs(math.log(found / value)) <= min(abs(math.log(other / value)) for other in around) + 1e-12


@pytest.mark.parametrize(
    ("value", "series", "expected"),
    [
        (4700.0, "E24", 4700.0),
        (9.9, "E24", 10.0),
        (999.0, "E96", 1000.0),
        (0.098, "E6", 0.1),
        (3.2e3, "E12", 3300.0),
        (math.sqrt(1.0 * 2.2) * 1.0001, "E3", 2.2),  # the middle is the geometric one, by hand
        (math.sqrt(1.0 * 2.2) * 0.9999, "E3", 1.0),
    ],
)
def test_the_nearest_value_is_an_exact_decimal(value, series, expected):
    """The nearest value crosses decades and is the float of its decimal."""
    assert nearest(value, series) == expected


def test_e96_is_the_default():
    """Without a series the nearest value is of E96."""
    assert nearest(5.0e3) == 4990.0


@given(series_names, st.integers(-14, 11), st.integers(0, 191))
def test_members_are_in_their_series(series, decade, index):
    """A value of a series in any decade is in it, whichever way it was computed, and one 0.1 % off is not."""
    table = values(series)
    value = table[index % len(table)] * 10.0**decade
    assert in_series(value, series)
    assert not in_series(value * 1.001, series)


def test_zero_negative_and_endless_values_are_in_no_series():
    """What is not positive and finite is in no series."""
    assert not any(in_series(value, "E24") for value in (0.0, -4700.0, math.inf, math.nan))


# IEC 60063: E6 for 20 %, E12 10 %, E24 5 %, E48 2 %, E96 1 %, E192 0.5 % and closer.
@pytest.mark.parametrize(
    ("tolerance", "series"),
    [
        (0.5, "E3"), (0.2, "E6"), (0.15, "E12"), (0.1, "E12"), (0.05, "E24"), (0.02, "E48"),
        (0.01, "E96"), (0.005, "E192"), (0.001, "E192"), (0.0, "E192"),
    ],
)  # fmt: skip
def test_a_tolerance_has_its_series(tolerance, series):
    """Each tolerance has the series made for it, and one between two has the finer."""
    assert series_for_tolerance(tolerance) == series


def test_values_between_two_bounds_cross_decades_in_order():
    """The values between two bounds are all there, bounds included."""
    assert decade_values("E3", 4.7e-9, 100e-9) == (4.7e-9, 10e-9, 22e-9, 47e-9, 100e-9)
    assert decade_values("E12", 1.3, 1.4) == ()


@pytest.mark.parametrize("value", [0.0, -1.0, math.inf, math.nan])
def test_only_positive_values_have_a_nearest(value):
    """A value that is not positive and finite is an error."""
    with pytest.raises(ValueError, match="positive and finite"):
        nearest(value)
    with pytest.raises(ValueError, match="positive and finite"):
        decade_values("E24", value, 10.0)


def test_an_unknown_series_is_an_error():
    """The series that there are, are named."""
    with pytest.raises(ValueError, match="no series 'E25'; there are E3, E6, E12"):
        nearest(1.0, "E25")
