"""Lines of design files for the tests of bandwidth, noise and latching."""

import numpy as np
from designs import HEAD, PINS

from rulecheck.analysis.conditions import from_points
from rulecheck.analysis.review import Review
from rulecheck.testing import design_from

AMPLIFIER = """kind = "op-amp", open_loop_gain = 1e5, gain_bandwidth = "1 MHz", \
input_headroom = { low = "1 V", high = "1 V" }, output_headroom = { low = "1 V", high = "1 V" }"""
OUTPUT = 'Y = { role = "output" }\n'
VOLTAGE = 'X = { role = "input", drive = "voltage", range = ["-1 V", "1 V"] }\n' + OUTPUT
CURRENT = 'X = { role = "input", drive = "current", range = ["1 uA", "100 uA"] }\n' + OUTPUT


def resistor(ref, a, b, ohm, more=""):
    """A resistor."""
    return f'{ref} = {{ kind = "resistor", value = "{ohm!r} ohm"{more}, pins = ["{a}", "{b}"] }}\n'


def capacitor(ref, a, b, farad):
    """A capacitor."""
    return f'{ref} = {{ kind = "capacitor", value = "{farad!r} F", pins = ["{a}", "{b}"] }}\n'


def diode(ref, anode, cathode, more=""):
    """A diode of 10 fA."""
    figures = f'kind = "diode", saturation_current = "10 fA"{more}'
    return f'{ref} = {{ {figures}, pins = {{ A = "{anode}", K = "{cathode}" }} }}\n'


def transistor(ref, collector, base, emitter, more=""):
    """A transistor of the shipped catalogue."""
    pins = f'pins = {{ C = "{collector}", B = "{base}", E = "{emitter}" }}'
    return f'{ref} = {{ kind = "npn", model = "monolithic-pair-npn"{more}, {pins} }}\n'


def photodiode(ref, anode, cathode, more=""):
    """A photodiode of 1 nA in the dark."""
    figures = f'kind = "photodiode", photocurrent = ["1 uA", "1 mA"], dark_current = "1 nA"{more}'
    return f'{ref} = {{ {figures}, pins = {{ A = "{anode}", K = "{cathode}" }} }}\n'


def amplifier(ref, plus, minus, out, more=""):
    """An amplifier of 1e5 and 1 MHz."""
    return f'{ref} = {{ {AMPLIFIER}{more}, pins = {{ "IN+" = "{plus}", IN- = "{minus}", OUT = "{out}", {PINS} }} }}\n'


def review_of(nets, *parts):
    """The review of a small design."""
    return Review(design_from(f"{HEAD}{nets}[parts]\n{''.join(parts)}"))


def solved(nets, *parts, **columns):
    """Operating points of a small design; `columns` are values of its conditions."""
    review = review_of(nets, *parts)
    return review.solve(from_points(review.design, {n: np.asarray(v) for n, v in columns.items()}))
