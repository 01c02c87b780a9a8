"""Samples: draws that repeat, their statistics against closed forms and the budget, shared parts and trims."""

from pathlib import Path

import numpy as np
import pytest
from designs import board
from gain_stage import FLOATING, GAIN, LEAK, TRIM, changed, review_at

from rulecheck.analysis.budget import budget
from rulecheck.analysis.review import Review
from rulecheck.analysis.samples import draw, sampled_rows, wilson
from rulecheck.errors import AnalysisError
from rulecheck.testing import design_from

CASES = Path(__file__).parents[2] / "published" / "cases"
QUIET = (('"1 mV"\noffset', '"10 nV"\noffset'), ('"10 uV/K"', '"0 V/K"'), (', tempco_tolerance = "50 ppm/K"', ""))
PLAIN = changed(GAIN, QUIET)
ADJUSTED = changed(PLAIN, TRIM)
MIDDLE = np.sqrt(0.1)  # of 0.1 to 1 V
X = [0.1, MIDDLE, 1.0]
ROOT = '\n[requirements.root]\noutput = "Y"\nlaw = "s * (X / one) ** 0.3"\nconstants = { s = "1.2 V", one = "1 V" }\n'
NARROW = (
    ("min = 0.1, typ = 0.4, max = 0.9", "min = 0.398, typ = 0.4, max = 0.402"),
    ('{ typ = "20 pA", max = "100 pA" }', '"20 pA"'),
    ("{ min = 150, typ = 320, max = 600 }", "{ min = 300, typ = 320, max = 340 }"),
)


def samples_of(text, count, seed=1, **options):
    """Samples of a gain stage's requirement at three inputs."""
    review = review_at(text, X=X)
    return draw(review, review.design.requirements["gain"], count, seed, **options)


def test_inverting_amplifier_has_the_spread_of_its_resistors():
    """Two ratios uniform within 1 % give a gain with a standard deviation of sqrt(2/3) % (variance of a sum)."""
    found = samples_of(PLAIN, 3000)
    reading = 2 * found.conditions.values["X"]
    assert found.std() / reading == pytest.approx(0.01 * np.sqrt(2 / 3), rel=0.03)
    assert found.mean() / reading == pytest.approx(0.0, abs=5e-4)
    ends = np.abs([found.quantile(0.0), found.quantile(1.0)]) / reading
    assert (ends < 0.0203).all()
    assert (ends > 0.0185).all()
    assert not found.failed.any()


def test_share_inside():
    """The sum of two uniform deviations is within 3/4 of its limits in 15/16 of all cases (triangular distribution)."""
    found = samples_of(PLAIN.replace('reading = "1 %", absolute = "1 mV"', 'reading = "1.5 %"'), 2000)
    for share in (found.fraction_inside(), found.fraction_of_units()):
        assert (share.low <= 15 / 16).all()
        assert (share.high >= 15 / 16).all()
        assert (share.high - share.low < 0.03).all()


def test_sampled_conditions():
    """Sampled are the inputs' grid at typ ambient and supplies, and the worst nominal point."""
    review = Review(design_from(PLAIN))
    rows = sampled_rows(review, review.design.requirements["gain"])
    values = review.conditions.values
    usual = (values["ambient"] == 298.15) & (values["VP"] == 15.0) & (values["VN"] == -15.0)
    transfer = review.transfer["gain"]
    worst = np.argmax(np.abs(transfer.error) / transfer.allowed)
    assert set(rows) == {*np.flatnonzero(usual), worst}


def test_samples_agree_with_the_budget():
    """Samples of a power-law stage are inside the worst case, their deviation is the root-sum-square over sqrt(3)."""
    text = changed((CASES / "cube_root.toml").read_text() + ROOT, NARROW)
    review = review_at(text, changed((CASES / "case_parts.toml").read_text(), NARROW), X=[0.05, 0.5, 5.0])
    requirement = review.design.requirements["root"]
    found, shares = draw(review, requirement, 300, 1), budget(review, requirement)
    assert found.std() == pytest.approx(shares.rss / np.sqrt(3), rel=0.1)
    assert (np.abs(found.error - shares.error) <= shares.worst_case).all()


def test_a_seed_repeats_bit_for_bit():
    """The same seed gives the same outputs, another seed others; more samples begin with the same draws."""
    once, again, other = samples_of(PLAIN, 40), samples_of(PLAIN, 40), samples_of(PLAIN, 40, seed=2)
    assert np.array_equal(once.output, again.output)
    assert np.abs(once.output - other.output).max() > 1e-3
    assert samples_of(PLAIN, 60).output[:40] == pytest.approx(once.output, rel=1e-8)


