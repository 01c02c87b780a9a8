"""Curves in Braille signs and their axes."""

import numpy as np
import pytest

from rulecheck.tui.braille import Axis, Canvas
from rulecheck.tui.drawing import Diagram, bar, draw


def test_an_axis_is_logarithmic_where_values_of_one_sign_span_decades():
    """And linear where they cross zero or lie close together."""
    assert Axis.of(np.array([1e-3, 1.0])).log
    assert Axis.of(np.array([-1e-3, -1.0])).log
    assert not Axis.of(np.array([-1e-3, 1.0])).log
    assert not Axis.of(np.array([0.9, 1.0])).log


def test_ticks_of_a_logarithmic_axis_are_powers_of_ten_at_equal_distances():
    """Six decades, seven ticks."""
    axis = Axis.of(np.array([1e-9, 1e-3]))
    ticks = axis.ticks(9)
    assert ticks == pytest.approx([10.0**n for n in range(-9, -2)])
    assert np.diff(axis.place(np.array(ticks))) == pytest.approx(1 / 6)


def test_an_axis_of_negative_values_runs_from_the_least_to_the_greatest():
    """-10 V stands left of -10 mV."""
    axis = Axis.of(np.array([-10.0, -0.01]))
    assert axis.place(np.array([-10.0, -0.01])) == pytest.approx([0.0, 1.0])


def test_ticks_of_a_linear_axis_are_round():
    """Steps of 1, 2 or 5."""
    assert Axis(0.0, 1.0).ticks(5) == pytest.approx([0.0, 0.2, 0.4, 0.6, 0.8, 1.0])


def test_a_value_that_stands_alone_has_an_axis_too():
    """Zero included."""
    for value in (0.0, 3.0, -2.0):
        axis = Axis.of(np.full(4, value))
        assert axis.low < value < axis.high


def test_dots_are_those_of_the_braille_block_of_unicode():
    """Unicode 15, block 2800: dots 1, 2, 3, 7 down the left column, 4, 5, 6, 8 down the right one."""
    left, right = Canvas(1, 1), Canvas(1, 1)
    left.line(np.array([0.0, 0.0]), np.array([0.0, 1.0]))
    right.line(np.array([1.0, 1.0]), np.array([0.0, 1.0]))
    assert left.rows() == [chr(0x2800 + 0b01000111)]
    assert right.rows() == [chr(0x2800 + 0b10111000)]


def test_a_line_is_broken_where_there_is_no_figure():
    """Nothing is drawn between the points beside a NaN."""
    canvas = Canvas(11, 1)
    canvas.line(np.linspace(0, 1, 5), np.array([0.5, 0.5, np.nan, 0.5, 0.5]))
    (row,) = canvas.rows()
    assert row[5] == " "
    assert row[1] != " "
    assert row[-2] != " "


def test_a_straight_line_fills_every_column():
    """From corner to corner."""
    canvas = Canvas(20, 5)
    canvas.line(np.array([0.0, 1.0]), np.array([0.0, 1.0]))
    rows = canvas.rows()
    assert all(any(row[column] != " " for row in rows) for column in range(20))
    assert rows[0][-1] != " "
    assert rows[-1][0] != " "


def test_a_diagram_fills_its_room_and_no_more():
    """At any size."""
    x = np.geomspace(1e-9, 1e-3, 25)
    for width, height in ((40, 10), (76, 20), (150, 45)):
        lines = draw(Diagram([(x, x**2)], "A", "V", [1e-8], (1e-3, 1e-6)), width, height)
        assert len(lines) == height
        assert max(line.cell_length for line in lines) <= width


def test_the_limit_is_dashed_and_the_worst_point_marked_where_it_is():
    """The limit in the middle row, the mark at its end of the curve."""
    x = np.linspace(0.0, 1.0, 9)
    lines = [str(line) for line in draw(Diagram([(x, x)], "V", "V", [0.5], (1.0, 1.0)), 50, 13)]
    assert lines[0].endswith("✖")
    middle = lines[5].partition("┤")[2] or lines[5].partition("│")[2]
    assert " " in middle.strip()
    assert len(middle.replace(" ", "")) > 20


def test_bars_are_as_long_as_their_share():
    """To an eighth of a character, a NaN without a bar."""
    assert bar(1.0, 4) == "████"
    assert bar(0.5, 4) == "██  "
    assert bar(1 / 32, 4) == "▏   "
    assert bar(float("nan"), 4) == "    "


def test_points_that_do_not_belong_together_are_not_joined():
    """Two points at the ends leave the middle empty."""
    canvas = Canvas(9, 3)
    canvas.points(np.array([0.0, 1.0]), np.array([0.5, 0.5]))
    middle = canvas.rows()[1]
    assert middle[0] != " "
    assert middle[-1] != " "
    assert middle[1:-1].strip() == ""
