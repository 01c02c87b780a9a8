"""Spreads against what requirements allow, and the travel of trims. The boards are invented."""

from pathlib import Path

import pytest
from rulecheck_rules.transfer_law import TransferLaw

from rulecheck.api import Review, Set, Severity
from rulecheck.design.load import load, load_text
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

EXAMPLES = Path(__file__).parents[2] / "example_designs" / "sound"
LOOSE = {
    "log_ratio": ('value = "16.9 kohm", tolerance = "0.1 %"', 'value = "16.9 kohm", tolerance = "5 %"'),
    "expander": ('value = "499 kohm", tolerance = "0.1 %"', 'value = "499 kohm", tolerance = "5 %"'),
}
# between what the squares and the magnitudes of its spreads make, with the nominal error
BETWEEN = ('accuracy = { reading = "1 %", absolute = "8 mV" }', 'accuracy = { absolute = "4 mV" }')


def example(name, *changes):
    """A sound example with texts replaced."""
    path = EXAMPLES / f"{name}.toml"
    text = path.read_text("utf-8")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    return load_text(text, path)


def loose(board, name):
    """A design with a loose resistor that sets its scale."""
    return board(name, LOOSE[name]) if name == "log_ratio" else example(name, LOOSE[name])


def test_budgets_that_fit_are_clean(board):
    """A log ratio and an antilogarithm whose spreads stay inside the accuracy, worst case included, are clean."""
    assert_clean(TransferLaw, board("log_ratio"))
    assert_clean(TransferLaw, example("expander"))


@pytest.mark.parametrize(("name", "part"), [("log_ratio", "R5"), ("expander", "R6")])
def test_a_loose_resistor_is_the_first_of_the_budget(board, name, part):
    """With 5 % in the gain the root of the squares is over the limit, and that resistor is named first."""
    finding = assert_finds(TransferLaw, loose(board, name))
    assert finding.severity is Severity.MAJOR
    assert f"spent by parts.{part}.value" in finding.consequence
    total, error, rss, worst = (e.value for e in finding.evidence)
    assert total == pytest.approx(error + rss)
    assert worst > rss
    assert "of reading" in finding.message


def test_the_antilog_is_off_by_the_tolerance_of_its_resistor():
    """VOUT = R6·I: 5 % of R6 are 5 % of the 10 V at the top, and the rest of the spreads adds little to the squares."""
    finding = assert_finds(TransferLaw, example("expander", LOOSE["expander"]))
    assert finding.evidence[2].value == pytest.approx(0.5, rel=0.02)


def test_over_the_limit_only_at_worst_is_minor():
    """Where the squares fit and the sum of the magnitudes does not, the finding is minor."""
    finding = assert_finds(TransferLaw, example("level_meter", BETWEEN))
    total, error, rss, worst = (e.value for e in finding.evidence)
    assert finding.severity is Severity.MINOR
    assert error + rss < 4e-3 < total
    assert total == pytest.approx(error + worst)


@pytest.mark.parametrize(("name", "part"), [("log_ratio", "R5"), ("expander", "R6")])
def test_the_tolerance_that_would_do(board, cures, name, part):
    """The remedy tightens the resistor that spends most, no further than it must, and the finding is gone."""
    design = loose(board, name)
    after = cures(design, TransferLaw)
    assert not any(after.values()), after
    (finding,) = findings_of(design, TransferLaw)
    (remedy,) = finding.remedies
    edits = {edit.key: edit.to for edit in remedy.edits if isinstance(edit, Set)}
    assert float(edits[f"parts.{part}.tolerance"].split()[0]) <= 2
    budget = Review(mended(design, remedy)).budget[next(iter(design.requirements))]
    worst = (abs(budget.error) + budget.worst_case) / budget.allowed
    assert 0.3 < worst[budget.worst] <= 1


def test_an_amplifier_that_spends_most_is_replaced(cures):
    """A bias current of a tenth of the signal is most of the budget, and an amplifier with less takes it away."""
    design = load(EXAMPLES.parent / "faulty" / "starved_sample.toml")
    finding = assert_finds(TransferLaw, design)
    assert "spent by parts.U1.bias_current" in finding.consequence
    after = cures(design, TransferLaw)
    assert any("for U1 (bias current)" in title for title in after), after
    assert not any(after.values()), after


def test_a_trim_with_travel_is_clean():
    """A trimmer that takes up the spreads from its middle is clean."""
    assert_clean(TransferLaw, example("heater_power"))


@pytest.mark.parametrize(
    ("change", "words"),
    [
        (('kind = "potentiometer", value = "5 kohm"', 'kind = "potentiometer", value = "1 kohm"'), "nominally"),
        (('value = "97.6 kohm"', 'value = "95.3 kohm"'), "the spreads ask for"),
    ],
)
def test_a_trim_without_travel(cures, change, words):
    """Too small a trimmer, and one that is far off its middle: found once, and cured by values that were tried."""
    design = example("heater_power", change)
    finding = assert_finds(TransferLaw, design, {"RV1"})
    assert finding.severity is Severity.MAJOR
    assert words in finding.message
    assert "VOUT may keep" in finding.consequence
    assert len(findings_of(design, TransferLaw)) == 1
    after = cures(design, TransferLaw)
    assert after
    assert not any(after.values()), after
