"""The loaded design: merged parameters, defaults, tolerances, packages, inputs, places."""

from __future__ import annotations

import copy
import datetime as dt
import math
import pickle
from pathlib import Path

import pytest

from rulecheck.design.load import load_text
from rulecheck.design.model import Design
from rulecheck.findings import Location
from rulecheck.units import NUMBER, Spread, dimension_of

HEAD = """format = 1
[nets]
GND = { role = "ground" }
V15P = { role = "supply", voltage = "15 V", tolerance = "5 %" }
V15N = { role = "supply", voltage = "-15 V", tolerance = "5 %", tempco = "-20 ppm/K" }
VREF = { role = "reference", voltage = { min = "4.9 V", max = "5.1 V" }, from = "V15P" }
VIN = { role = "input", drive = "voltage", range = ["0.1 V", "10 V"], survives = ["-15 V", "15 V"], cutoff = "0.2 V" }
IIN = { role = "input", drive = "current", range = ["-1 mA", "1 mA"], source_resistance = "1 Mohm" }
VOUT = { role = "output", load = "10 kohm", load_capacitance = "100 pF" }
"""


def design(parts: str, name: str = "board.toml") -> Design:
    """Design of the nets above and these parts."""
    return load_text(HEAD + parts, name)


def part(text: str, ref: str = "X1") -> str:
    """Table of one part."""
    return f"[parts.{ref}]\n{text}\n"


NPN = 'kind = "npn"\nmodel = "monolithic-pair-npn"\npins = { C = "VREF", B = "GND", E = "VOUT" }\n'
RESISTOR = 'kind = "resistor"\nvalue = "10 kohm"\npins = ["VIN", "VOUT"]\n'


def test_what_the_part_states_replaces_what_its_model_says() -> None:
    """A part's own parameter wins, all others are the model's, and `given` names those stated in either."""
    q = design(part(NPN + 'forward_beta = 77\nvbe_offset = "0.1 mV"')).parts["X1"]
    assert q.forward_beta == Spread.exactly(77.0)
    assert q.early_voltage == Spread.exactly(150.0)  # generic_parts.toml
    assert q.vbe_offset == Spread.exactly(1e-4)
    assert {"forward_beta", "early_voltage", "vbe_offset"} <= q.given
    assert q.monolithic is True


def test_a_stated_headroom_replaces_the_models_as_a_whole() -> None:
    """Of a parameter that is a table no key of the model's remains."""
    text = 'kind = "op-amp"\nmodel = "bifet-precision"\npins = {}\ninput_headroom = { low = "-0.2 V", high = "2 V" }'
    u = design(part(text)).parts["X1"]
    assert (u.input_headroom.low, u.input_headroom.high) == (Spread.exactly(-0.2), Spread.exactly(2.0))
    assert u.output_headroom.low == Spread.exactly(1.5)  # generic_parts.toml


def test_a_part_without_a_model_states_its_parameters_itself() -> None:
    """No model is needed where the part states what must be known; the rest has the defaults."""
    d = design(part('kind = "diode"\nsaturation_current = "2 fA"\npins = { A = "VIN", K = "VOUT" }')).parts["X1"]
    assert d.model is None
    assert d.given == {"saturation_current"}
    assert (d.emission_coefficient.typ, d.series_resistance.typ, d.leakage_doubling.typ) == (1.0, 0.0, 10.0)
    assert (d.bandgap.typ, d.temperature_exponent.typ) == (1.12, 3.0)
    assert d.reverse_voltage is None


def test_defaults_of_a_transistor() -> None:
    """What neither part nor model states has the defaults of the format."""
    text = 'kind = "pnp"\nsaturation_current = "2 fA"\nforward_beta = 100\npins = {}'
    q = design(part(text)).parts["X1"]
    defaults = {
        "emission_coefficient": 1.0, "reverse_beta": 2.0, "beta_exponent": 1.5, "early_voltage": math.inf,
        "knee_current": math.inf, "leakage_saturation_current": 0.0, "leakage_emission_coefficient": 2.0,
        "bulk_emitter_resistance": 0.0, "base_resistance": 0.0, "collector_resistance": 0.0,
        "emitter_capacitance": 0.0, "collector_capacitance": 0.0, "transit_time": 0.0, "bandgap": 1.12,
        "temperature_exponent": 3.0,
    }  # fmt: skip
    assert {name: getattr(q, name) for name in defaults} == {n: Spread.exactly(v) for n, v in defaults.items()}
    assert q.vbe_spread == Spread(-0.03, 0.0, 0.03)
    assert q.monolithic is False
    assert q.log_range is None


