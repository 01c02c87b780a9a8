"""The JSON Schema of design files: takes sound ones, refuses slips, describes every key."""

from __future__ import annotations

import copy
import datetime as dt
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import jsonschema  # type: ignore[import-untyped]
import pytest
import tomli

from rulecheck.design.keypath import split_key
from rulecheck.design.parts import PART_TABLES
from rulecheck.design.schema import DIALECT, json_schema

FILES = sorted((Path(__file__).parents[2] / "published" / "cases").glob("*.toml"))
DESIGNS = [file for file in FILES if "[models." not in file.read_text()]
EVERYTHING = """
format = 1
catalogues = ["house.toml"]
[design]
title = "x"
[environment]
ambient = { min = "-10 degC", typ = "25 degC", max = "55 degC" }
board_insulation = "1 Tohm"
[nets]
GND = { role = "ground" }
VP = { role = "supply", voltage = { min = "14 V", max = "16 V" }, tempco = "-20 ppm/K" }
VR = { role = "reference", voltage = "5 V", tolerance = "0.1 %", from = "VP" }
VIN = { role = "input", drive = "voltage", range = ["-1 V", "1 V"], spacing = "linear", cutoff = "1 mV" }
IIN = { role = "input", drive = "current", range = ["1 nA", "1 mA"], compliance = "5 V" }
OUT = { role = "output", load = "10 kohm", load_capacitance = "100 pF" }
[parts]
R1 = { kind = "resistor", value = "4K7", tempco = "-3300 ppm/K", pins = ["VIN", "OUT"], mounted = false }
RV = { kind = "potentiometer", value = "10k0", position = { max = 0.5 }, pins = { WIPER = "OUT" } }
Q1 = { kind = "npn", model = "m", forward_beta = 200, monolithic = true, log_range = ["1 nA", "1 mA"], pins = {} }
U1 = { kind = "op-amp", open_loop_gain = "100 dB", input_headroom = { low = "-0.1 V", high = "1 V" }, pins = {} }
V1 = { kind = "voltage-source", value = "-2 V", pins = { P = "OUT", N = "GND" }, from = "VP" }
I1 = { kind = "current-source", value = "2 uA", pins = ["OUT", "GND"], compliance = "1 V" }
PD = { kind = "photodiode", photocurrent = ["0 A", "1 mA"], pins = { A = "OUT", K = "GND" } }
J1 = { kind = "connector", pins = { "1" = "OUT", "2" = "GND" } }
[packages.M1]
die = "separate"
[[thermal_links]]
between = ["M1", "R1"]
theta = "60 K/W"
[matching.pair]
parts = ["Q1", "Q2"]
vbe_mismatch = "50 uV"
[requirements.root]
output = "OUT"
law = "VIN * k"
constants = { k = 0.5, full_scale = "10 V" }
accuracy = { reading = "1 %" }
range = { VIN = ["0 V", "1 V"] }
bandwidth = { min = "1 kHz", at = { VIN = "0.1 V", RV = 0.5 } }
noise = { max = "1 mV", bandwidth = ["0.1 Hz", "10 kHz"] }
[[concessions]]
rule = "noise"
reason = "x"
expires = 2027-06-30
[rules.noise]
enabled = false
severity = "minor"
limit = "3 mV"
"""


def as_json(value: Any) -> Any:
    """Parsed TOML as JSON has it: dates are strings."""
    if isinstance(value, dict):
        return {key: as_json(inner) for key, inner in value.items()}
    if isinstance(value, list):
        return [as_json(inner) for inner in value]
    return value.isoformat() if isinstance(value, dt.date) else value


@pytest.fixture(scope="module")
def validator() -> jsonschema.Draft202012Validator:
    """Validator of design files, the schema itself being valid."""
    schema = json_schema()
    jsonschema.Draft202012Validator.check_schema(schema)
    return jsonschema.Draft202012Validator(schema)


def test_dialect() -> None:
    """Editors read the dialect from the schema."""
    assert json_schema()["$schema"] == DIALECT == "https://json-schema.org/draft/2020-12/schema"


@pytest.mark.parametrize("file", DESIGNS, ids=lambda file: file.stem)
def test_published_designs_are_valid(validator: jsonschema.Draft202012Validator, file: Path) -> None:
    """What loads is valid."""
    assert [error.message for error in validator.iter_errors(as_json(tomli.loads(file.read_text())))] == []


def test_every_table_is_valid(validator: jsonschema.Draft202012Validator) -> None:
    """A file with every table, kind and form of value is valid."""
    assert [error.message for error in validator.iter_errors(as_json(tomli.loads(EVERYTHING)))] == []


SLIPS: dict[str, Any] = {
    "format": 2,
    "titel": "x",
    "design.titel": "x",
    "design.title": 3,
    "environment.ambient": 25,
    "nets.GND.role": "groud",
    "nets.GND.voltage": "1 V",
    "nets.VP.voltage": "V",
    "nets.VIN.compliance": "3 V",
    "nets.VIN.drive": "volts",
    "nets.VIN.range": ["1 V"],
    "parts.R1.kind": "resitor",
    "parts.R1.vale": "1 ohm",
    "parts.R1.value": 4700,
    "parts.R1.pins": ["A"],
    "parts.R1.model": "m",
    "parts.Q1.pins.D": "A",
    "parts.Q1.forward_bata": 3,
    "parts.Q1.monolithic": "yes",
    "parts.U1.input_clamps": "rail",
    "parts.U1.input_headroom.hi": "1 V",
    "parts.RV.position.mid": 0.5,
    "packages.M1.die": "two",
    "thermal_links.0.between": ["M1"],
    "matching.pair.part": ["Q1"],
    "requirements.root.accuracy.readin": "1 %",
    "requirements.root.range.VIN": "1 V",
    "concessions.0.raeson": "x",
    "rules.noise.enabled": "no",
    "rules.noise.severity": "grave",
}


@pytest.mark.parametrize(("key", "value"), SLIPS.items(), ids=SLIPS.keys())
def test_a_slip_is_refused(validator: jsonschema.Draft202012Validator, key: str, value: object) -> None:
    """One wrong key or value makes the file invalid."""
    data = copy.deepcopy(as_json(tomli.loads(EVERYTHING)))
    *path, last = split_key(key)
    table = data
    for segment in path:
        table = table[int(segment)] if isinstance(table, list) else table[segment]
    table[last] = value
    assert not validator.is_valid(data)


@pytest.mark.parametrize("key", ["format", "nets.GND.role", "parts.R1.value", "parts.R1.kind", "concessions.0.reason"])
def test_a_missing_key_is_refused(validator: jsonschema.Draft202012Validator, key: str) -> None:
    """A file without a key that must be there is invalid."""
    data = copy.deepcopy(as_json(tomli.loads(EVERYTHING)))
    *path, last = split_key(key)
    table = data
    for segment in path:
        table = table[int(segment)] if isinstance(table, list) else table[segment]
    del table[last]
    assert not validator.is_valid(data)


def descriptions(schema: dict[str, Any]) -> Iterator[tuple[str, str]]:
    """Every key of every table with its description."""
    for key, inner in schema["properties"].items():
        yield key, inner.get("description", "")
    for name, table in schema["$defs"].items():
        for key, inner in table.get("properties", {}).items():
            yield f"{name}.{key}", inner.get("description", "")


def test_every_key_is_described() -> None:
    """An editor can say what each key is, of every kind of part."""
    schema = json_schema()
    found = dict(descriptions(schema))
    assert [key for key, words in found.items() if not words] == []
    assert {table.__name__ for table in PART_TABLES.values()} <= set(schema["$defs"])
