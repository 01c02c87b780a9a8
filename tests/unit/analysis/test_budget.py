"""Error budgets: which spreads count, how they share, their totals, and trims that answer them."""

import numpy as np
import pytest
from designs import board
from gain_stage import FLOATING, GAIN, LEAK, TRIM, at, changed, review_at

from rulecheck.analysis.budget import budget
from rulecheck.analysis.review import Review
from rulecheck.analysis.spreads import deviations
from rulecheck.findings import Set
from rulecheck.testing import design_from

LOG = '\n[requirements.log]\noutput = "Y0"\nlaw = "one * log(X0 / one)"\nconstants = { one = "1 V" }\n'
TRIMMED = changed(GAIN, TRIM)
MIDDLE = np.sqrt(0.1)  # of 0.1 to 1 V


def budget_of(text, **points):
    """The budget of a design's first requirement, and its values by parameter."""
    review = review_at(text, **points)
    found = budget(review, next(iter(review.design.requirements.values())))
    return found, {c.parameter: c.value for c in found.contributions}


def test_contributions_of_an_inverting_amplifier():
    """Gain 2: resistors 1 % of reading each, offset three times itself, drifts with its own T - 25 degC (textbook)."""
    review = review_at(GAIN, X=[0.5, 0.5], ambient=[298.15, 348.15])
    found = budget(review, review.design.requirements["gain"])
    values = {c.parameter: c.value for c in found.contributions}
    warmer = review.operating_points.temperature("U1") - 298.15
    assert np.abs(values["parts.R1.value"]) == pytest.approx(0.01, rel=1e-4)
    assert values["parts.R2.value"] == pytest.approx(-0.01, rel=1e-4)
    assert np.abs(values["parts.U1.offset_voltage"]) == pytest.approx(3e-3, rel=1e-4)
    assert np.abs(values["parts.U1.offset_drift"]) == pytest.approx(3 * 10e-6 * warmer, rel=1e-4)
    assert np.abs(values["parts.R1.tempco"]) == pytest.approx([0.0, 50e-6 * 50], rel=1e-4, abs=1e-12)
    assert found.worst == 1


def test_totals():
    """Worst case is the sum of magnitudes, the other the root of the sum of squares; in reading and at the input."""
    found, values = budget_of(GAIN, X=[0.5], ambient=[348.15])
    magnitudes = np.abs(list(values.values()))
    assert found.worst_case == pytest.approx(magnitudes.sum(axis=0), rel=1e-12)
    assert found.rss == pytest.approx(np.sqrt((magnitudes**2).sum(axis=0)), rel=1e-12)
    assert found.of_reading(found.worst_case) == pytest.approx(found.worst_case / 1.0, rel=1e-12)
    assert found.at_input(found.worst_case, "X") == pytest.approx(found.worst_case / 2, rel=1e-4)


def test_sorted_and_small_ones_not_shown():
    """The largest at the worst condition comes first; what is below a millionth of the total is not shown."""
    found, _ = budget_of(GAIN, X=[0.5], ambient=[298.15])
    sizes = [abs(c.value[0]) for c in found.contributions]
    assert sizes == sorted(sizes, reverse=True)
    shown = [c.parameter for c in found.shown()]
    assert set(shown[:2]) == {"parts.R1.value", "parts.R2.value"}
    assert shown[2] == "parts.U1.offset_voltage"
    assert found.contributions[-1].parameter not in shown


def test_resistors_of_a_network_track():
    """With a ratio tolerance the resistors share their tolerance, which cancels; their ratio keeps its own limit."""
    text = GAIN.replace("[parts]", '[packages.N1]\nratio_tolerance = "0.1 %"\nratio_tempco = "5 ppm/K"\n[parts]')
    _, values = budget_of(text, X=[0.5], ambient=[348.15])
    assert values["packages.N1.value"] == pytest.approx(0.0, abs=1e-6)
    assert values["packages.N1.tempco"] == pytest.approx(0.0, abs=1e-6)
    assert values["parts.R2.value"] == pytest.approx(-1e-3, rel=1e-3)
    assert values["parts.R2.tempco"] == pytest.approx(-5e-6 * 50, rel=1e-2)
    assert "parts.R1.value" not in values