def test_defaults_of_an_amplifier() -> None:
    """What neither part nor model states has the defaults of the format."""
    text = (
        'kind = "op-amp"\nopen_loop_gain = "120 dB"\ngain_bandwidth = "1 MHz"\npins = {}\n'
        'input_headroom = { low = "1 V", high = "1 V" }\noutput_headroom = { low = "1 V", high = "1 V" }'
    )
    u = design(part(text)).parts["X1"]
    assert u.open_loop_gain.typ == pytest.approx(1e6)  # 10^(120/20)
    assert u.second_pole.typ == math.inf
    assert (u.output_resistance.typ, u.input_capacitance.typ, u.common_mode_capacitance.typ) == (0.0, 0.0, 0.0)
    assert (u.input_clamps, u.phase_reversal) == ("rails", False)
    assert u.bias_current is None


def test_limits_about_zero_and_ratios_in_decibels() -> None:
    """A limit marked ± is a spread about zero, a rejection a ratio."""
    text = 'kind = "op-amp"\nmodel = "bifet-precision"\npins = {}\noffset_voltage = "2 mV"\nsupply_rejection = "100 dB"'
    u = design(part(text)).parts["X1"]
    assert u.offset_voltage == Spread(-2e-3, 0.0, 2e-3)
    assert u.supply_rejection.typ == pytest.approx(1e5)


@pytest.mark.parametrize(
    ("supply", "limits"),
    [('{ min = "9 V", max = "36 V" }', (9.0, 36.0)), ('{ max = "36 V" }', (0.0, 36.0)), ('"5 V"', (5.0, 5.0))],
)
def test_a_total_supply_stated_by_its_greatest_value_begins_at_zero(supply: str, limits: tuple[float, float]) -> None:
    """The least total supply is zero where only the greatest is stated."""
    text = f'kind = "op-amp"\nmodel = "bifet-precision"\npins = {{}}\nsupply = {supply}'
    u = design(part(text)).parts["X1"]
    assert (u.supply.min, u.supply.max) == limits


def test_value_and_tolerance_of_passive_parts() -> None:
    """The value stays as written; `value_spread` has the tolerance in it, ± of the magnitude."""
    d = design(
        part('kind = "resistor"\nvalue = "4K7"\ntolerance = "1 %"\npins = ["VIN", "VOUT"]', "R1")
        + part(
            'kind = "capacitor"\nvalue = { min = "90 pF", typ = "100 pF", max = "120 pF" }\npins = ["VIN", "VOUT"]',
            "C1",
        )
        + part('kind = "voltage-source"\nvalue = "-2 V"\ntolerance = "5 %"\npins = { N = "GND", P = "VOUT" }', "V1")
    )
    r, c, v = (d.parts[ref] for ref in ("R1", "C1", "V1"))
    assert (r.value, r.tolerance) == (Spread.exactly(4700.0), 0.01)
    assert (r.value_spread.min, r.value_spread.max) == pytest.approx((4653.0, 4747.0))
    assert c.tolerance is None
    assert (c.value_spread.min, c.value_spread.max) == pytest.approx((90e-12, 120e-12))
    assert (v.value_spread.min, v.value_spread.typ, v.value_spread.max) == pytest.approx((-2.1, -2.0, -1.9))


def test_tempco_of_a_resistor_has_its_limits_about_the_nominal() -> None:
    """The limit of the temperature coefficient stands on either side of its signed nominal."""
    text = RESISTOR + 'tempco = "-3300 ppm/K"\ntempco_tolerance = "100 ppm/K"'
    tempco = design(part(text)).parts["X1"].tempco
    assert (tempco.min, tempco.typ, tempco.max) == pytest.approx((-3.4e-3, -3.3e-3, -3.2e-3))


def test_pins_stand_in_the_order_of_the_kind() -> None:
    """Pins of a table are in the kind's order whatever the file's; a list has the pins 0 and 1."""
    d = design(
        part('kind = "voltage-source"\nvalue = "2 V"\npins = { N = "GND", P = "VOUT" }', "V1")
        + part('kind = "current-source"\nvalue = "2 uA"\npins = ["VOUT", "GND"]', "I1")
        + part(RESISTOR, "R1")
    )
    assert list(d.parts["V1"].pins.items()) == [("P", "VOUT"), ("N", "GND")]
    assert list(d.parts["I1"].pins.items()) == [("0", "VOUT"), ("1", "GND")]
    assert dict(d.parts["R1"].pins) == {"0": "VIN", "1": "VOUT"}


