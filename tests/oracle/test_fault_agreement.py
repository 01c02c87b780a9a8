"""The program against the oracle in faults: absent supplies, reversed and excessive inputs, floods of light.

Nets agree to 1 mV and clamp currents to 1 %, at 25 degC, where the clamps have the current stated for them.
"""

from __future__ import annotations

from pathlib import Path

import pytest

from rulecheck.testing import fault_figures_of

from .equations import solve

TESTS = Path(__file__).parents[1]
OWN, CASES = TESTS / "oracle" / "circuits", TESTS / "published" / "cases"
CATALOGUES = {OWN: OWN / "oracle_parts.toml", CASES: CASES / "case_parts.toml"}
DARK = {"VP": 0.0, "VN": 0.0}
OFF = {"V15P": 0.0, "V15N": 0.0}
SCENARIOS = {
    (OWN, "follower"): (
        {"VP": 0.0, "IN": 1.0},
        {"VN": 0.0, "IN": -1.0},
        {**DARK, "IN": 1.0},
        {**DARK, "IN": -12.0},
        {**DARK, "IN": 12.0},
        {"IN": 12.0},
        {"IN": -12.0},
    ),
    (OWN, "mirrors"): (
        {"VP": 0.0, "BIAS": 1e-3},
        {"VN": 0.0, "BIAS": 1e-3},
        {**DARK, "BIAS": 3e-3},
    ),
    (CASES, "current_ratio"): (
        {"PD1": 1e-3, "PD2": 2e-5},
        {"PD1": 2e-9, "PD2": 1e-3},
        {"V15P": 0.0, "PD1": 2e-5, "PD2": 2e-7},
        {"V15N": 0.0, "PD1": 2e-5, "PD2": 2e-7},
        {**OFF, "PD1": 2e-5, "PD2": 2e-5},
        {**OFF, "PD1": 1e-3, "PD2": 2e-7},
    ),
    (CASES, "log_stage"): (
        {"V15N": 0.0, "IN": 10.0},
        {"V15P": 0.0, "IN": 1e-3},
        {"V15N": 0.0, "IN": -10.0},
        {"V15P": 0.0, "IN": -10.0},
        {"IN": 15.0},
        {"IN": -15.0},
    ),
    (CASES, "cube_root"): (
        {"V15P": 0.0, "X": 5.0},
        {"V15N": 0.0, "X": 0.05},
        {**OFF, "VREF": 0.0, "X": 12.0},
        {**OFF, "VREF": 0.0, "X": -12.0},
        {"VREF": 0.0, "X": 0.5},
    ),
}


def compare(text, points, catalogue):
    """Assert that the program has the nets, states and clamp currents of the oracle at every point."""
    points = [{"ambient": 298.15, **point} for point in points]
    found = fault_figures_of(text, points, catalogue)
    for k, point in enumerate(points):
        wanted = solve(text, point, catalogue, clamps=True)
        assert found["converged"][k], point
        nets = {net: found["nets"][net][k] for net in wanted.voltages()}
        assert nets == pytest.approx(wanted.voltages(), abs=1e-3), point
        states = {ref: found["parts"][ref]["state"][k] for ref in wanted.states()}
        assert states == wanted.states(), point
        clamps = {name: values[k] for name, values in found["clamps"].items() if abs(values[k]) > 1e-9}
        conducting = {name: i for name, i in wanted.clamp_currents().items() if abs(i) > 1e-9}
        assert clamps == pytest.approx(conducting, rel=1e-2), point


@pytest.mark.parametrize(("folder", "name"), SCENARIOS, ids=[name for _, name in SCENARIOS])
def test_faults(folder, name):
    """Nets, states and clamp currents agree in every scenario."""
    text = (folder / f"{name}.toml").read_text("utf-8")
    compare(text, SCENARIOS[folder, name], CATALOGUES[folder].read_text("utf-8"))


def test_clamps_between_the_inputs():
    """Clamps between the inputs conduct when the feedback can no longer hold them together."""
    text = (OWN / "follower.toml").read_text("utf-8")
    text = text.replace('U1 = { kind = "op-amp"', 'U1 = { kind = "op-amp", input_clamps = "both"')
    assert "both" in text
    compare(text, [{"VN": 0.0, "IN": -12.0}, {**DARK, "IN": 12.0}], CATALOGUES[OWN].read_text("utf-8"))
