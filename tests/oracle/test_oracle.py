"""The oracle itself against the numeric cases, which were made by another solver of the same equations."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from .equations import solve
from .small_signal import Linear

CASES = Path(__file__).parents[1] / "published" / "cases"
CATALOGUE = (CASES / "case_parts.toml").read_text("utf-8")
STATES = {0: "linear", 1: "high", -1: "low"}


def records(name):
    """Records of a file of expected figures."""
    return json.loads((CASES / f"{name}.expected.json").read_text("utf-8"))


def text(name):
    """Text of a case."""
    return (CASES / f"{name}.toml").read_text("utf-8")


@pytest.mark.parametrize("name", ["log_stage", "cube_root", "current_ratio", "heated_pair"])
def test_operating_points(name):
    """The oracle has the nets, states and temperatures of every record."""
    start = None
    for record in records(name):
        point = solve(text(name), record["point"], CATALOGUE, start=start)
        start = point.x
        for net, wanted in record["nets"].items():
            assert point.voltage(net) == pytest.approx(wanted, abs=1e-8 * max(abs(wanted), 1e-1))
        assert point.states() == {ref: STATES[record["state"].get(ref, 0)] for ref in point.states()}
        for ref, wanted in record.get("temperature", {}).items():
            assert point.temperatures[ref] == pytest.approx(wanted, abs=1e-4)


@pytest.mark.parametrize("name", ["log_stage", "cube_root", "current_ratio"])
def test_small_signal(name):
    """The oracle has the natural frequencies and margins; the cases state return ratios at 0.1 Hz."""
    for record in records(name)[::4]:
        linear = Linear(solve(text(name), record["point"], CATALOGUE))
        assert linear.rightmost() == pytest.approx(record["rightmost"], rel=1e-7)
        assert linear.least_damping() == pytest.approx(record["least_damping"], abs=1e-7)
        for ref, wanted in record["loops"].items():
            found = linear.margins(ref)
            assert found["phase_margin"] == pytest.approx(wanted["phase_margin"], abs=1e-5)
            assert found["crossover"] == pytest.approx(wanted["crossover"], rel=1e-7)
            assert found["modulus_margin"] == pytest.approx(wanted["modulus_margin"], abs=1e-4)
            slow = linear.return_ratio(ref, 0.1)[0].real
            assert slow == pytest.approx(wanted["dc_return_ratio"], rel=1e-6)


def test_faults():
    """With clamps in place the oracle has the nets, states and clamp currents of every fault."""
    for record in records("faults"):
        point = solve(text(record["design"]), record["point"], CATALOGUE, clamps=True)
        for net, wanted in record["nets"].items():
            assert point.voltage(net) == pytest.approx(wanted, abs=1e-9)
        assert point.states() == record["state"]
        conducting = {name: i for name, i in point.clamp_currents().items() if abs(i) > 1e-9}
        assert conducting == pytest.approx(record["clamp_currents"], rel=1e-6)
