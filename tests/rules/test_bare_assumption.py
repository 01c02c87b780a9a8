"""Data left out. What is left out is what the texts below leave out; the shipped models state nearly all."""

import pytest
from rulecheck_rules.bare_assumption import RESTS_ON, BareAssumption

from rulecheck.api import Severity
from rulecheck.design.parameters import AmplifierParameters, DiodeParameters, TransistorParameters
from rulecheck.design.parts import PART_TABLES
from rulecheck.review.registry import installed_registry
from rulecheck.testing import assert_clean, assert_finds, design_from, findings_of

STAGE = """
format = 1
catalogues = ["own.toml"]
[design]
title = "One log stage"
[nets]
GND = { role = "ground" }
V9P = { role = "supply", voltage = "9 V" }
V9N = { role = "supply", voltage = "-9 V" }
VIN = { role = "input", drive = "voltage", range = ["0.1 V", "5 V"] }
VOUT = { role = "output" }
[parts]
R1 = { kind = "resistor", value = "10 kohm", power = "0.1 W", pins = ["VIN", "S"] }
Q1 = { kind = "npn", model = "bare-npn", pins = { C = "S", B = "GND", E = "VOUT" } }
U1 = { kind = "op-amp", model = "bifet-precision", pins = { "IN+" = "GND", IN- = "S", OUT = "VOUT", "V+" = "V9P", V- = "V9N" } }
"""
STATED = {
    "early_voltage": "100 V", "bulk_emitter_resistance": "1 ohm", "emitter_base_breakdown": "6 V",
    "collector_emitter_breakdown": "40 V", "collector_current": "20 mA", "emitter_capacitance": "10 pF",
    "collector_capacitance": "4 pF", "theta_ja": "300 K/W", "junction": "150 degC",
}  # fmt: skip


def stage(*left_out, text=STAGE):
    """The stage, its transistor's model without some keys."""
    lines = [f'{key} = "{value}"' for key, value in STATED.items() if key not in left_out]
    lines += [] if "log_range" in left_out else ['log_range = ["1 nA", "1 mA"]']
    model = ["[models.bare-npn]", 'kind = "npn"', 'saturation_current = "10 fA"', "forward_beta = 200", *lines]
    return design_from(text, "\n".join(model))


def test_all_stated():
    """A design whose models state what verdicts rest on has nothing to tell."""
    assert_clean(BareAssumption, stage())


def test_stated_boards(board):
    """The shipped models are complete; on the boards only ratings of passive parts are left out."""
    for name in ("gas_log", "steam_root", "dose_rate"):
        subjects = {f.location.key.split(".")[1][0] for f in findings_of(board(name), BareAssumption)}
        assert subjects <= {"R", "C", "P"}


@pytest.mark.parametrize(
    ("key", "rule"),
    [("log_range", "signal-current"), ("emitter_base_breakdown", "junction-reverse"), ("junction", "dissipation")],
)
def test_key_left_out_of_a_model(key, rule):
    """A model that leaves out a key is named with it and with the rules that rest on it."""
    finding = assert_finds(BareAssumption, stage(key), parts=["Q1"])
    assert finding.severity is Severity.OBSERVATION
    assert "bare-npn" in finding.message
    assert key in finding.message
    assert rule in finding.consequence
    assert finding.location.key == "parts.Q1.model"


def test_model_is_named_once():
    """Two parts of one model and two keys left out are one finding."""
    second = 'Q2 = { kind = "npn", model = "bare-npn", pins = { C = "V9P", B = "GND", E = "V9N" } }\n'
    found = findings_of(stage("junction", "log_range", text=STAGE + second), BareAssumption)
    assert [sorted(f.parts) for f in found] == [["Q1", "Q2"]]


def test_key_that_the_part_states():
    """What the model leaves out the part may state."""
    text = STAGE.replace('model = "bare-npn", ', 'model = "bare-npn", junction = "125 degC", ')
    assert_clean(BareAssumption, stage("junction", text=text))


def test_thermal_resistance_of_the_package():
    """A package that states its thermal resistance makes that of the model unnecessary."""
    assert_clean(BareAssumption, stage("theta_ja", text=STAGE + '[packages.Q1]\ntheta_ja = "250 K/W"\n'))
    assert_finds(BareAssumption, stage("theta_ja"), parts=["Q1"])


def test_mismatch_is_wanted_of_matched_parts():
    """Only transistors of a group need a mismatch, and the group may state it."""
    text = STAGE + 'Q2 = { kind = "npn", model = "bare-npn", pins = { C = "V9P", B = "GND", E = "V9N" } }\n'
    group = '[matching.pair]\nparts = ["Q1", "Q2"]\n'
    assert_clean(BareAssumption, stage(text=text))
    assert "vbe_mismatch" in assert_finds(BareAssumption, stage(text=text + group)).message
    assert_clean(BareAssumption, stage(text=text + group + 'vbe_mismatch = "50 uV"\n'))


def test_parts_without_a_model():
    """Parts that have no model are named by kind."""
    finding = assert_finds(BareAssumption, stage(text=STAGE.replace(', power = "0.1 W"', "")), parts=["R1"])
    assert "power of R1" in finding.message


def test_rules_that_are_off():
    """What only a rule that is switched off rests on is not wanted."""
    off = "[rules.junction-reverse]\nenabled = false\n"
    for text, refs in ((STAGE, ["Q1"]), (STAGE + off, [])):
        found = [f for f in findings_of(stage("emitter_base_breakdown", text=text)) if f.rule == BareAssumption.name]
        assert [ref for f in found for ref in f.parts] == refs


def test_requirements_make_data_wanted():
    """A tolerance matters once an accuracy is asked for."""
    law = '[requirements.a]\noutput = "VOUT"\nlaw = "VIN"\n'
    assert_clean(BareAssumption, stage(text=STAGE + law))
    finding = assert_finds(BareAssumption, stage(text=STAGE + law + 'accuracy = { reading = "1 %" }\n'), parts=["R1"])
    assert "tolerance" in finding.message


def test_table_is_of_rules_and_keys_that_exist():
    """Every rule named is installed, and every key is one of its kind."""
    tables = {
        "transistor": TransistorParameters,
        "diode": DiodeParameters,
        "op-amp": AmplifierParameters,
    } | {kind: PART_TABLES[kind] for kind in ("photodiode", "resistor", "capacitor")}
    for kinds in RESTS_ON.values():
        for kind, keys in kinds.items():
            assert set(keys) <= set(tables[kind].model_fields)
    assert set(RESTS_ON) <= set(installed_registry().entries)
