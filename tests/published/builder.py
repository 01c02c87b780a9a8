"""Small designs for checks: parts as plain tables, the design file of them, and the program's figures."""

from __future__ import annotations

import math

from rulecheck.testing import figures_of

BOLTZMANN = 1.380649e-23  # J/K, exact (SI 2019)
CHARGE = 1.602176634e-19  # C, exact (SI 2019)
CATALOGUE = """
[models.ideal-npn]
kind = "npn"
saturation_current = "10 fA"
forward_beta = 1e9

[models.ideal-pnp]
kind = "pnp"
saturation_current = "10 fA"
forward_beta = 1e9

[models.ideal-diode]
kind = "diode"
saturation_current = "10 fA"

[models.ideal-amp]
kind = "op-amp"
open_loop_gain = 1e9
gain_bandwidth = "1 MHz"
input_headroom = { low = "1 V", high = "1 V" }
output_headroom = { low = "10 mV", high = "10 mV" }
"""
UNITS = {
    "saturation_current": "A", "gain_bandwidth": "Hz", "second_pole": "Hz", "bulk_emitter_resistance": "ohm",
    "output_resistance": "ohm", "series_resistance": "ohm", "bandgap": "V", "vbe_offset": "V", "offset": "V",
    "bias_current": "A", "offset_current": "A", "input_capacitance": "F", "common_mode_capacitance": "F",
    "supply_current": "A", "tempco": "1/K", "voltage": "V", "load": "ohm", "source_resistance": "ohm",
    "theta_ja": "K/W", "theta": "K/W",
}  # fmt: skip


def thermal_voltage(temperature):
    """The thermal voltage kT/q."""
    return BOLTZMANN * temperature / CHARGE


def temperature_of(thermal_voltage):
    """The temperature at which kT/q has the value that a source rounds it to."""
    return thermal_voltage * CHARGE / BOLTZMANN


def saturation(current, temperature, bandgap=1.12, exponent=3.0):
    """The saturation current at 25 degC of a junction that has `current` at another temperature.

    The law is ``IS(T) = IS(T0)(T/T0)^3 exp((Eg/k)(1/T0 - 1/T))`` (electronics.stackexchange 615312).
    """
    growth = (temperature / 298.15) ** exponent * math.exp(
        CHARGE * bandgap / BOLTZMANN * (1 / 298.15 - 1 / temperature)
    )
    return current / growth


def resistor(a, b, value, **more):
    """A resistor between two nets [ohm]."""
    return {"kind": "resistor", "value": f"{value!r} ohm", "pins": [a, b], **quantities(more)}


def capacitor(a, b, value):
    """A capacitor between two nets [F]."""
    return {"kind": "capacitor", "value": f"{value!r} F", "pins": [a, b]}


def transistor(c, b, e, kind="npn", **more):
    """An ideal transistor, but for what is given."""
    return {"kind": kind, "model": f"ideal-{kind}", "pins": {"C": c, "B": b, "E": e}, **quantities(more)}


def diode(a, k, **more):
    """An ideal diode, but for what is given."""
    return {"kind": "diode", "model": "ideal-diode", "pins": {"A": a, "K": k}, **quantities(more)}


def amplifier(plus, minus, out, high="VP", low="VN", **more):
    """An amplifier of 1e9 and 1 MHz with one pole, but for what is given."""
    pins = {"IN+": plus, "IN-": minus, "OUT": out, "V+": high, "V-": low}
    return {"kind": "op-amp", "model": "ideal-amp", "pins": pins, **quantities(more)}


def current_source(out_of, into, value):
    """A source that draws from one net and drives into another [A]."""
    return {"kind": "current-source", "value": f"{value!r} A", "pins": {"P": into, "N": out_of}}


def voltage_input(low, high, **more):
    """An input net driven by a voltage."""
    return {"role": "input", "drive": "voltage", "range": [f"{low!r} V", f"{high!r} V"], **quantities(more)}


def current_input(low, high, **more):
    """An input net driven by a current."""
    return {"role": "input", "drive": "current", "range": [f"{low!r} A", f"{high!r} A"], **quantities(more)}


def supply(voltage):
    """A supply net."""
    return {"role": "supply", "voltage": f"{voltage!r} V"}


def reference(voltage):
    """A reference net."""
    return {"role": "reference", "voltage": f"{voltage!r} V"}


def quantities(table):
    """Numbers of known quantities with their unit."""
    return {
        key: f"{value!r} {UNITS[key]}" if key in UNITS and isinstance(value, int | float) else value
        for key, value in table.items()
    }


def toml(value):
    """A value as TOML."""
    if isinstance(value, dict):
        return "{ " + ", ".join(f'"{key}" = {toml(entry)}' for key, entry in value.items()) + " }"
    if isinstance(value, list):
        return "[" + ", ".join(toml(entry) for entry in value) + "]"
    if isinstance(value, str):
        return f'"{value}"'
    return str(value).lower() if isinstance(value, bool) else repr(value)


def text_of(parts, nets, **tables):
    """A design file; supplies of 15 V, where the nets do not say otherwise."""
    nets = {"GND": {"role": "ground"}, "VP": supply(15.0), "VN": supply(-15.0), **nets}
    lines = ["format = 1", 'catalogues = ["parts.toml"]', "[design]", 'title = "check"']
    for name, table in {"nets": nets, "parts": parts, **tables}.items():
        for header, keys in [(f"[[{name}]]", t) for t in table] if isinstance(table, list) else [(f"[{name}]", table)]:
            lines += [header, *(f'"{key}" = {toml(entry)}' for key, entry in keys.items())]
    return "\n".join(lines) + "\n"


def figures(parts, nets, points=({},), **tables):
    """The program's figures of a small design at some points; none may have failed to converge."""
    found = figures_of(text_of(parts, nets, **tables), list(points), CATALOGUE)
    assert all(found["converged"]), found["converged"]
    return found


def loop(found, ref="U1"):
    """Figures of one amplifier's loop at the first point."""
    return {key: values[0] for key, values in found["loops"][ref].items()}