def test_a_potentiometer_whose_position_is_not_stated_may_stand_anywhere() -> None:
    """The default is the whole travel with its middle as nominal."""
    text = 'kind = "potentiometer"\nvalue = "10 kohm"\npins = { WIPER = "VOUT", END2 = "GND", END1 = "VIN" }'
    rv = design(part(text)).parts["X1"]
    assert rv.position == Spread(0.0, 0.5, 1.0)
    assert list(rv.pins) == ["END1", "WIPER", "END2"]
    assert rv.adjusts is None


def test_a_parameter_that_the_kind_does_not_have_is_named_with_the_nearest() -> None:
    """Asking a resistor for a misspelt parameter says which one it has."""
    r = design(part(RESISTOR)).parts["X1"]
    with pytest.raises(AttributeError, match=r"X1 is of kind resistor.*'tempc'.*did you mean 'tempco'"):
        _ = r.tempc


def test_supply_voltage_holds_its_tolerance() -> None:
    """The tolerance is ± of the magnitude, of negative supplies too; a spread is taken as it is."""
    nets = design("").nets
    positive, negative, reference = nets["V15P"].voltage, nets["V15N"].voltage, nets["VREF"].voltage
    assert positive is not None
    assert negative is not None
    assert (positive.min, positive.typ, positive.max) == pytest.approx((14.25, 15.0, 15.75))
    assert (negative.min, negative.typ, negative.max) == pytest.approx((-15.75, -15.0, -14.25))
    assert reference == Spread(4.9, 5.0, 5.1)
    assert nets["V15N"].tempco == pytest.approx(-20e-6)
    assert (nets["V15P"].tempco, nets["VREF"].source, nets["V15P"].source) == (0.0, "V15P", None)


def test_nets_of_pins_come_after_those_with_a_table() -> None:
    """Ordinary nets exist by being named on a pin of a mounted part, in the order of the pins."""
    d = design(
        part('kind = "resistor"\nvalue = "1 kohm"\npins = ["VIN", "B"]', "R1")
        + part('kind = "resistor"\nvalue = "1 kohm"\npins = ["A", "B"]', "R2")
        + part('kind = "resistor"\nvalue = "1 kohm"\npins = ["GONE", "B"]\nmounted = false', "R3")
    )
    assert list(d.nets) == ["GND", "V15P", "V15N", "VREF", "VIN", "IIN", "VOUT", "B", "A"]
    assert d.nets["A"].role is None
    assert list(d.parts) == ["R1", "R2"]
    assert list(d.unmounted) == ["R3"]


def test_inputs_are_nets_and_photodiodes() -> None:
    """Each has its range; it is spaced logarithmically from a factor of 10 between ends of one sign on."""
    diode = 'kind = "photodiode"\nphotocurrent = ["0 A", "1 mA"]\nsurvives = ["0 A", "5 mA"]\npins = {}'
    inputs = design(part(diode, "PD1")).inputs
    assert list(inputs) == ["VIN", "IIN", "PD1"]
    assert [i.kind for i in inputs.values()] == ["voltage", "current", "photodiode"]
    assert [i.unit for i in inputs.values()] == ["V", "A", "A"]
    assert [i.log_spacing for i in inputs.values()] == [True, False, False]
    assert (inputs["VIN"].low, inputs["VIN"].high, inputs["VIN"].cutoff) == (0.1, 10.0, 0.2)
    assert [i.survives for i in inputs.values()] == [(-15.0, 15.0), None, (0.0, 5e-3)]
    assert [i.compliance for i in inputs.values()] == [None, 15.0, None]


@pytest.mark.parametrize(
    ("ends", "spacing", "is_log"),
    [
        ('["1 V", "10 V"]', "", True),
        ('["1 V", "9.9 V"]', "", False),
        ('["-10 V", "-1 V"]', "", True),
        ('["0 V", "10 V"]', "", False),
        ('["1 V", "10 V"]', ', spacing = "linear"', False),
        ('["1 V", "2 V"]', ', spacing = "log"', True),
    ],
)
def test_spacing_of_a_range(ends: str, spacing: str, is_log: bool) -> None:
    """The file's word counts, else the ratio of the ends."""
    net = f'A = {{ role = "input", drive = "voltage", range = {ends}{spacing} }}\n'
    d = design(net)
    assert d.inputs["A"].log_spacing is is_log
    assert d.nets["A"].spacing == ("log" if is_log else "linear")


