"""Natural frequencies: those of the circuit, and none that rounding makes up."""

import numpy as np
import pytest
import scipy.linalg
from designs import HEAD, PINS

from rulecheck.analysis.conditions import from_points
from rulecheck.analysis.review import Review
from rulecheck.testing import design_from

TWO_SIDED = (
    HEAD
    + f"""
VIN = {{ role = "input", drive = "voltage", range = ["-10 V", "10 V"], cutoff = "10 mV" }}
VOUT = {{ role = "output", load = "10 kohm" }}
[parts]
R1 = {{ kind = "resistor", value = "10 kohm", pins = ["VIN", "S"] }}
R2 = {{ kind = "resistor", value = "1 kohm", pins = ["O", "VOUT"] }}
C1 = {{ kind = "capacitor", value = "470 pF", pins = ["S", "O"] }}
Q1 = {{ kind = "npn", model = "monolithic-pair-npn-tight", pins = {{ C = "S", B = "GND", E = "VOUT" }} }}
U1 = {{ kind = "op-amp", pins = {{ "IN+" = "GND", IN- = "S", OUT = "O", {PINS} }}, open_loop_gain = 4e5, gain_bandwidth = "3 MHz", second_pole = "12 MHz", bias_current = "10 pA", bias_current_doubling = "10 K", input_headroom = {{ low = "-0.1 V", high = "-0.1 V" }}, output_headroom = {{ low = "20 mV", high = "20 mV" }}, supply_current = "1 mA" }}
Q2 = {{ kind = "pnp", pins = {{ C = "S", B = "GND", E = "VOUT" }}, saturation_current = "15 fA", forward_beta = 400, early_voltage = "150 V", emitter_capacitance = "20 pF", collector_capacitance = "8 pF" }}
"""
)


@pytest.mark.parametrize("vin", [0.0, 1e-6, -1e-3, 1.0])
def test_rightmost_agrees_with_the_generalised_eigenvalues(vin):
    """SciPy's generalised eigenvalues of the same pencil: none in the right half-plane, the slowest to 1e-3."""
    design = design_from(TWO_SIDED)
    review = Review(design, conditions=from_points(design, {"VIN": np.array([vin])}))
    system = review.loops.islands[0].system
    s = scipy.linalg.eig(-system.conductance[0], system.capacitance[0], right=False)
    finite = s[np.isfinite(s) & (np.abs(s) < 1e11)]
    assert review.loops.rightmost[0] == pytest.approx(finite.real.max(), rel=1e-3)
    assert review.loops.rightmost[0] < 0