def test_matched_and_unmatched_transistors():
    """A matched pair has one mismatch; single ones have the spread of V_BE each, sixteen times at the output."""
    pair = board(1) + LOG + '\n[matching.pair]\nparts = ["Q1_0", "Q2_0"]\nvbe_mismatch = "0.5 mV"\n'
    _, values = budget_of(pair, X0=[1.0])
    assert np.abs(values["matching.pair.Q2_0"]) == pytest.approx(16 * 0.5e-3, rel=1e-3)
    assert np.abs(values["matching.pair.vbe_spread"]) < 1e-4
    assert "matching.pair.Q1_0" not in values
    assert "matching.pair.forward_beta" in values
    assert "parts.Q1_0.forward_beta" not in values
    _, values = budget_of(board(1) + LOG, X0=[1.0])
    for ref in ("Q1_0", "Q2_0"):  # the model states ± 20 mV
        assert np.abs(values[f"parts.{ref}.vbe_spread"]) == pytest.approx(16 * 20e-3, rel=1e-3)


def test_a_unit_that_states_its_error_is_known():
    """An amplifier with a stated offset has no limit of offset any more, but its drift; so has a known transistor."""
    _, values = budget_of(GAIN.replace("offset_voltage", 'offset = "0.2 mV"\noffset_voltage'), X=[0.5])
    assert "parts.U1.offset_voltage" not in values
    assert "parts.U1.offset_drift" in values
    known = board(1).replace('pins = { C = "T0"', 'vbe_offset = "1 mV", pins = { C = "T0"')
    names = {d.name for d in deviations(design_from(known))}
    assert "parts.Q2_0.vbe_spread" not in names
    assert "parts.Q1_0.vbe_spread" in names


def test_a_supply_counts_where_no_condition_moves_it():
    """The tolerance of a supply is in the budget at its nominal, and not again at the corners of the grid."""
    _, values = budget_of(changed(GAIN, LEAK), X=[0.5, 0.5], VP=[15.0, 14.25])
    assert values["nets.VP.voltage"] == pytest.approx([-0.75 * 20e3 / 1e6, 0.0], rel=1e-4)


def test_conditions_without_solution_have_no_budget():
    """Figures of points that did not converge are NaN, and they are never the worst."""
    review = review_at(changed(GAIN, FLOATING), X=[0.5])
    assert not review.operating_points.converged.any()
    found = budget(review, review.design.requirements["gain"])
    assert found.worst is None
    assert found.shown() == ()
    assert np.isnan(found.worst_case).all()


@pytest.mark.parametrize(
    ("key", "parameter", "to", "amount"),
    [
        ("parts.R1.value", "parts.R1.value", "10.05 kohm", 50.0),
        ("parts.U1.offset", "parts.U1.offset_voltage", "0.5 mV", 0.5e-3),
    ],
)
def test_a_trim_answers_deviations(key, parameter, to, amount):
    """With a trim the error of a changed design, trimmed anew, is what the slope says."""
    points = {"X": [0.1, 0.3, 1.0], "ambient": [298.15, 298.15, 348.15]}
    plain = review_at(TRIMMED, **points)
    other = at(plain.edited([Set(key, to)]), **points)
    assert other.typical["RV1"] != plain.typical["RV1"]
    before, after = (budget(review, review.design.requirements["gain"]) for review in (plain, other))
    (own,) = (c for c in before.contributions if c.parameter == parameter)
    assert own.slope * amount == pytest.approx(after.error - before.error, rel=2e-2, abs=2e-6)
    assert "parts.RV1.position" not in {c.parameter for c in before.contributions}


def test_a_trim_takes_the_gain_out():
    """Where it is set a trim leaves nothing of any spread."""
    review = review_at(TRIMMED, X=[MIDDLE])
    assert budget(review, review.design.requirements["gain"]).worst_case == pytest.approx(0.0, abs=1e-6)


def test_a_trim_at_its_end_cannot_answer():
    """A trim without travel left leaves the tolerances as they are."""
    review = Review(design_from(TRIMMED.replace('"19.5 kohm"', '"21 kohm"')))
    assert review.typical["RV1"] == 0.0
    found = budget(review, review.design.requirements["gain"])
    (own,) = (c for c in found.contributions if c.parameter == "parts.R1.value")
    reading = np.abs(review.conditions.values["X"] * 2.1)
    assert np.abs(own.value[found.judged]) == pytest.approx(0.01 * reading[found.judged], rel=1e-3)