def test_packages_of_all_parts() -> None:
    """A part without a package has its own; a table is not needed; unmounted parts are in none."""
    d = design(
        part(NPN + 'package = "M1"', "Q1")
        + part(NPN + 'package = "M1"', "Q2")
        + part(NPN + 'package = "M1"\nmounted = false', "Q3")
        + part(RESISTOR, "R1")
        + '[packages.OVEN]\nheld_temperature = "60 degC"\n[packages.R1]\ntheta_ja = "90 K/W"\n'
    )
    assert list(d.packages) == ["OVEN", "R1", "M1"]
    assert d.packages["M1"].parts == ("Q1", "Q2")
    assert (d.packages["M1"].declared, d.packages["R1"].declared) == (False, True)
    assert (d.packages["M1"].theta_ja, d.packages["R1"].theta_ja) == (200.0, 90.0)  # the model's, its own
    assert d.packages["OVEN"].held_temperature == pytest.approx(333.15)


@pytest.mark.parametrize(
    ("models", "die"),
    [
        (["monolithic-pair-npn", "monolithic-pair-npn"], "single"),
        (["small-signal-npn", "small-signal-npn"], "separate"),
        (["small-signal-npn", "monolithic-pair-npn"], "single"),
    ],
)
def test_die_of_a_package_that_does_not_say(models: list[str], die: str) -> None:
    """Two transistors that are not monolithic stand on separate dice."""
    texts = [NPN.replace("monolithic-pair-npn", model) + 'package = "M1"' for model in models]
    d = design("".join(part(text, f"Q{i}") for i, text in enumerate(texts)))
    assert d.packages["M1"].die == die


def test_diodes_in_one_package_stand_on_separate_dice() -> None:
    """No diode model is monolithic."""
    text = 'kind = "diode"\nmodel = "small-signal-diode"\npackage = "D"\npins = { A = "VIN", K = "VOUT" }'
    d = design(part(text, "D1") + part(text, "D2"))
    assert d.packages["D"].die == "separate"


def test_groups_links_and_concessions() -> None:
    """Tables that point at parts and packages come through in SI, unmounted parts left out."""
    d = design(
        part(NPN, "Q1") + part(NPN, "Q2") + part(NPN + "mounted = false", "Q3")
        + '[matching.pair]\nparts = ["Q1", "Q2", "Q3"]\nvbe_mismatch = "50 uV"\n'
        + '[[thermal_links]]\nbetween = ["Q1", "Q3"]\ntheta = "60 K/W"\n'
        + '[[concessions]]\nrule = "decoupling"\nparts = ["Q1"]\nreason = "C9"\nexpires = 2027-06-30\n'
        + '[[concessions]]\nfinding = "noise:0123abcd"\nreason = "agreed"\n'
        + '[rules.noise]\nseverity = "minor"\nlimit = "3 mV"\n'
    )  # fmt: skip
    assert d.matching["pair"].parts == ("Q1", "Q2")
    assert d.matching["pair"].vbe_mismatch == Spread(-5e-5, 0.0, 5e-5)
    assert (d.thermal_links[0].between, d.thermal_links[0].theta) == (("Q1", "Q3"), 60.0)
    assert "Q3" in d.packages
    assert (d.concessions[0].rule, d.concessions[0].expires) == ("decoupling", dt.date(2027, 6, 30))
    assert (d.concessions[1].rule, d.concessions[1].finding) == ("noise", "noise:0123abcd")
    assert dict(d.rule_settings["noise"]) == {"severity": "minor", "limit": "3 mV"}


