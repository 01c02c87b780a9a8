"""``--samples`` and ``--seed``: statistics of the error in each format."""

import csv
import io
import math

import pytest

from .schemas import valid_figures, valid_report

# The output follows the input through a divider of a half. At 2 V the error is 1 V times the deviation of the ratio,
# and R2 alone deviates: d(ratio) = a/4 for R2 = 1 kohm (1 + a), a uniform within ± 4 %.
HALF = """\
format = 1
[design]
title = "Half"
[nets]
GND = { role = "ground" }
VIN = { role = "input", drive = "voltage", range = ["1 V", "2 V"] }
VOUT = { role = "output" }
[parts]
R1 = { kind = "resistor", value = "1 kohm", tolerance = "0 %", tempco = "0 ppm/K", pins = ["VIN", "VOUT"] }
R2 = { kind = "resistor", value = "1 kohm", tolerance = "4 %", tempco = "0 ppm/K", pins = ["VOUT", "GND"] }
[requirements.half]
output = "VOUT"
law = "VIN / two"
constants = { two = 2.0 }
accuracy = { reading = "1 %" }
"""


@pytest.fixture
def half(folder):
    """The divider in the working folder."""
    (folder / "half.toml").write_text(HALF)
    (folder / "points.csv").write_text("VIN,ambient\n2 V,25 degC\n1 V,55 degC\n")
    return "half.toml"


def sampled(run, *arguments):
    """Statistics of the requirement."""
    status, out, err = run("figures", *arguments, "--as", "json")
    assert (status, err) == (0, "")
    return valid_figures(out)["designs"][0]["requirements"]["half"]["samples"]


def test_statistics_are_those_of_the_uniform_draws(run, half):
    """R2 uniform in ±4 %: std 0.04/(4√3)·2 V, half the samples within ±1 % of the reading (a within ±2 %)."""
    found = sampled(run, half, "--points", "points.csv", "--samples", "4000")
    assert found["std"][0] == pytest.approx(2 * 0.04 / 4 / math.sqrt(3), rel=0.05)
    assert found["mean"][0] == pytest.approx(0.0, abs=1e-3)
    assert found["inside"][0] == pytest.approx(0.5, abs=0.03)
    # Quantiles of a uniform deviation: a = ∓ 0.04 · 0.99 at 0.5 % and 99.5 %; the ratio is (1 + a)/(2 + a).
    for name, a in (("p0.5", -0.0396), ("p99.5", 0.0396)):
        assert found[name][0] == pytest.approx(2 * ((1 + a) / (2 + a) - 0.5), rel=0.02)


def test_points_that_are_asked_for_are_all_sampled(run, half):
    """Of the review grid only the inputs at typ ambient are, and the worst point; the others are null."""
    assert all(v is not None for v in sampled(run, half, "--points", "points.csv", "--samples", "5")["std"])
    grid = sampled(run, half, "--samples", "5")["std"]
    assert len([v for v in grid if v is not None]) in (21, 22)
    assert len(grid) > 22


def test_a_seed_draws_the_same_again_and_another_does_not(run, half):
    """To the last bit."""
    one, again, other = (sampled(run, half, "--samples", "20", "--seed", seed) for seed in (1, 1, 2))
    assert one == again
    assert one["mean"] != other["mean"]


def test_without_samples_there_are_none(run, half):
    """Nothing is drawn that was not asked for."""
    out = run("figures", half, "--as", "json")[1]
    assert "samples" not in valid_figures(out)["designs"][0]["requirements"]["half"]


def test_without_an_accuracy_no_share_is_inside(run, half, folder):
    """There is nothing to be inside of."""
    (folder / half).write_text(HALF.replace('accuracy = { reading = "1 %" }\n', ""))
    found = sampled(run, half, "--points", "points.csv", "--samples", "5")
    assert found["inside"] == [None, None]
    assert None not in found["std"]


def test_csv_has_a_column_a_statistic(run, half):
    """Named by the key paths of the JSON."""
    out = run("figures", half, "--points", "points.csv", "--samples", "5", "--as", "csv")[1]
    rows = list(csv.DictReader(io.StringIO(out)))
    found = sampled(run, half, "--points", "points.csv", "--samples", "5")
    for name, column in (("std", "std"), ("p0.5", '"p0.5"'), ("inside", "inside")):
        assert [float(row[f"requirements.half.samples.{column}"]) for row in rows] == found[name]


def test_the_text_says_how_many_are_inside_with_confidence(run, half):
    """With the count and the seed, so that it can be repeated."""
    out = " ".join(run("figures", half, "--samples", "50", "--seed", "9")[1].split())
    assert "samples of half: 50 drawn with seed 9;" in out
    assert "inside everywhere, " in out  # and at the worst condition
    assert "95 % confidence" in out


def test_check_takes_samples(run, half):
    """The report is complete with them."""
    status, out, _ = run("check", half, "--samples", "50", "--seed", "2", "--as", "json")
    assert status in (0, 1)
    assert valid_report(out)["designs"][0]["failures"] == []


def test_what_is_no_number_of_samples_is_refused(run, half):
    """Status 2."""
    assert run("figures", half, "--samples", "0")[0] == 2
    assert run("figures", half, "--samples", "5", "--seed", "-1")[0] == 2
