"""Reads a design file into plain numbers, just enough of the format for the oracle."""

from __future__ import annotations

import math
import re

import tomli

PREFIX = {"f": 1e-15, "p": 1e-12, "n": 1e-9, "u": 1e-6, "m": 1e-3, "k": 1e3, "M": 1e6, "G": 1e9}
BASE = {
    "": 1.0, "V": 1.0, "A": 1.0, "ohm": 1.0, "F": 1.0, "Hz": 1.0, "s": 1.0, "K": 1.0, "K/W": 1.0, "V/K": 1.0,
    "V/s": 1.0, "V/us": 1e6, "ppm/K": 1e-6, "1/K": 1.0, "%": 1e-2, "ppm": 1e-6, "W": 1.0,
}  # fmt: skip
NUMBER = re.compile(r"([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*)")


def number(text):
    """One quantity in SI units."""
    if not isinstance(text, str):
        return text
    figure, unit = NUMBER.fullmatch(text.strip()).groups()
    value = float(figure)
    if unit == "degC":
        return value + 273.15
    if unit == "dB":
        return 10 ** (value / 20)
    if unit in BASE:
        return value * BASE[unit]
    return value * PREFIX[unit[0]] * BASE[unit[1:]]


def nominal(entry):
    """The nominal of a spread or a plain quantity: typ, else the middle, else the one that is given."""
    if not isinstance(entry, dict):
        return number(entry)
    if "typ" in entry:
        return number(entry["typ"])
    ends = [number(entry[key]) for key in ("min", "max") if key in entry]
    return sum(ends) / len(ends)


def read(text, catalogue_text=None):
    """The tables of a design, with the parameters of each part's model filled into the part."""
    data = tomli.loads(text)
    models = tomli.loads(catalogue_text)["models"] if catalogue_text else {}
    parts = {}
    for ref, part in data.get("parts", {}).items():
        if part.get("mounted", True):
            parts[ref] = {**models.get(part.get("model"), {}), **part, "package": part.get("package", ref)}
    return {**data, "parts": parts}


DEFAULTS = {
    "emission_coefficient": 1.0,
    "reverse_beta": 2.0,
    "beta_exponent": 1.5,
    "early_voltage": math.inf,
    "knee_current": math.inf,
    "leakage_emission_coefficient": 2.0,
    "bandgap": 1.12,
    "temperature_exponent": 3.0,
    "leakage_doubling": 10.0,
    "second_pole": math.inf,
    "dark_current_doubling": 10.0,
    "shunt_resistance": math.inf,
}


class Parameters:
    """Nominal parameters of one part by name, with the defaults of the model where they are not given."""

    def __init__(self, table):
        self.table = table

    def __getattr__(self, name):
        """The nominal value; zero where nothing is said and the model knows no other default."""
        if name in self.table:
            return nominal(self.table[name])
        return DEFAULTS.get(name, 0.0)

    def end(self, name, end):
        """The nominal of one end of a two-sided limit such as a headroom."""
        return nominal(self.table[name][end])
