"""An inverting amplifier of gain 2 with spreads, a trimmed one, and what tests of budget and samples do with it."""

import numpy as np
from designs import HEAD, PINS

from rulecheck.analysis.conditions import from_points
from rulecheck.analysis.review import Review
from rulecheck.testing import design_from

RESISTOR = 'kind = "resistor", tolerance = "1 %", tempco_tolerance = "50 ppm/K", package = "N1"'
INPUTS = 'offset_voltage = "1 mV", offset_drift = "10 uV/K", bias_current = "0 A", offset_current = "0 A"'
GAIN = f"""{HEAD}
X = {{ role = "input", drive = "voltage", range = ["0.1 V", "1 V"] }}
Y = {{ role = "output" }}
[parts]
R1 = {{ {RESISTOR}, value = "10 kohm", pins = ["X", "S"] }}
R2 = {{ {RESISTOR}, value = "20 kohm", pins = ["S", "Y"] }}

[parts.U1]
kind = "op-amp"
model = "bifet-precision"
pins = {{ "IN+" = "GND", IN- = "S", OUT = "Y", {PINS} }}
{INPUTS.replace(", ", chr(10))}

[requirements.gain]
output = "Y"
law = "-2 * X"
accuracy = {{ reading = "1 %", absolute = "1 mV" }}
"""
POT = 'kind = "potentiometer", value = "1 kohm", tolerance = "10 %", adjusts = "gain"'
TRIM = (
    ('["S", "Y"] }', '["S", "W"] }\nRV1 = { ' + POT + ', pins = { END1 = "W", WIPER = "Y", END2 = "Y" } }'),
    ('"20 kohm"', '"19.5 kohm"'),
)
LEAK = (('["X", "S"] }', '["X", "S"] }\nR3 = { kind = "resistor", value = "1 Mohm", pins = ["VP", "S"] }'),)
"""A megohm from the positive supply to the summing node."""
FLOATING = (
    (
        '["X", "S"] }',
        '["X", "S"] }\nC1 = { kind = "capacitor", value = "1 nF", pins = ["S", "Z"] }'
        '\nR9 = { kind = "resistor", value = "1 ohm", pins = ["Z", "Z2"] }',
    ),
)
"""Two nets that hang on a capacitor: no operating point."""


def changed(text, changes):
    """A text with all of some replacements made."""
    for old, new in changes:
        text = text.replace(old, new)
    return text


def review_at(text, catalogue=None, **points):
    """A review of a design at points, by name; its trims are set."""
    return at(Review(design_from(text, catalogue)), **points)


def at(review, **points):
    """The same review at points, by name."""
    columns = {name: np.array(values) for name, values in points.items()}
    return Review(review.design, from_points(review.design, columns, review.typical))