def test_requirement() -> None:
    """Constants, accuracy, ranges and points are in SI, with the dimensions of the constants beside them."""
    r = design(
        part(RESISTOR, "R1") + '[requirements.root]\noutput = "VOUT"\nlaw = "full_scale * (VIN / full_scale) ** n"\n'
        'constants = { full_scale = "10 V", n = 0.5 }\naccuracy = { reading = "1 %", absolute = "5 mV" }\n'
        'range = { VIN = ["1 V", "5 V"], IIN = ["0 A", "1 uA"] }\nphase_margin = "55 deg"\n'
        'bandwidth = { min = "1 kHz", input = "VIN", at = { VIN = "0.1 V", ambient = "50 degC" } }\n'
        'noise = { max = "1 mV", bandwidth = ["0.1 Hz", "10 kHz"] }\n'
    ).requirements["root"]
    assert r.law is not None
    assert float(r.law.evaluate({**r.constants, "VIN": 2.5})) == pytest.approx(5.0)  # 10·sqrt(0.25)
    assert (r.reading, r.absolute, r.has_accuracy) == (0.01, 5e-3, True)
    assert dict(r.constant_dimensions) == {"full_scale": dimension_of("V"), "n": NUMBER}
    assert dict(r.range) == {"VIN": (1.0, 5.0), "IIN": (0.0, 1e-6)}
    assert r.phase_margin == 55.0
    assert r.bandwidth is not None
    assert (r.bandwidth.min, r.bandwidth.input) == (1000.0, "VIN")
    assert dict(r.bandwidth.at) == {"VIN": 0.1, "ambient": pytest.approx(323.15)}
    assert r.noise is not None
    assert (r.noise.max, r.noise.bandwidth) == (1e-3, (0.1, 1e4))


def test_the_only_input_need_not_be_named() -> None:
    """A bandwidth without an input is from the one there is."""
    text = HEAD.replace(HEAD[HEAD.index("IIN") : HEAD.index("VOUT")], "")
    d = load_text(text + '[requirements.x]\noutput = "VOUT"\nbandwidth = { min = "1 kHz" }\n', "board.toml")
    assert d.requirements["x"].bandwidth is not None
    assert d.requirements["x"].bandwidth.input == "VIN"


def test_environment_that_is_not_stated() -> None:
    """Ambient is 0, 25 and 50 °C, and the board's insulation is not judged."""
    d = design("")
    assert (d.ambient.min, d.ambient.typ, d.ambient.max) == (273.15, 298.15, 323.15)
    assert d.board_insulation is None
    assert (d.title, d.revision, d.purpose) == ("", "", "")


LOCATED = HEAD + part(NPN + 'package = "M1"', "Q1") + part(RESISTOR, '"R 2"')


@pytest.mark.parametrize(
    ("key", "line", "column", "found"),
    [
        ("nets.VIN.range", 7, 52, "nets.VIN.range"),
        ("nets.VIN.range.1", 7, 62, "nets.VIN.range.1"),
        ("parts.Q1.package", 14, 11, "parts.Q1.package"),
        ("parts.Q1.early_voltage", 12, 9, "parts.Q1.model"),  # which the catalogue states
        ("parts.Q1.input_offset", 10, 1, "parts.Q1"),
        ("packages.M1.theta_ja", 14, 11, "parts.Q1.package"),  # no table: where it is named first
        ('parts."R 2".pins.1', 18, 16, 'parts."R 2".pins.1'),
        ("requirements.root", 1, 1, ""),
        ("matching.pair.Q2", 1, 1, ""),
    ],
)
def test_place_of_a_key(key: str, line: int, column: int, found: str) -> None:
    """A key is at its value; what the file does not have is at what stands nearest to it."""
    assert load_text(LOCATED, "board.toml").locate(key) == Location("board.toml", line, column, found)


def test_place_of_a_net_without_a_table() -> None:
    """An ordinary net is at the first pin that names it."""
    d = design(part('kind = "resistor"\nvalue = "1 kohm"\npins = ["VIN", "SUM"]', "R1"))
    assert d.locate("nets.SUM") == Location("board.toml", 13, 16, "parts.R1.pins.1")


def test_a_design_cannot_be_changed() -> None:
    """What is handed to the rules is frozen."""
    d = design(part(RESISTOR, "R1"))
    with pytest.raises(TypeError, match="cannot be changed"):
        d.parts["R1"] = d.parts["R1"]  # type: ignore[index]
    with pytest.raises(TypeError, match="cannot be changed"):
        d.nets.clear()  # type: ignore[attr-defined]
    with pytest.raises(AttributeError, match="cannot assign"):
        d.parts["R1"].kind = "capacitor"  # type: ignore[misc]


def test_a_design_can_be_sent_to_a_worker() -> None:
    """It survives pickling and copying, with its places."""
    d = load_text(LOCATED, Path("board.toml"))
    for other in (pickle.loads(pickle.dumps(d)), copy.deepcopy(d)):
        assert other.parts == d.parts
        assert other.nets == d.nets
        assert other.locate("parts.Q1.package") == d.locate("parts.Q1.package")
