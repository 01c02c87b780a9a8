"""The curve of a figure over one of its conditions."""

import itertools
from types import MappingProxyType

import numpy as np

from rulecheck.analysis.conditions import Conditions
from rulecheck.findings import Evidence, Finding
from rulecheck.tui.evidence_curve import curves, scenarios

ROWS = np.array(list(itertools.product([250.0, 300.0, 350.0], [1.0, 2.0, 3.0, 4.0])))
GRID = Conditions(MappingProxyType({"ambient": ROWS[:, 0], "VIN": ROWS[:, 1]}))
#: Largest at 350 K and 3 V.
FIGURE = ROWS[:, 0] / 100 - (ROWS[:, 1] - 3) ** 2


def test_the_curve_goes_through_the_worst_condition_with_all_else_held():
    """Of the figure itself where the finding does not say where it is worst."""
    evidence = Evidence("figure", 3.5, "V", 1.0, "<=", over=FIGURE)
    first, second = curves(Finding("x"), evidence, GRID)
    assert first.over == "VIN"
    assert first.x.tolist() == [1.0, 2.0, 3.0, 4.0]
    assert first.y.tolist() == [-0.5, 2.5, 3.5, 2.5]
    assert (first.worst, first.held) == (2, {"ambient": 350.0})
    assert second.over == "ambient"
    assert second.held == {"VIN": 3.0}


def test_the_condition_that_the_finding_names_is_the_worst():
    """Whatever the figure says."""
    evidence = Evidence("figure", 1.0, "V", 1.0, "<=", over=FIGURE)
    first = curves(Finding("x", conditions={"ambient": 250.0, "VIN": 2.0}), evidence, GRID)[0]
    assert first.held == {"ambient": 250.0}
    assert first.x[first.worst] == 2.0


def test_the_least_figure_is_the_worst_where_it_must_be_large():
    """At 250 K and 1 V."""
    evidence = Evidence("figure", 1.0, "V", 1.0, ">=", over=FIGURE)
    first = curves(Finding("x"), evidence, GRID)[0]
    assert (first.held, first.x[first.worst]) == ({"ambient": 250.0}, 1.0)


def test_where_too_few_points_share_the_other_conditions_the_worst_at_each_abscissa_is_drawn():
    """Conditions on a diagonal."""
    grid = Conditions(
        MappingProxyType({"ambient": np.array([1.0, 2.0, 3.0, 3.0]), "VIN": np.array([5.0, 6.0, 7.0, 8.0])})
    )
    evidence = Evidence("figure", 1.0, "V", 1.0, "<=", over=np.array([1.0, 2.0, 3.0, 9.0]))
    by = {curve.over: curve for curve in curves(Finding("x"), evidence, grid)}
    assert by["ambient"].y.tolist() == [1.0, 2.0, 9.0]
    assert by["ambient"].held == {}


def test_points_without_a_figure_are_left_out():
    """NaN is no point of the curve."""
    figure = np.where(ROWS[:, 1] == 2.0, np.nan, FIGURE)
    first = curves(Finding("x"), Evidence("figure", 3.5, over=figure), GRID)[0]
    assert first.x.tolist() == [1.0, 3.0, 4.0]


def test_scenarios_stand_with_the_worst_first_each_once():
    """The worst of those with the same words."""
    faults = Conditions({"ambient": np.zeros(3)}, ("off", "surge", "off"))
    found = scenarios(Evidence("current", 5.0, "A", 1.0, "<=", over=np.array([1.0, 3.0, 5.0])), faults)
    assert [(s.words, s.value) for s in found] == [("off", 5.0), ("surge", 3.0)]
