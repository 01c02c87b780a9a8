"""Errors of bias current at the output of an amplifier."""

from __future__ import annotations

import pytest

from .builder import amplifier, figures, resistor, voltage_input

LAW = {
    "output": "OUT",
    "law": "gain * VIN",
    "constants": {"gain": -100.0},
    "range": {"VIN": ["-10 mV", "10 mV"]},
    "accuracy": {"absolute": "1 V"},
}


def error_figures(r1, r2, compensated, bias, offset):
    """Figures of an inverting amplifier with or without the resistor that compensates bias current."""
    plus = "RPN" if compensated else "GND"
    parts = {
        "R1": resistor("VIN", "SUM", r1),
        "R2": resistor("SUM", "OUT", r2),
        "U1": amplifier(plus, "SUM", "OUT", bias_current=bias, offset_current=offset),
    }
    if compensated:
        parts["RP"] = resistor("RPN", "GND", r1 * r2 / (r1 + r2))
    nets = {"VIN": voltage_input(-0.01, 0.01)}
    return figures(parts, nets, [{"VIN": 0.0}], requirements={"gain": LAW})


def test_bias_current_without_compensation():
    """80 nA through 2.2 Mohm make 176 mV of output error.

    S. Franco, Example 5.1 (p. 219), companion: printed 175 mV, since 1 mV is subtracted by hand.
    """
    found = error_figures(22e3, 2.2e6, False, 80e-9, 20e-9)
    assert found["nets"]["OUT"][0] == pytest.approx(0.176, rel=1e-5)
    assert found["requirements"]["gain"]["error"][0] == pytest.approx(0.176, rel=1e-5)


@pytest.mark.parametrize(
    ("r1", "r2", "bias", "offset", "error"),
    [
        (22e3, 2.2e6, 80e-9, 20e-9, 44e-3),
        (2.2e3, 220e3, 80e-9, 20e-9, 4.4e-3),
        (2.2e3, 220e3, 0.0, 3e-9, 0.66e-3),
    ],
)
def test_offset_current_with_compensation(r1, r2, bias, offset, error):
    """With equal resistances at both inputs only the offset current counts: 44, 4.4 and 0.66 mV.

    S. Franco, Example 5.1 (p. 219), companion: 44 mV, 4.4 mV, 0.7 mV.
    """
    found = error_figures(r1, r2, True, bias, offset)
    assert found["nets"]["OUT"][0] == pytest.approx(0.0, abs=1e-6)
    budget = found["requirements"]["gain"]["budget"]
    shares = [entry["contribution"][0] for entry in budget if entry["parameter"].endswith("U1.offset_current")]
    assert [abs(share) for share in shares] == pytest.approx([error], rel=1e-4)
