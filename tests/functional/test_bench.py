"""``rulecheck figures --bench``: what a voltmeter should read, and readings laid over it."""

import csv
import io
from pathlib import Path

import pytest

from rulecheck.testing import figures_of

from .schemas import valid_bench

EXAMPLES = Path(__file__).parents[2] / "example_designs"
NOZZLE = EXAMPLES / "sound" / "nozzle_flow.toml"

# Two dividers of a half from one reference.
HALVES = """\
format = 1
[design]
title = "Halves"
[nets]
GND = { role = "ground" }
VREF = { role = "reference", voltage = "10 V", tolerance = "0.1 %", tempco = "0 ppm/K" }
VOUT = { role = "output" }
[parts]
R1 = { kind = "resistor", value = "10 kohm", tolerance = "1 %", tempco = "0 ppm/K", pins = ["VREF", "VOUT"] }
R2 = { kind = "resistor", value = "10 kohm", tolerance = "1 %", tempco = "0 ppm/K", pins = ["VOUT", "GND"] }
R3 = { kind = "resistor", value = "10 kohm", tolerance = "1 %", tempco = "0 ppm/K", pins = ["VREF", "TAP"] }
R4 = { kind = "resistor", value = "10 kohm", tolerance = "2 %", tempco = "0 ppm/K", pins = ["TAP", "GND"] }
"""


@pytest.fixture
def halves(folder):
    """The two dividers in the working folder."""
    (folder / "halves.toml").write_text(HALVES)
    return "halves.toml"


def sheet(run, *arguments):
    """The object of a sheet, its readings by name."""
    status, out, err = run("figures", *arguments, "--bench", "--as", "json")
    assert err == ""
    (design,) = valid_bench(out)["designs"]
    return status, design, {reading["reading"]: reading for reading in design["readings"]}


def test_expected_readings_and_limits_follow_from_the_divider(run, halves):
    """Limits: V·(r/2)·(1 %): 25 mV of each resistor, 5 mV of the reference (10 V · 0.1 % / 2)."""
    status, _, readings = sheet(run, halves)
    assert status == 0
    out = readings["nets.VOUT"]
    assert out["expected"] == pytest.approx([5.0], rel=1e-9)
    assert out["worst_case"] == pytest.approx([0.025 + 0.025 + 0.005], rel=1e-6)
    assert out["rss"] == pytest.approx([(0.025**2 * 2 + 0.005**2) ** 0.5], rel=1e-6)
    assert readings["nets.VREF"]["worst_case"] == pytest.approx([0.01], rel=1e-9)
    # Across R1: what the output loses, but with the whole of the reference's deviation less its half.
    assert readings["parts.R1.voltage"]["expected"] == pytest.approx([5.0], rel=1e-9)
    assert readings["parts.R1.voltage"]["worst_case"] == pytest.approx([0.055], rel=1e-6)
    assert readings["nets.TAP"]["worst_case"] == pytest.approx([0.025 + 0.05 + 0.005], rel=1e-6)
    assert "nets.GND" not in readings


def test_what_a_point_states_does_not_deviate(run, halves, folder):
    """Who sets the reference to 9 V, or measures it, knows it."""
    (folder / "points.csv").write_text("VREF\n9 V\n")
    _, design, readings = sheet(run, halves, "--points", "points.csv")
    assert design["points"]["VREF"] == [9.0]
    assert readings["nets.VOUT"]["expected"] == pytest.approx([4.5], rel=1e-9)
    assert readings["nets.VOUT"]["worst_case"] == pytest.approx([9 / 4 * 0.02], rel=1e-6)
    assert readings["nets.VREF"]["worst_case"] == [0.0]


