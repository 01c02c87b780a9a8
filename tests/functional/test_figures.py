"""``rulecheck figures``: the numbers in each format, and points of the user's own."""

import csv
import io
import math
import re

import pytest

from rulecheck.testing import figures_of

from .conftest import DIVIDER
from .schemas import valid_figures

# Every kind of part. The follower holds VOUT at the wiper of a divider of a tenth; Q1 is a diode-connected
# transistor fed by a current source; D1 and PD1 hang on voltages.
ALL_KINDS = """\
format = 1

[design]
title = "One of each"

[nets]
GND = { role = "ground" }
VP = { role = "supply", voltage = "15 V", tolerance = "5 %" }
VN = { role = "supply", voltage = "-15 V", tolerance = "5 %" }
VREF = { role = "reference", voltage = "1 V" }
VIN = { role = "input", drive = "voltage", range = ["1 V", "10 V"] }
IIN = { role = "input", drive = "current", range = ["1 uA", "1 mA"] }
VOUT = { role = "output", load = "10 kohm" }

[parts]
P1 = { kind = "potentiometer", value = "10 kohm", position = { min = 0.05, typ = 0.9, max = 0.95 }, pins = { END1 = "VIN", WIPER = "TAP", END2 = "GND" } }
U1 = { kind = "op-amp", model = "bifet-precision", pins = { "IN+" = "TAP", "IN-" = "VOUT", OUT = "VOUT", "V+" = "VP", "V-" = "VN" } }
I1 = { kind = "current-source", value = "100 uA", pins = { P = "EMIT", N = "VP" } }
Q1 = { kind = "npn", model = "monolithic-pair-npn", pins = { C = "EMIT", B = "EMIT", E = "GND" } }
V1 = { kind = "voltage-source", value = "0.3 V", pins = { P = "LOW", N = "GND" } }
R1 = { kind = "resistor", value = "1 kohm", pins = ["LOW", "GND"] }
R2 = { kind = "resistor", value = "1 kohm", pins = ["IIN", "GND"] }
R3 = { kind = "resistor", value = "1 kohm", pins = ["VREF", "ANODE"] }
PD1 = { kind = "photodiode", photocurrent = ["1 nA", "1 uA"], pins = { A = "GND", K = "LOW" } }
C1 = { kind = "capacitor", value = "100 nF", pins = ["VP", "GND"] }
J1 = { kind = "connector", pins = { "1" = "VIN", "2" = "VOUT" } }

[parts.D1]
kind = "diode"
saturation_current = "1 fA"
pins = { A = "ANODE", K = "GND" }

[requirements.tenth]
output = "VOUT"
law = "VIN / ten"
constants = { ten = 10.0 }
accuracy = { reading = "1 %", absolute = "5 mV" }
"""


@pytest.fixture
def numbers(run, folder):
    """Runs figures on a design and gives the object of the only design."""

    def figures(text, *options):
        (folder / "design.toml").write_text(text)
        status, out, err = run("figures", "design.toml", "--as", "json", *options)
        assert (status, err) == (0, "")
        (design,) = valid_figures(out)["designs"]
        return design

    return figures


@pytest.fixture
def points(folder):
    """Writes a file of points."""

    def write(text):
        (folder / "points.csv").write_text(text)
        return "--points", "points.csv"

    return write


def test_a_divider_divides_at_the_points_asked_for(numbers, points):
    """3 kohm and 1 kohm leave a quarter (Ohm's law); quantities and SI numbers may be mixed."""
    design = numbers(DIVIDER, *points("VIN, ambient\n4 V, 25 degC\n1, 300\n\n2e0,0 degC\n"))
    assert design["points"] == {"ambient": [298.15, 300.0, 273.15], "VIN": [4.0, 1.0, 2.0]}
    assert design["converged"] == [True, True, True]
    assert design["nets"]["VOUT"] == pytest.approx([1.0, 0.25, 0.5], rel=1e-9)
    assert design["parts"]["R1"]["current"] == pytest.approx([1e-3, 0.25e-3, 0.5e-3], rel=1e-9)
    assert design["parts"]["R1"]["temperature"] == pytest.approx([298.15, 300.0, 273.15], abs=1e-6)
    assert design["loops"] == {}
    assert design["natural_frequencies"]["least_damping"] == [1.0] * 3


