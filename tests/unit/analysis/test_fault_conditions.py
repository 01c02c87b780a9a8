"""Fault scenarios: what an input must survive, and what lies between."""

from designs import HEAD, PINS

from rulecheck.analysis.conditions import fault_scenarios
from rulecheck.testing import design_from, figures_of

STAGE = (
    HEAD
    + f"""
X = {{ role = "input", drive = "voltage", range = ["0.1 V", "10 V"], survives = ["-5 V", "15 V"] }}
[parts]
R1 = {{ kind = "resistor", value = "10 kohm", pins = ["X", "S"] }}
R2 = {{ kind = "resistor", value = "10 kohm", pins = ["S", "Y"] }}
U1 = {{ kind = "op-amp", model = "bifet-precision", pins = {{ "IN+" = "GND", IN- = "S", OUT = "Y", {PINS} }} }}
CP = {{ kind = "capacitor", value = "100 nF", pins = ["VP", "GND"] }}
CN = {{ kind = "capacitor", value = "100 nF", pins = ["VN", "GND"] }}
"""
)


def test_a_slight_reversal_is_a_scenario():
    """A reversed input opens a log loop long before a junction can clamp it, so a little of it is tried too."""
    conditions = fault_scenarios(design_from(STAGE))
    values = {
        float(x) for x, words in zip(conditions.values["X"], conditions.scenario, strict=True) if "present" in words
    }
    assert values == {-5.0, -0.1, 15.0}


def test_islands_of_capacitors_alone_have_figures_of_their_own():
    """Decoupling capacitors store nothing between ideal supplies; with unlike numbers of conditions they stay apart."""
    found = figures_of(STAGE, [{"VN": -14.5}, {"VN": -15.0}, {"VP": 15.5, "VN": -15.0}])
    assert found["converged"] == [True] * 3
    assert len(found["natural_frequencies"]["rightmost"]) == 3
