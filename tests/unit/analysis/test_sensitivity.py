"""Sensitivities by the adjoint method, against differences of whole solutions and against closed forms."""

from pathlib import Path

import numpy as np
import pytest
from designs import HEAD, PINS, board
from gain_stage import GAIN, changed, review_at

from rulecheck.analysis import newton
from rulecheck.analysis.conditions import from_points
from rulecheck.analysis.review import Review
from rulecheck.analysis.sensitivity import Sensitivity, touches
from rulecheck.analysis.spreads import Deviation, Move, deviations, moved
from rulecheck.testing import design_from

CASES = Path(__file__).parents[2] / "published" / "cases"
THERMAL_VOLTAGE = 0.025692579  # kT/q at 298.15 K, from k and q of the SI (2019)
NOISE = 2e-9  # V: what the tolerances of the solver leave in a difference of two solutions
SPREADS = (
    ('tempco = "10 ppm/K"', 'tempco = { min = "-10 ppm/K", typ = "10 ppm/K", max = "40 ppm/K" }'),
    ('voltage = "2.5 V"', 'voltage = "2.5 V"\ntolerance = "0.1 %"'),
)
MORE_SPREADS = (
    ('vbe_mismatch = "80 uV"', 'vbe_mismatch = "80 uV"\nvbe_mismatch_drift = "0.5 uV/K"'),
    ('offset_voltage = "0.2 mV"', 'offset_voltage = "0.2 mV"\noffset_drift = "2 uV/K"'),
    ('"0.5 ohm"', '{ min = "0.3 ohm", typ = "0.5 ohm", max = "0.8 ohm" }'),
    ('early_voltage = "110 V"', 'early_voltage = { min = "90 V", typ = "110 V", max = "140 V" }'),
    ('supply_current = "1.5 mA"', 'supply_current = { typ = "1.5 mA", max = "2.5 mA" }'),
    ("open_loop_gain = 8e5", "open_loop_gain = { min = 2e5, typ = 8e5 }"),
)
IDEAL = """
format = 1
[models.ideal-npn]
kind = "npn"
saturation_current = "10 fA"
forward_beta = 1e9
[models.ideal-amp]
kind = "op-amp"
open_loop_gain = 1e9
gain_bandwidth = "1 MHz"
input_headroom = { low = "1 V", high = "1 V" }
output_headroom = { low = "10 mV", high = "10 mV" }
"""


def case(name, points):
    """A review of a numeric case with many spreads, and its output's sensitivity, at some points."""
    text = changed((CASES / f"{name}.toml").read_text(), SPREADS)
    text += f'\n[requirements.out]\noutput = "Y"\nlaw = "{next(iter(points))}"\naccuracy = {{ reading = "1 %" }}\n'
    catalogue = changed((CASES / "case_parts.toml").read_text().replace("format = 1\n", ""), MORE_SPREADS)
    design = design_from(text, catalogue)
    review = Review(design, from_points(design, {k: np.array(v) for k, v in points.items()}))
    return review, Sensitivity(design.requirements["out"], review.operating_points)


def difference(review, requirement, moves, step, temperatures=None):
    """Slope of the output from whole solutions, by the central difference of fourth order."""

    def output(k):
        overrides, conditions = moved(review.design, review.conditions, [(moves, k * step)])
        return review.solve(conditions, overrides=overrides, temperatures=temperatures).voltage(requirement.output)

    return (8 * (output(1) - output(-1)) - (output(2) - output(-2))) / (12 * step)


KINDS = {"value", "tempco", "offset_voltage", "offset_drift", "bias_current", "offset_current", "Q2", "drift",
         "forward_beta", "bulk_emitter_resistance", "early_voltage"}  # fmt: skip


@pytest.mark.parametrize(
    ("name", "points"),
    [
        ("cube_root", {"X": [0.11, 0.7, 4.5], "ambient": [270.0, 300.0, 335.0]}),
        ("heated_pair", {"X": [0.11, 0.7, 9.0], "ambient": [270.0, 300.0, 335.0]}),
        ("current_ratio", {"PD1": [4e-9, 1e-6, 2e-5], "PD2": [2e-5, 1e-6, 3e-7], "ambient": [270.0, 300.0, 335.0]}),
    ],
)
def test_all_parameters_agree_with_whole_solutions(name, points):
    """Every sensitivity agrees to 1e-5 with central differences of the whole solver, self-heating included."""
    review, sensitivity = case(name, points)
    names = []
    for deviation in deviations(review.design):
        if touches(sensitivity.requirement, review.operating_points, deviation):
            names.append(deviation.name)
            step = deviation.half * (1e-3 if "position" in deviation.name else 2e-2)
            wanted = difference(review, sensitivity.requirement, deviation.moves, step)
            assert sensitivity.of(deviation) == pytest.approx(wanted, rel=1e-5, abs=NOISE / step), deviation.name
    assert {n.split(".")[-1] for n in names} >= KINDS


