"""Samples: draws that repeat, their statistics against closed forms and the budget, shared parts and trims."""

from pathlib import Path

import numpy as np
import pytest
from designs import HEAD, PINS, board

from rulecheck.analysis.budget import budget
from rulecheck.analysis.conditions import from_points
from rulecheck.analysis.review import Review
from rulecheck.analysis.samples import draw, sampled_rows, wilson
from rulecheck.errors import AnalysisError
from rulecheck.testing import design_from

CASES = Path(__file__).parents[2] / "published" / "cases"
GAIN = (
    HEAD
    + f"""
X = {{ role = "input", drive = "voltage", range = ["0.1 V", "1 V"] }}
Y = {{ role = "output" }}
[parts]
R1 = {{ kind = "resistor", value = "10 kohm", tolerance = "1 %", package = "N1", pins = ["X", "S"] }}
R2 = {{ kind = "resistor", value = "20 kohm", tolerance = "1 %", package = "N1", pins = ["S", "Y"] }}
U1 = {{ kind = "op-amp", model = "bifet-precision", offset_voltage = "10 nV", offset_drift = "0 V/K", pins = {{ "IN+" = "GND", IN- = "S", OUT = "Y", {PINS} }} }}
[requirements.gain]
output = "Y"
law = "-2 * X"
accuracy = {{ reading = "1.5 %" }}
"""
)  # fmt: skip
TRIMMED = GAIN.replace(
    'pins = ["S", "Y"] }',
    'pins = ["S", "W"] }\nRV1 = { kind = "potentiometer", value = "1 kohm", tolerance = "10 %", adjusts = "gain",'
    ' pins = { END1 = "W", WIPER = "Y", END2 = "Y" } }',
).replace('"20 kohm"', '"19.5 kohm"')
ROOT = '\n[requirements.root]\noutput = "Y"\nlaw = "s * (X / one) ** 0.3"\nconstants = { s = "1.2 V", one = "1 V" }\n'


def samples_of(text, count, seed=1, catalogue=None, **options):
    """Review, and samples of a design's first requirement."""
    review = Review(design_from(text, catalogue))
    return review, draw(review, next(iter(review.design.requirements.values())), count, seed, **options)


def test_inverting_amplifier_has_the_spread_of_its_resistors():
    """Two ratios uniform within 1 % give a gain with a standard deviation of sqrt(2/3) % (variance of a sum)."""
    review, found = samples_of(GAIN, 4000)
    reading = 2 * found.conditions.values["X"]
    assert found.std() / reading == pytest.approx(0.01 * np.sqrt(2 / 3), rel=0.03)
    assert found.mean() / reading == pytest.approx(0.0, abs=5e-4)
    ends = np.abs([found.quantile(0.0), found.quantile(1.0)]) / reading
    assert (ends < 0.0203).all()
    assert (ends > 0.0185).all()
    # the sum of two uniform deviations is within 3/4 of its limits in 15/16 of all cases (triangular distribution)
    share = found.fraction_inside()
    assert (share.low <= 15 / 16).all()
    assert (share.high >= 15 / 16).all()
    assert found.rows.size == 22
    assert not found.failed.any()
    assert review.conditions.values["ambient"][found.rows[0]] == 298.15


def test_samples_agree_with_the_budget():
    """On a power-law stage the samples are inside the worst case, with the root-sum-square over sqrt(3) as deviation."""
    text = (CASES / "cube_root.toml").read_text().replace("min = 0.1, typ = 0.4, max = 0.9", "min = 0.398, typ = 0.4, max = 0.402")
    catalogue = (CASES / "case_parts.toml").read_text().replace('{ typ = "20 pA", max = "100 pA" }', '"20 pA"')
    catalogue = catalogue.replace("{ min = 150, typ = 320, max = 600 }", "{ min = 300, typ = 320, max = 340 }")
    review, found = samples_of(text + ROOT, 300, catalogue=catalogue)
    shares = budget(review, review.design.requirements["root"])
    rows = found.rows
    assert found.std() == pytest.approx(shares.rss[rows] / np.sqrt(3), rel=0.1)
    assert (np.abs(found.error - shares.error[rows]) <= shares.worst_case[rows]).all()


def test_a_seed_repeats_bit_for_bit():
    """The same seed gives the same outputs, another seed others; more samples begin with the same draws."""
    _, once = samples_of(GAIN, 40)
    _, again = samples_of(GAIN, 40)
    _, other = samples_of(GAIN, 40, seed=2)
    _, more = samples_of(GAIN, 60)
    assert np.array_equal(once.output, again.output)
    assert np.abs(once.output - other.output).max() > 1e-3
    assert more.output[:40] == pytest.approx(once.output, rel=1e-8)