def test_without_points_the_review_grid_is_used(numbers):
    """21 points of the input from end to end, at three ambients."""
    design = numbers(DIVIDER)
    assert len(set(design["points"]["VIN"])) == 21
    assert (min(design["points"]["VIN"]), max(design["points"]["VIN"])) == (1.0, 10.0)
    assert set(design["points"]["ambient"]) == {273.15, 298.15, 323.15}


def test_every_kind_of_part_has_its_figures_with_their_signs(numbers, points):
    """Signs by the circuit: what drives gives current out, what takes takes it in."""
    design = numbers(ALL_KINDS, *points("VIN,IIN,PD1\n5 V,1 mA,1 uA\n"))
    part = {ref: {name: array[0] for name, array in figures.items()} for ref, figures in design["parts"].items()}
    assert set(design["points"]) == {"ambient", "VIN", "IIN", "PD1", "VP", "VN", "VREF", "P1"}
    assert part["P1"]["current"] == pytest.approx(5.0 / 10e3, rel=1e-6)  # the wiper takes only a bias current
    assert abs(part["P1"]["wiper_current"]) < 1e-8
    assert part["U1"]["output"] == pytest.approx(0.5, abs=1e-4)
    assert part["U1"]["current"] == pytest.approx(50e-6, rel=1e-2)  # out of OUT into 10 kohm
    assert part["U1"]["state"] == "linear"
    assert part["I1"]["current"] == pytest.approx(100e-6, rel=1e-9)
    assert part["Q1"]["ic"] + part["Q1"]["ib"] == pytest.approx(100e-6, rel=1e-6)
    assert part["Q1"]["vbe"] == part["Q1"]["vce"] > 0.4
    # 0.3 V over 1 kohm, less the photocurrent that PD1 drives out of its A into ground and takes in at K.
    assert part["V1"]["current"] == pytest.approx(0.3e-3 + 1e-6, rel=1e-3)
    assert part["V1"]["voltage"] == pytest.approx(0.3, rel=1e-9)
    assert part["PD1"]["current"] == pytest.approx(-1e-6, rel=1e-2)
    assert part["PD1"]["voltage"] == pytest.approx(-0.3, rel=1e-9)
    assert part["R2"]["current"] == pytest.approx(1e-3, rel=1e-6)
    assert part["D1"]["current"] == pytest.approx(part["R3"]["current"], rel=1e-6)
    assert part["D1"]["current"] == pytest.approx((1.0 - part["D1"]["voltage"]) / 1e3, rel=1e-6)
    assert set(part["C1"]) == set(part["J1"]) == {"temperature"}
    assert set(design["loops"]) == {"U1"}
    assert design["requirements"]["tenth"]["law"] == pytest.approx([0.5], rel=1e-12)
    assert design["requirements"]["tenth"]["exponent"]["VIN"] == pytest.approx([1.0], abs=1e-3)


def test_a_point_without_a_solution_is_null_and_gives_status_three(run, folder, points, monkeypatch):
    """It is named on stderr with the net that moved last; nothing is made up for it."""
    from rulecheck.analysis import solution

    real = solution.solve

    def failing(*arguments, **options):
        state = real(*arguments, **options)
        state.converged = state.converged & False
        return state

    monkeypatch.setattr(solution, "solve", failing)
    (folder / "all.toml").write_text(ALL_KINDS)
    status, out, err = run("figures", "all.toml", "--as", "json", *points("VIN\n5 V\n"))
    assert status == 3
    assert "VIN = 5" in err
    assert "moved last" in err
    (design,) = valid_figures(out)["designs"]
    assert design["converged"] == [False]
    assert design["nets"]["VOUT"] == [None]
    assert design["parts"]["U1"]["state"] == [None]
    assert design["parts"]["Q1"]["ic"] == [None]


def test_csv_has_a_row_a_condition_and_a_column_a_figure(run, folder, points):
    """The names are the key paths of the JSON, and so are the figures."""
    (folder / "all.toml").write_text(ALL_KINDS)
    arguments = ("figures", "all.toml", *points("VIN\n1 V\n5 V\n"))
    _, out, _ = run(*arguments, "--as", "csv")
    rows = list(csv.DictReader(io.StringIO(out)))
    (design,) = valid_figures(run(*arguments, "--as", "json")[1])["designs"]
    assert [float(row["nets.VOUT"]) for row in rows] == design["nets"]["VOUT"]
    assert [row["parts.U1.state"] for row in rows] == ["linear", "linear"]
    assert [row["converged"] for row in rows] == ["true", "true"]
    assert [float(row["requirements.tenth.exponent.VIN"]) for row in rows] == (
        design["requirements"]["tenth"]["exponent"]["VIN"]
    )
    assert not any(name in rows[0] for name in ("file", "title"))