def test_saturated_output_follows_its_rail():
    """Beyond its swing the output follows the supply and the headroom one to one, and nothing else."""
    headroom = (
        'output_resistance = "0 ohm"\noutput_headroom = { low = { typ = "1 V", max = "2 V" }, high = "1 V" }\noffset'
    )
    text = GAIN.replace('"20 kohm"', '"2 Mohm"').replace("offset", headroom, 1)
    review = review_at(text, X=[0.5])
    assert review.operating_points.state("U1")[0] == "low"
    sensitivity = Sensitivity(review.design.requirements["gain"], review.operating_points)
    found = {d.name: float(sensitivity.of(d)[0]) for d in deviations(review.design)}
    following = {"nets.VN.voltage": 1.0, "parts.U1.output_headroom.low": 1.0}
    assert found == pytest.approx(dict.fromkeys(found, 0.0) | following, abs=1e-9)


def test_self_heating_is_in_the_derivative():
    """What warms an amplifier in the package next to a log pair moves the output by way of temperatures alone."""
    review, sensitivity = case("heated_pair", {"X": [0.3, 9.0], "ambient": [300.0, 300.0]})
    requirement = sensitivity.requirement
    held = {ref: review.operating_points.temperature(ref) for ref in review.design.parts}
    moves = (Move("U3", "supply_current"),)
    warm = difference(review, requirement, moves, 1e-4)
    assert np.abs(difference(review, requirement, moves, 1e-4, temperatures=held)).max() < 1e-4 * np.abs(warm).min()
    assert sensitivity.of(Deviation("U3", -1e-3, 1e-3, moves)) == pytest.approx(warm, rel=1e-5)


def sensitivity_of(text, points, catalogue=None):
    """Sensitivity of the one requirement of a design at some points."""
    design = design_from(text, catalogue)
    review = Review(design, from_points(design, {k: np.array(v) for k, v in points.items()}))
    return review, Sensitivity(next(iter(design.requirements.values())), review.operating_points)


LOG_LAW = '\n[requirements.log]\noutput = "Y0"\nlaw = "X0"\n'


def test_log_slope():
    """A log ratio moves by gain·kT/q for the logarithm of its input, of R1 and of a junction (textbook)."""
    text = changed(board(1) + LOG_LAW, [('"monolithic-pair-npn"', '"ideal-npn"'), ('"bifet-precision"', '"ideal-amp"')])
    text = text.replace("format = 1\n", 'format = 1\ncatalogues = ["house.toml"]\n')
    review, sensitivity = sensitivity_of(text, {"X0": [0.1, 1.0, 10.0]}, IDEAL)
    x = review.conditions.values["X0"]
    slope = 16 * THERMAL_VOLTAGE
    assert np.abs(sensitivity.of_input("X0") * x) == pytest.approx(slope, rel=1e-6)
    by_resistor = sensitivity.of(Deviation("R1_0", -100.0, 100.0, (Move("R1_0", "value"),)))
    assert np.abs(by_resistor * 100e3) == pytest.approx(slope, rel=1e-6)
    by_junction = sensitivity.of(Deviation("Q2_0", -1e-4, 1e-4, (Move("Q2_0", "mismatch"),)))
    assert np.abs(by_junction) == pytest.approx(16.0, rel=1e-6)


POWER = (
    HEAD.replace("format = 1\n", 'format = 1\ncatalogues = ["house.toml"]\n')
    + """
X = { role = "input", drive = "voltage", range = ["0.1 V", "10 V"] }
Y = { role = "output" }
[parts]
R1 = { kind = "resistor", value = "100 kohm", pins = ["X", "S1"] }
Q1 = { kind = "npn", model = "ideal-npn", package = "M1", pins = { C = "S1", B = "L", E = "T1" } }
U1 = { kind = "op-amp", model = "ideal-amp", pins = { "IN+" = "GND", IN- = "S1", OUT = "T1", PINS } }
R2 = { kind = "resistor", value = "100 kohm", pins = ["VREF", "S2"] }
Q2 = { kind = "npn", model = "ideal-npn", package = "M1", pins = { C = "S2", B = "GND", E = "T1" } }
U2 = { kind = "op-amp", model = "ideal-amp", pins = { "IN+" = "GND", IN- = "S2", OUT = "L", PINS } }
R3 = { kind = "resistor", value = "10 kohm", pins = ["L", "M"] }
R4 = { kind = "resistor", value = "RATIO", pins = ["M", "P"] }
U3 = { kind = "op-amp", model = "ideal-amp", pins = { "IN+" = "GND", IN- = "M", OUT = "P", PINS } }
R5 = { kind = "resistor", value = "100 kohm", pins = ["VREF", "S3"] }
Q3 = { kind = "npn", model = "ideal-npn", package = "M2", pins = { C = "S3", B = "P", E = "T3" } }
U4 = { kind = "op-amp", model = "ideal-amp", pins = { "IN+" = "GND", IN- = "S3", OUT = "T3", PINS } }
Q4 = { kind = "npn", model = "ideal-npn", package = "M2", pins = { C = "S4", B = "GND", E = "T3" } }
R6 = { kind = "resistor", value = "100 kohm", pins = ["S4", "Y"] }
U5 = { kind = "op-amp", model = "ideal-amp", pins = { "IN+" = "GND", IN- = "S4", OUT = "Y", PINS } }
[requirements.power]
output = "Y"
law = "X"
"""
).replace("PINS", PINS)


