"""Exact elimination."""

from fractions import Fraction

from hypothesis import given, settings
from hypothesis import strategies as st

from rulecheck.circuit.elimination import blocks, eliminate, reduced, subtract

NAMES = [("c", str(i)) for i in range(5)]
rows_strategy = st.lists(
    st.dictionaries(st.sampled_from(NAMES), st.integers(-4, 4).filter(bool).map(Fraction), max_size=5), max_size=6
)


@settings(deadline=None)  # a busy machine is no fault
@given(rows_strategy, st.permutations(NAMES))
def test_pivots_and_rest_say_the_same_as_the_rows(rows, order):
    """What solves pivots and rest solves every row: substituting the pivots leaves nothing of them."""
    pivots, rest = eliminate(rows, order, len)
    assert rest == []
    full = reduced(rows, order, len)
    for row in rows:
        left = dict(row)
        for column, pivot in full.items():
            if column in left:
                left = subtract(left, pivot, left[column])
        assert left == {}
    assert pivots.keys() == full.keys()


@settings(deadline=None)  # a busy machine is no fault
@given(rows_strategy, st.permutations(NAMES))
def test_no_reduced_pivot_holds_the_column_of_another(rows, order):
    """Each row of the full reduction has its own pivot with coefficient 1 and no other pivot."""
    full = reduced(rows, order, len)
    for column, row in full.items():
        assert row[column] == 1
        assert not (row.keys() & full.keys()) - {column}


@settings(deadline=None)  # a busy machine is no fault
@given(rows_strategy)
def test_eliminated_columns_are_gone_from_the_rest(rows):
    """The rest holds only columns that were not eliminated."""
    _, rest = eliminate(rows, NAMES[:2], len)
    assert all(column not in row for row in rest for column in NAMES[:2])


def test_the_cheapest_row_defines_a_column():
    """Of two rows that hold a column the one of least cost becomes its pivot."""
    long = {("c", "x"): Fraction(1), ("c", "y"): Fraction(1), ("c", "z"): Fraction(1)}
    short = {("c", "x"): Fraction(2), ("c", "y"): Fraction(-1)}
    pivots, _ = eliminate([long, short], [("c", "x")], len)
    assert pivots == {("c", "x"): {("c", "x"): 1, ("c", "y"): Fraction(-1, 2)}}


def test_rows_fall_into_blocks_by_the_columns_that_join():
    """Rows that share only a column that does not join stay apart."""
    rows = [
        {("V", "a"): Fraction(1), ("K", "k"): Fraction(1)},
        {("V", "b"): Fraction(1), ("K", "k"): Fraction(1)},
        {("V", "b"): Fraction(1), ("V", "c"): Fraction(1)},
    ]
    assert blocks(rows, lambda column: column[0] == "V") == [rows[:1], rows[1:]]