def test_readings_are_the_operating_points(run, folder):
    """Of nets, of transistors and of amplifiers, as the other figures have them."""
    (folder / "points.csv").write_text("VIN\n2 V\n")
    _, _, readings = sheet(run, NOZZLE, "--points", "points.csv")
    catalogue = (NOZZLE.parent / "house_parts.toml").read_text()
    text = NOZZLE.read_text()
    found = figures_of(text, [{"VIN": 2.0}], catalogue if "catalogues" in text else None)
    assert readings["nets.VOUT"]["expected"] == pytest.approx(found["nets"]["VOUT"], rel=1e-9)
    assert readings["parts.Q1.vbe"]["expected"] == pytest.approx(found["parts"]["Q1"]["vbe"], rel=1e-9)
    assert readings["parts.Q4.vce"]["expected"] == pytest.approx(found["parts"]["Q4"]["vce"], rel=1e-9)
    # The inputs of an amplifier differ by its offset, the largest of what can part them (0.5 mV by its model).
    assert 0.4e-3 < readings["parts.U1A.input_difference"]["worst_case"][0] < 1e-3


def test_a_trim_takes_up_what_it_is_there_for(run, folder):
    """Set to null its requirement it leaves less of the output's spread than where a point states its position."""
    heater = EXAMPLES / "sound" / "heater_power.toml"
    _, design, readings = sheet(run, heater)
    trimmed = readings["nets.VOUT"]["worst_case"][0]
    row = {name: design["points"][name][0] for name in ("VIN", "RV1")}
    (folder / "points.csv").write_text("VIN,RV1\n{VIN!r},{RV1!r}\n".format(**row))
    fixed = sheet(run, heater, "--points", "points.csv")[2]["nets.VOUT"]
    assert fixed["expected"][0] == pytest.approx(readings["nets.VOUT"]["expected"][0], rel=1e-6)
    assert trimmed < 0.8 * fixed["worst_case"][0]


def test_the_sheet_can_be_filled_in_and_read_again(run, halves, folder):
    """What reads as expected is inside; conditions are those of the sheet."""
    out = run("figures", halves, "--bench", "--as", "csv")[1]
    rows = list(csv.DictReader(io.StringIO(out)))
    assert all(float(row["low"]) <= float(row["expected"]) <= float(row["high"]) for row in rows)
    text = io.StringIO()
    writer = csv.DictWriter(text, rows[0])
    writer.writeheader()
    writer.writerows({**row, "measured": row["expected"]} for row in rows)
    (folder / "measured.csv").write_text(text.getvalue())
    status, design, _ = sheet(run, halves, "--against", "measured.csv")
    assert status == 0
    assert len(design["measured"]) == len(rows)
    assert all(entry["inside"] for entry in design["measured"])
    assert design["explanations"] == []


def test_the_parameter_that_is_off_is_named_first(run, halves, folder):
    """R4 of 12 kohm gives 10 V·12/22 at TAP (Ohm's law) and leaves VOUT alone: the reference cannot explain it."""
    tap = 10 * 12 / 22
    (folder / "measured.csv").write_text(f"reading,measured\nTAP,{tap} V\nVOUT,5.001\nVREF,10 V\nR3.voltage,\n")
    status, design, _ = sheet(run, halves, "--against", "measured.csv")
    assert status == 1
    assert [entry["inside"] for entry in design["measured"]] == [False, True, True]
    first = design["explanations"][0]
    assert first["parameter"] in ("parts.R4.value", "parts.R3.value")
    assert first["explains"] == [0]
    assert first["contradicts"] == []
    by_name = {e["parameter"]: e for e in design["explanations"]}
    # Linear: 10 V / 4 per unit of R4, so 0.4545 V asks 18.2 %, which is 9.1 half-spreads of 2 %.
    assert by_name["parts.R4.value"]["half_spreads"] == pytest.approx((tap - 5) / 2.5 / 0.02, rel=1e-2)
    assert by_name["parts.R3.value"]["deviation"] < 0
    assert "parts.R1.value" not in by_name
    assert by_name.get("nets.VREF.voltage", {"contradicts": [1]})["contradicts"]


