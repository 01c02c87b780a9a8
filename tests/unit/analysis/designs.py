"""Small designs that the tests of the analyses share."""

HEAD = """
format = 1

[design]
title = "bench"

[nets]
GND = { role = "ground" }
VP = { role = "supply", voltage = "15 V", tolerance = "5 %" }
VN = { role = "supply", voltage = "-15 V", tolerance = "5 %" }
VREF = { role = "reference", voltage = "2.5 V" }
"""

PINS = '"V+" = "VP", "V-" = "VN"'


def channel(i=0, shared_package=False, source="100 kohm"):
    """Nets and parts of a log-ratio channel: X{i} against VREF, out at Y{i}."""
    package = f'package = "UP{i // 2}", ' if shared_package else ""
    nets = f"""
X{i} = {{ role = "input", drive = "voltage", range = ["0.1 V", "10 V"] }}
Y{i} = {{ role = "output", load = "10 kohm" }}
"""
    parts = f"""
R1_{i} = {{ kind = "resistor", value = "{source}", pins = ["X{i}", "S{i}"] }}
R2_{i} = {{ kind = "resistor", value = "100 kohm", pins = ["VREF", "T{i}"] }}
Q1_{i} = {{ kind = "npn", model = "monolithic-pair-npn", package = "M{i}", pins = {{ C = "S{i}", B = "B{i}", E = "E{i}" }} }}
Q2_{i} = {{ kind = "npn", model = "monolithic-pair-npn", package = "M{i}", pins = {{ C = "T{i}", B = "GND", E = "E{i}" }} }}
U1_{i} = {{ kind = "op-amp", model = "bifet-precision", {package}pins = {{ "IN+" = "GND", IN- = "S{i}", OUT = "O{i}", {PINS} }} }}
U2_{i} = {{ kind = "op-amp", model = "bifet-precision", {package}pins = {{ "IN+" = "GND", IN- = "T{i}", OUT = "Y{i}", {PINS} }} }}
R3_{i} = {{ kind = "resistor", value = "4.7 kohm", pins = ["O{i}", "E{i}"] }}
C1_{i} = {{ kind = "capacitor", value = "1 nF", pins = ["O{i}", "S{i}"] }}
C2_{i} = {{ kind = "capacitor", value = "100 pF", pins = ["Y{i}", "T{i}"] }}
R4_{i} = {{ kind = "resistor", value = "15 kohm", pins = ["Y{i}", "B{i}"] }}
R5_{i} = {{ kind = "resistor", value = "1 kohm", pins = ["B{i}", "GND"] }}
"""
    return nets, parts


def board(count, **options):
    """A board of log-ratio channels."""
    channels = [channel(i, **options) for i in range(count)]
    return HEAD + "".join(nets for nets, _ in channels) + "\n[parts]\n" + "".join(parts for _, parts in channels)


SELF_BIASED = """
format = 1

[design]
title = "self-biased reference with a start-up resistor"

[nets]
GND = { role = "ground" }
VP = { role = "supply", voltage = "5 V" }

[parts]
Q1 = { kind = "npn", saturation_current = "10 fA", forward_beta = 200, pins = { C = "A", B = "A", E = "GND" } }
Q2 = { kind = "npn", saturation_current = "80 fA", forward_beta = 200, pins = { C = "P", B = "A", E = "F" } }
RE = { kind = "resistor", value = "5.6 kohm", pins = ["F", "GND"] }
Q3 = { kind = "pnp", saturation_current = "10 fA", forward_beta = 100, pins = { C = "P", B = "P", E = "VP" } }
Q4 = { kind = "pnp", saturation_current = "10 fA", forward_beta = 100, pins = { C = "A", B = "P", E = "VP" } }
RS = { kind = "resistor", value = "20 Mohm", pins = ["VP", "A"] }
"""