@pytest.mark.parametrize(("feedback", "exponent"), [("5 kohm", 0.5), ("10 kohm", 1.0), ("7.5 kohm", 0.75)])
def test_exponent_is_the_resistor_ratio(feedback, exponent):
    """A power-law stage has the exponent R4/R3, and the output its logarithm times ln of the ratio (textbook)."""
    review, sensitivity = sensitivity_of(POWER.replace("RATIO", feedback), {"X": [0.3, 1.0, 8.0]}, IDEAL)
    x, y = review.conditions.values["X"], review.operating_points.voltage("Y")
    assert sensitivity.of_input("X") * x / y == pytest.approx(exponent, rel=1e-6)
    by_ratio = sensitivity.of(Deviation("R4", -1.0, 1.0, (Move("R4", "value"),)))
    assert by_ratio * exponent * 10e3 / y == pytest.approx(exponent * np.log(x / 2.5), rel=1e-5, abs=1e-7)


def test_solves_do_not_grow_with_parameters(monkeypatch):
    """One transposed solve, and a small one for the temperatures, serve all parameters and conditions."""
    counted = []
    solve = np.linalg.solve
    law = '\n[requirements.log]\noutput = "Y0"\nlaw = "X0"\naccuracy = { absolute = "1 mV" }\n'
    tight = board(1) + law
    loose = tight.replace('kind = "resistor",', 'kind = "resistor", tolerance = "1 %", tempco_tolerance = "50 ppm/K",')
    found = {}
    for name, text in (("tight", tight), ("loose", loose)):
        review = Review(design_from(text))
        points = review.operating_points
        monkeypatch.setattr(np.linalg, "solve", lambda *args: counted.append(args[0].shape) or solve(*args))
        monkeypatch.setattr(newton, "solve", None)
        sensitivity = Sensitivity(review.design.requirements["log"], points)
        slopes = [sensitivity.of(d) for d in deviations(review.design)]
        monkeypatch.undo()
        assert np.isfinite(slopes).all()
        found[name] = (len(slopes), list(counted))
        counted.clear()
    assert found["loose"][0] > found["tight"][0] + 8
    assert found["loose"][1] == found["tight"][1]
    assert len(found["loose"][1]) == 2


def test_equal_channels_have_equal_slopes():
    """A channel that was solved as a copy of another has the other's slopes under its own names."""
    law = '\n[requirements.log]\noutput = "Y1"\nlaw = "X1"\n'
    review, sensitivity = sensitivity_of(board(2) + law, {"X1": [0.2, 2.0]})
    other = sensitivity_of(board(1) + LOG_LAW, {"X0": [0.2, 2.0]})[1]
    for ref, key in (("R1", "value"), ("U2", "offset"), ("Q2", "mismatch"), ("R5", "value")):
        here = sensitivity.of(Deviation("", -1e-3, 1e-3, (Move(f"{ref}_1", key),)))
        assert here == pytest.approx(other.of(Deviation("", -1e-3, 1e-3, (Move(f"{ref}_0", key),))), rel=1e-6)
        assert np.abs(here).min() > 0
    first = Deviation("", -1e-3, 1e-3, (Move("R1_0", "value"),))
    assert not touches(sensitivity.requirement, review.operating_points, first)


def test_what_the_law_names_moves_the_law_too():
    """A reference that scales output and law alike leaves no error, under a law without it all of it is error."""
    text = (
        HEAD.replace('"2.5 V"', '"2.5 V", tolerance = "1 %", tempco = { min = "-50 ppm/K", max = "50 ppm/K" }')
        + """
Y = { role = "output" }
[parts]
R1 = { kind = "resistor", value = "10 kohm", pins = ["VREF", "S"] }
R2 = { kind = "resistor", value = "10 kohm", pins = ["S", "Y"] }
U1 = { kind = "op-amp", model = "bifet-precision", pins = { "IN+" = "GND", IN- = "S", OUT = "Y", PINS } }
[requirements.copy]
output = "Y"
law = "LAW"
"""
    ).replace("PINS", PINS)
    for law, wanted in (("-VREF", 0.0), ("-2.5 * one", -1.0)):
        constants = '\nconstants = { one = "1 V" }' if "one" in law else ""
        review, sensitivity = sensitivity_of(text.replace('"LAW"', f'"{law}"{constants}'), {"ambient": [330.0]})
        by_name = {d.name: d for d in deviations(review.design)}
        assert sensitivity.of(by_name["nets.VREF.voltage"]) == pytest.approx(wanted, abs=2e-5)
        warm = 2.5 * (330.0 - 298.15)
        assert sensitivity.of(by_name["nets.VREF.tempco"]) == pytest.approx(wanted * warm, abs=2e-5 * warm)