def test_a_wrong_resistor_of_a_log_circuit_is_among_the_first_explanations(run, folder):
    """Readings of the circuit itself with R8 5 % high; no other part is before it that explains less."""
    text = NOZZLE.read_text()
    catalogue = (NOZZLE.parent / "house_parts.toml").read_text() if "catalogues" in text else None
    at = text.index("[parts.R8]")
    value = text[at:].split('value = "')[1].split('"')[0]
    number, unit = value.split()
    wrong = text[:at] + text[at:].replace(value, f"{float(number) * 1.05} {unit}", 1)
    volts = [0.2, 1.0, 5.0]
    nets = figures_of(wrong, [{"VIN": v} for v in volts], catalogue)["nets"]
    rows = [f"{v},{net},{nets[net][i]}" for i, v in enumerate(volts) for net in ("VOUT", "LOG", "HALF", "TAIL2")]
    (folder / "measured.csv").write_text("\n".join(["VIN,reading,measured", *rows]) + "\n")
    status, design, _ = sheet(run, NOZZLE, "--against", "measured.csv")
    assert status == 1
    outside = {entry["reading"] for entry in design["measured"] if not entry["inside"]}
    assert outside == {"nets.VOUT"}
    r8 = next(e for e in design["explanations"] if e["parameter"] == "parts.R8.value")
    assert len(r8["explains"]) == len(design["explanations"][0]["explains"])
    assert r8["deviation"] == pytest.approx(0.05 * float(number) * {"kohm": 1e3, "ohm": 1.0}[unit], rel=0.02)


def test_the_text_has_a_table_a_condition_and_names_what_is_outside(run, halves, folder):
    """Within 80 columns."""
    status, out, _ = run("figures", NOZZLE, "--bench")
    assert status == 0
    assert out.count("\nat ambient 25 degC, VIN ") == 3
    (folder / "measured.csv").write_text("reading,measured\nnets.TAP,5.5 V\nnets.VOUT,5 V\n")
    status, out, _ = run("figures", halves, "--bench", "--against", "measured.csv")
    assert status == 1
    lines = out.splitlines()
    assert [line.split()[0] for line in lines if line.endswith("outside")][:1] == ["TAP"]
    assert "1 of 2 readings outside" in lines
    assert any(line.startswith("  parts.R4.value  +") for line in lines)
    assert max(map(len, lines)) <= 80


def test_csv_of_readings_says_which_are_inside(run, halves, folder):
    """A row a reading that was taken."""
    (folder / "measured.csv").write_text("reading,measured\nnets.TAP,5.5 V\nnets.VOUT,5 V\n")
    out = run("figures", halves, "--bench", "--against", "measured.csv", "--as", "csv")[1]
    rows = list(csv.DictReader(io.StringIO(out)))
    assert [(row["reading"], row["inside"]) for row in rows] == [("nets.TAP", "false"), ("nets.VOUT", "true")]


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("reading,measured\nTAPP,5 V\n", "did you mean 'TAP'"),
        ("reading,measured\nTAP,5 A\n", "voltage in V"),
        ("reading,measured\nTAP,\n", "no row has a measured value"),
        ("reading\nTAP\n", "this column is missing"),
        ("VRF,reading,measured\n1 V,TAP,5 V\n", "did you mean 'VREF'"),
    ],
)
def test_a_fault_of_the_readings_is_named(run, halves, folder, text, words):
    """With its line; status 2."""
    (folder / "measured.csv").write_text(text)
    status, out, err = run("figures", halves, "--bench", "--against", "measured.csv")
    assert (status, out) == (2, "")
    assert "measured.csv:" in err
    assert words in err


def test_options_that_do_not_go_together_are_refused(run, halves, folder):
    """Readings have points of their own, and belong to a sheet."""
    (folder / "m.csv").write_text("reading,measured\nTAP,5 V\n")
    assert run("figures", halves, "--against", "m.csv")[0] == 2
    assert run("figures", halves, "--bench", "--points", "m.csv", "--against", "m.csv")[0] == 2
    assert run("figures", halves, "--bench", "--samples", "5")[0] == 2
