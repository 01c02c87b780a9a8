"""Compensation: the least capacitor of one loop, and capacitors of loops that only a pair can calm."""

import re
from pathlib import Path

import numpy as np
import pytest

from rulecheck.analysis.review import Review
from rulecheck.testing import design_from

CASES = Path(__file__).parents[2] / "published" / "cases"
DAMPING, MARGIN = 0.3, 45.0


def case(name, *removed):
    """A review of a numeric case without some of its parts."""
    text = (CASES / f"{name}.toml").read_text()
    for ref in removed:
        text = re.sub(rf"\[parts\.{ref}\]\n(.+\n)+", "", text)
    return Review(design_from(text, (CASES / "case_parts.toml").read_text()))


def with_capacitor(review, amplifier, farad):
    """The review with a capacitor from output to inverting input of one amplifier."""
    from rulecheck.findings import Add

    pins = review.design.parts[amplifier].pins
    table = {"kind": "capacitor", "value": f"{farad} F", "pins": [pins["OUT"], pins["IN-"]]}
    return review.edited([Add(f"parts.CX_{amplifier}", table)])


def meets(review):
    """Whether damping and all margins meet the limits at every judged condition."""
    island = review.loops.islands[0]
    margins = [np.where(island.judged, review.loops.phase_margin(a), np.nan) for a in island.amplifiers]
    calm = island.least_damping[island.judged].min() >= DAMPING and island.rightmost[island.judged].max() < 0
    return bool(calm and all(np.nanmin(m) >= MARGIN for m in margins))


def test_a_single_loop_gets_the_least_value_of_the_series():
    """The value found meets the limits, and the next smaller one of E12 does not (common practice, no source)."""
    review = case("log_stage", "C1")
    found = review.required_capacitors(["U1"], DAMPING, MARGIN)
    assert found is not None
    assert found.capacitors == {"U1": pytest.approx(22e-12)}
    assert meets(with_capacitor(review, "U1", 22e-12))
    assert not meets(with_capacitor(review, "U1", 18e-12))


def test_loops_that_share_a_node_are_cured_only_as_a_pair():
    """No capacitor of either loop alone calms the root stage; the pair that is found does."""
    review = case("cube_root", "C1", "C2")
    assert review.required_capacitors(["U1"], DAMPING, MARGIN) is None
    assert review.required_capacitors(["U2"], DAMPING, MARGIN) is None
    found = review.required_capacitors(["U1", "U2"], DAMPING, MARGIN)
    assert found is not None
    both = with_capacitor(with_capacitor(review, "U1", found.capacitors["U1"]), "U2", found.capacitors["U2"])
    assert meets(both)


def test_a_capacitor_that_is_there_counts_as_replaced():
    """Asked of a loop that is compensated already, the search starts from nothing."""
    assert case("log_stage").required_capacitors(["U1"], DAMPING, MARGIN).capacitors["U1"] == pytest.approx(22e-12)


def test_no_capacitor_may_be_enough():
    """Limits beyond reach give no values rather than wrong ones."""
    assert case("log_stage", "C1").required_capacitors(["U1"], 0.999, 89.0) is None