def test_batches_do_not_matter():
    """Ever so small batches give the same samples, trims included."""
    done = []
    _, whole = samples_of(TRIMMED, 30)
    _, split = samples_of(TRIMMED, 30, most_bytes=2**17, progress=done.append)
    assert len(done) > 5
    assert done == sorted(done)
    assert done[-1] == 30
    assert split.output == pytest.approx(whole.output, rel=1e-7)


def test_progress_may_end_the_work():
    """What the progress raises comes out, with no more batches solved."""
    seen = []

    def stop(done):
        seen.append(done)
        raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        samples_of(GAIN, 50, most_bytes=2**17, progress=stop)
    assert len(seen) == 1


def test_resistors_of_a_network_share_their_tolerance():
    """With a ratio tolerance of 0.01 % the common 1 % leaves the gain alone."""
    _, found = samples_of(GAIN.replace("[parts]", '[packages.N1]\nratio_tolerance = "0.01 %"\n[parts]'), 300)
    deviation = found.std() / (2 * found.conditions.values["X"])
    assert deviation == pytest.approx(1e-4 / np.sqrt(3), rel=0.15)


def test_matched_transistors_share_their_process():
    """A log ratio of a matched pair spreads by its mismatch, uniform, and not by V_BE of 20 mV."""
    law = '\n[requirements.log]\noutput = "Y0"\nlaw = "-0.41 * one * log(X0 / VREF)"\nconstants = { one = "1 V" }\n'
    alone = board(1).replace('offset_voltage', 'offset_voltage') + law
    pair = alone + '\n[matching.pair]\nparts = ["Q1_0", "Q2_0"]\nvbe_mismatch = "2 mV"\nvbe_mismatch_drift = "0 V/K"\n'
    _, matched = samples_of(pair, 300)
    _, unmatched = samples_of(alone, 300)
    assert np.median(matched.std()) == pytest.approx(16 * 2e-3 / np.sqrt(3), rel=0.15)
    assert np.median(unmatched.std()) == pytest.approx(16 * 20e-3 * np.sqrt(2 / 3), rel=0.15)


def test_trims_are_set_in_every_sample():
    """A trim of gain takes the resistors' tolerances out of every sample; in no sample was it at an end."""
    _, loose = samples_of(GAIN, 60)
    _, found = samples_of(TRIMMED, 60)
    reading = 2 * found.conditions.values["X"]
    assert np.abs(loose.error / reading).max() > 0.01
    assert np.abs(found.error / reading).max() < 1e-6


def test_a_supply_is_drawn_where_no_condition_moves_it():
    """At the nominal supply its tolerance is drawn; a sampled corner keeps the supply that it states."""
    text = GAIN.replace('pins = ["X", "S"] }', 'pins = ["X", "S"] }\nR3 = { kind = "resistor", value = "1 Mohm", pins = ["VP", "S"] }')
    design = design_from(text.replace('tolerance = "1 %", ', ""))
    review = Review(design, from_points(design, {"X": np.array([0.5, 0.5]), "VP": np.array([15.0, 14.25])}))
    found = draw(review, design.requirements["gain"], 200, 3, rows=np.arange(2))
    assert found.std()[0] == pytest.approx(0.75 / 50 / np.sqrt(3), rel=0.15)
    assert found.std()[1] < 1e-4
    laid = found.over_review(found.std(), 4)
    assert np.isnan(laid[2:]).all()


def test_intervals_of_a_share():
    """Wilson's score interval of published examples (R. G. Newcombe, Statistics in Medicine 17, 1998, table I)."""
    for hits, count, low, high in ((81, 263, 0.2553, 0.3662), (15, 148, 0.0624, 0.1605), (0, 20, 0.0, 0.1611), (1, 29, 0.0061, 0.1718)):
        found = wilson(hits, count)
        assert (float(found.low), float(found.high)) == pytest.approx((low, high), abs=6e-5)


def test_a_sample_without_an_operating_point_is_outside():
    """What has no solution counts as failed and outside, and is left out of mean and deviation."""
    text = GAIN.replace('pins = ["X", "S"] }', 'pins = ["X", "S"] }\nC1 = { kind = "capacitor", value = "1 nF", pins = ["S", "Z"] }\nR9 = { kind = "resistor", value = "1 ohm", pins = ["Z", "Z2"] }')
    design = design_from(text)
    review = Review(design, from_points(design, {"X": np.array([0.5])}))
    requirement = design.requirements["gain"]
    with pytest.raises(AnalysisError):
        sampled_rows(review, requirement)
    found = draw(review, requirement, 3, 1, rows=np.array([0]))
    assert found.failed.tolist() == [3]
    assert found.fraction_inside().value.tolist() == [0.0]
    assert np.isnan(found.mean()).all()