def test_batches_do_not_matter():
    """Ever so small batches give the same samples, trims included."""
    done = []
    split = samples_of(ADJUSTED, 30, most_bytes=2**15, progress=done.append)
    assert len(done) > 5
    assert done == sorted(done)
    assert done[-1] == 30
    assert split.output == pytest.approx(samples_of(ADJUSTED, 30).output, rel=1e-7)


def test_progress_may_end_the_work():
    """What the progress raises comes out, with no more batches solved."""
    seen = []

    def stop(done):
        seen.append(done)
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        samples_of(PLAIN, 50, most_bytes=2**15, progress=stop)
    assert len(seen) == 1


def test_resistors_of_a_network_share_their_tolerance():
    """With a ratio tolerance of 0.01 % the common 1 % leaves the gain alone."""
    found = samples_of(PLAIN.replace("[parts]", '[packages.N1]\nratio_tolerance = "0.01 %"\n[parts]'), 300)
    assert found.std() / (2 * found.conditions.values["X"]) == pytest.approx(1e-4 / np.sqrt(3), rel=0.1)


def test_matched_transistors_share_their_process():
    """A log ratio of a matched pair spreads by its mismatch, that of single ones by the whole spread of V_BE."""
    law = '\n[requirements.log]\noutput = "Y0"\nlaw = "-0.41 * one * log(X0 / VREF)"\nconstants = { one = "1 V" }\n'
    pair = '\n[matching.pair]\nparts = ["Q1_0", "Q2_0"]\nvbe_mismatch = "2 mV"\nvbe_mismatch_drift = "0 V/K"\n'
    for text, wanted in ((law + pair, 16 * 2e-3 / np.sqrt(3)), (law, 16 * 20e-3 * np.sqrt(2 / 3))):
        review = review_at(board(1) + text, X0=[1.0, 10.0])
        found = draw(review, review.design.requirements["log"], 300, 1)
        assert found.std() == pytest.approx(wanted, rel=0.1)


def test_trims_are_set_in_every_sample():
    """A trim nulls the error in the middle of every sample, and with it the resistors' tolerances everywhere."""
    loose, found = samples_of(PLAIN, 60), samples_of(ADJUSTED, 60)
    reading = 2 * found.conditions.values["X"]
    assert np.abs(loose.error / reading).max() > 0.01
    assert np.abs(found.error / reading).max() < 2e-4
    assert np.abs(found.error[:, 1]).max() < 1e-7


def test_a_supply_is_drawn_where_no_condition_moves_it():
    """At the nominal supply its tolerance is drawn; a sampled corner keeps the supply that it states."""
    text = changed(PLAIN, [*LEAK, (', tolerance = "1 %"', "")])
    review = review_at(text, X=[0.5, 0.5], VP=[15.0, 14.25])
    found = draw(review, review.design.requirements["gain"], 200, 3, rows=np.arange(2))
    assert found.std()[0] == pytest.approx(0.75 / 50 / np.sqrt(3), rel=0.1)
    assert found.std()[1] < 1e-4
    assert np.isnan(found.over_review(found.std(), 4)).tolist() == [False, False, True, True]


@pytest.mark.parametrize(
    ("hits", "count", "low", "high"),
    [(81, 263, 0.2553, 0.3662), (15, 148, 0.0624, 0.1605), (0, 20, 0.0, 0.1611), (1, 29, 0.0061, 0.1718)],
)
def test_intervals_of_a_share(hits, count, low, high):
    """Wilson's score interval of published examples (R. G. Newcombe, Statistics in Medicine 17, 1998, table I)."""
    found = wilson(hits, count)
    assert (float(found.low), float(found.high)) == pytest.approx((low, high), abs=6e-5)


def test_a_sample_without_an_operating_point_is_outside():
    """What has no solution counts as failed and outside, and is left out of mean and deviation."""
    review = review_at(changed(PLAIN, FLOATING), X=[0.5])
    requirement = review.design.requirements["gain"]
    with pytest.raises(AnalysisError):
        sampled_rows(review, requirement)
    found = draw(review, requirement, 3, 1, rows=np.array([0]))
    assert found.failed.tolist() == [3]
    assert found.fraction_inside().value.tolist() == [0.0]
    assert np.isnan(found.mean()).all()