def test_the_text_has_the_span_of_each_figure(run, folder):
    """Least and greatest with units, and where errors are worst."""
    (folder / "all.toml").write_text(ALL_KINDS)
    status, out, _ = run("figures", "all.toml")
    assert status == 0
    assert out.startswith("all.toml · One of each\n")
    assert "all solved" in out
    assert re.search(r"^VIN +1 V +10 V$", out, re.MULTILINE)
    assert re.search(r"^P1 current +100 uA +1 mA$", out, re.MULTILINE)
    assert re.search(r"^U1 state +linear \d+$", out, re.MULTILINE)
    assert re.search(r"^U1 phase_margin +[\d.]+ deg", out, re.MULTILINE)
    assert re.search(r"^worst tenth: error ", out, re.MULTILINE)
    assert max(map(len, out.splitlines())) <= 80


def test_the_text_of_a_single_point_has_one_value_a_figure(run, folder, points):
    """There is no span then."""
    _, out, _ = run("figures", "divider.toml", *points("VIN\n4 V\n"))
    assert re.search(r"^VOUT +1 V$", out, re.MULTILINE)
    assert "greatest" not in out


@pytest.mark.parametrize(
    ("text", "place", "words"),
    [
        ("VIM\n1 V\n", "1:1", "did you mean 'VIN'"),
        ("ambient,VIN\n25 degC,1 A\n", "2:2", "voltage in V"),
        ("VIN\n1 V\n\nmuch\n", "4:1", "does not begin with a number"),
        ("VIN,P1\n1 V,1.5\n", "2:2", "0 to 1"),
        ("VIN,ambient\n1 V\n", "2", "found 1 values; 2 are expected"),
        ("VIN,VIN\n1 V,1 V\n", "1:2", "stands twice"),
        ("VIN\n", "2", "at least one line of values"),
        ("", "1", "a line of names"),
        ('VIN\n"1 V\n', "2", "not CSV"),
        ("VIN\nnan\n", "2:1", "not finite"),
        ("ambient\n-300 degC\n", "2:1", "absolute zero"),
    ],
)
def test_a_fault_of_the_points_is_named_with_line_and_column(run, folder, points, text, place, words):
    """Status 2, and nothing is computed."""
    (folder / "all.toml").write_text(ALL_KINDS)
    status, out, err = run("figures", "all.toml", *points(text))
    assert (status, out) == (2, "")
    assert f"points.csv:{place}: " in err
    assert words in err


def test_all_faults_of_the_points_are_named_at_once(run, points):
    """Whoever exports them mends them in one go."""
    _, _, err = run("figures", "divider.toml", *points("VIN,ambient\n1 A,2 V\n3 V,4 V\n"))
    assert err.count("points.csv:") == 3


@pytest.mark.parametrize(("name", "content"), [("nowhere.csv", None), ("latin.csv", b"VIN\n1 V \xb5\n")])
def test_points_that_cannot_be_read_give_status_two(run, folder, name, content):
    """The message names the file."""
    if content is not None:
        (folder / name).write_bytes(content)
    status, _, err = run("figures", "divider.toml", "--points", name)
    assert status == 2
    assert name in err


def test_a_byte_order_mark_before_the_points_is_no_part_of_a_name(numbers, points):
    """Spreadsheets write one."""
    assert numbers(DIVIDER, *points("\ufeffVIN\n4 V\n"))["points"]["VIN"] == [4.0]


def test_figures_for_tests_are_those_of_the_command(numbers, points):
    """The helper for tests gives the same object, but for the name of the file."""
    expected = numbers(ALL_KINDS, *points("VIN,P1\n1 V,0.5\n2 V,0.9\n"))
    found = figures_of(ALL_KINDS, [{"VIN": 1.0, "P1": 0.5}, {"VIN": 2.0}])
    assert {**found, "file": ""} == {**expected, "file": ""}
    assert not any(isinstance(value, float) and math.isnan(value) for value in found["nets"]["VOUT"])
