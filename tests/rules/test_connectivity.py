"""Nets and pins that are connected wrongly. The slips are invented; what must be found is the rule's own list."""

import pytest
from rulecheck_rules.connectivity import Connectivity

from rulecheck.api import Move, Set, Severity
from rulecheck.testing import assert_clean, assert_finds, design_from, findings_of, mended

CHAIN = """
format = 1
[design]
title = "Bits of a board"
[nets]
GND = {{ role = "ground" }}
V9 = {{ role = "supply", voltage = "9 V" }}
IN = {{ role = "input", drive = "voltage", range = ["1 V", "2 V"] }}
OUT = {{ role = "output" }}
{nets}
[parts]
R1 = {{ kind = "resistor", value = "1 kohm", pins = ["IN", "S"] }}
R2 = {{ kind = "resistor", value = "1 kohm", pins = ["S", "OUT"] }}
U1 = {{ kind = "op-amp", model = "bifet-precision", pins = {{ "IN+" = "GND", IN- = "S", OUT = "OUT", {supply} }} }}
{parts}
"""


def chain(parts="", nets=""):
    """A small board with parts and nets added."""
    return design_from(CHAIN.format(parts=parts, nets=nets, supply='"V+" = "V9", V- = "GND"'))


@pytest.mark.parametrize("name", ["gas_log", "dose_rate"])
def test_sound_boards(board, name):
    """A sound board has nothing to tell: two supplies with series resistors, and one with a middle reference."""
    assert_clean(Connectivity, board(name))


def test_it_runs_on_a_circuit_that_cannot_be_analysed(board):
    """It asks for no analysis, and a fault of its stops the rules that do."""
    assert Connectivity.needs == ()
    assert Connectivity.blocks_analysis
    found = findings_of(board("dose_rate", ('"IN-" = "DN"', '"IN-" = "NOWHERE"')))
    assert "connectivity" in {f.rule for f in found}
    assert not {"output-swing", "loop-stability"} & {f.rule for f in found}


@pytest.mark.parametrize(
    ("name", "old", "new", "ref"),
    [
        ("gas_log", 'pins = ["DP", "GND"]', 'pins = ["DP", "DPX1"]', "R8"),
        ("dose_rate", 'pins = ["IN2", "O2"]', 'pins = ["IN2", "ELSEWHERE"]', "C2"),
    ],
)
def test_net_with_one_pin(board, name, old, new, ref):
    """An ordinary net with a single pin is told of at that pin."""
    finding = assert_finds(Connectivity, board(name, (old, new)), parts=[ref])
    assert finding.severity is Severity.MAJOR
    assert finding.location.key == f"parts.{ref}.pins.1"


def test_pins_on_nets_with_a_role_are_connected():
    """One pin is enough on a net that a source or load is on."""
    assert_clean(Connectivity, chain())


@pytest.mark.parametrize(
    ("name", "old", "new", "edit"),
    [
        ("gas_log", 'pins = ["LOG2", "DP"]', 'pins = ["L0G2", "DP"]', Move("parts.R7.pins.0", "LOG2")),
        ("dose_rate", 'pins = ["E1", "DN"]', 'pins = ["E1", "dn"]', Move("parts.R4.pins.1", "DN")),
        ("gas_log", 'pins = ["DRIVE1", "LOG1"]', 'pins = ["DRIVVE1", "LOG1"]', Move("parts.R2.pins.0", "DRIVE1")),
    ],
)
def test_slip_in_the_name_of_a_net(board, name, old, new, edit):
    """A net with one pin whose name looks like another's is joined to that, and then all is well."""
    design = board(name, (old, new))
    finding = assert_finds(Connectivity, design)
    assert list(finding.remedies[0].edits) == [edit]
    assert_clean(Connectivity, mended(design, finding.remedies[0]))


def test_names_that_count_are_no_slips(board):
    """S1 is no slip of S2: where names differ by their number, no net is proposed."""
    finding = assert_finds(Connectivity, board("gas_log", ('pins = ["DRIVE2", "LOG2"]', 'pins = ["DRIVE3", "LOG2"]')))
    assert not finding.remedies[0].edits


def test_net_broken_in_two(board):
    """Two nets of one pin each, the only ones, are one finding, and joining them mends it."""
    design = board("dose_rate", ('"IN-" = "IN2"', '"IN-" = "X"'), ('pins = { C = "IN2"', 'pins = { C = "Y"'))
    finding = assert_finds(Connectivity, design, parts=["Q2", "U1B"])
    assert len(findings_of(design, Connectivity)) == 1
    assert_clean(Connectivity, mended(design, finding.remedies[0]))


@pytest.mark.parametrize(
    ("name", "old", "ref"), [("gas_log", ', E = "LOG2"', "Q2"), ("dose_rate", 'A = "IN1", ', "PD1")]
)
def test_missing_pin(board, name, old, ref):
    """A part that lacks a pin it cannot do without is told of."""
    finding = assert_finds(Connectivity, board(name, (old, "")), parts=[ref])
    assert "not connected" in finding.message


@pytest.mark.parametrize(
    ("name", "old", "edit"),
    [
        ("gas_log", 'OUT = "DRIVE2", "V+" = "V15P"', Set('parts.U1B.pins."V+"', "V15P")),
        ("dose_rate", 'OUT = "O2", "V+" = "V5", "V-" = "GND"', Set("parts.U1B.pins.V-", "GND")),
    ],
)
def test_missing_supply_pin(board, name, old, edit):
    """A supply pin left out goes where that of the other amplifier in the package is."""
    design = board(name, (old, old.rpartition(",")[0]))
    finding = assert_finds(Connectivity, design, parts=["U1B"])
    assert list(finding.remedies[0].edits) == [edit]
    assert_clean(Connectivity, mended(design, finding.remedies[0]))


def test_missing_pin_and_the_net_it_left_open():
    """A net that has one pin because one pin is missing is the same slip, and says where the pin goes."""
    design = chain(
        'Q1 = { kind = "npn", model = "small-signal-npn", pins = { C = "V9", B = "OUT" } }\n'
        'R3 = { kind = "resistor", value = "1 kohm", pins = ["E", "GND"] }'
    )
    finding = assert_finds(Connectivity, design, parts=["Q1"])
    assert list(finding.nets) == ["E"]
    assert len(findings_of(design, Connectivity)) == 1
    assert_clean(Connectivity, mended(design, finding.remedies[0]))


@pytest.mark.parametrize(
    "part",
    [
        'R3 = { kind = "resistor", value = "1 kohm", pins = ["S", "S"] }',
        'Q1 = { kind = "npn", model = "small-signal-npn", pins = { C = "GND", B = "GND", E = "GND" } }',
    ],
)
def test_part_with_all_pins_on_one_net(part):
    """A part that connects a net to itself does nothing; a spare one may."""
    assert "all its pins" in assert_finds(Connectivity, chain(part)).message
    assert_clean(Connectivity, chain(part.replace(" }", ", spare = true }") if part.startswith("R") else
                                     part.replace("} }", "}, spare = true }")))  # fmt: skip


def test_shorted_part_beside_the_one_open_net(board):
    """A part shorted by a slip goes to the only net with one pin."""
    design = board(
        "dose_rate", ('pins = ["DP", "MID"]', 'pins = ["DP", "DP"]'), ('pins = ["E2", "DP"]', 'pins = ["E2", "DPP"]')
    )
    finding = assert_finds(Connectivity, design, parts=["R7"])
    assert sorted(finding.nets) == ["DP", "DPP"]


@pytest.mark.parametrize(
    ("name", "changes", "refs"),
    [
        ("gas_log", [('OUT = "DRIVE1"', 'OUT = "V15P"')], ["U1A"]),
        ("gas_log", [('OUT = "DRIVE1"', 'OUT = "GND"')], ["U1A"]),
        ("dose_rate", [('OUT = "O2"', 'OUT = "O1"')], ["U1A", "U1B"]),
    ],
)
def test_tied_outputs(board, name, changes, refs):
    """An output on a supply, on ground or on another output is told of."""
    found = findings_of(board(name, *changes), Connectivity)
    assert refs in [sorted(f.parts) for f in found if "tied to" in f.message]


def test_output_tied_by_a_link():
    """A link of zero ohm ties as well as a wire."""
    assert "tied to V9" in assert_finds(
        Connectivity, chain('R3 = { kind = "resistor", value = "0 ohm", pins = ["OUT", "V9"] }'), parts=["U1"]
    ).message  # fmt: skip


@pytest.mark.parametrize(
    "parts",
    [
        'C1 = { kind = "capacitor", value = "1 nF", pins = ["OUT", "X"] }\n'
        'C2 = { kind = "capacitor", value = "1 nF", pins = ["X", "GND"] }',
        'C1 = { kind = "capacitor", value = "1 nF", pins = ["IN", "X"] }\n'
        'U2 = { kind = "op-amp", model = "bifet-precision", pins = '
        '{ "IN+" = "X", IN- = "Y", OUT = "Y", "V+" = "V9", V- = "GND" } }',
        'I1 = { kind = "current-source", value = "1 uA", pins = { P = "X", N = "V9" } }\n'
        'C1 = { kind = "capacitor", value = "1 nF", pins = ["X", "GND"] }',
    ],
    ids=["between capacitors", "amplifier input", "current source"],
)
def test_net_without_a_path_to_ground(parts):
    """Capacitors, amplifier inputs and current sources are no path of direct current."""
    finding = assert_finds(Connectivity, chain(parts))
    assert list(finding.nets) == ["X"]
    assert "no path" in finding.message


@pytest.mark.parametrize(
    "parts",
    [
        'C1 = { kind = "capacitor", value = "1 nF", pins = ["OUT", "X"] }\n'
        'R3 = { kind = "resistor", value = "1 Mohm", pins = ["X", "GND"] }',
        'Q1 = { kind = "npn", model = "small-signal-npn", pins = { C = "V9", B = "OUT", E = "X" } }\n'
        'C1 = { kind = "capacitor", value = "1 nF", pins = ["X", "GND"] }',
        'B1 = { kind = "voltage-source", value = "1 V", pins = ["X", "OUT"] }\n'
        'C1 = { kind = "capacitor", value = "1 nF", pins = ["X", "GND"] }',
    ],
    ids=["resistor", "junction", "source"],
)
def test_paths_to_ground(parts):
    """Resistors, junctions, sources and outputs are paths."""
    assert_clean(Connectivity, chain(parts))


@pytest.mark.parametrize(
    ("name", "changes", "refs", "moves"),
    [
        ("gas_log", [('"V+" = "V15P", V- = "V15N"', '"V+" = "V15N", V- = "V15P"')], ["U1A", "U1B"], 4),
        ("gas_log", [('"V+" = "U2P", V- = "U2N"', '"V+" = "U2N", V- = "U2P"')], ["U2"], 2),
        (
            "dose_rate",
            [('OUT = "LEVEL", "V+" = "V5", "V-" = "GND"', 'OUT = "LEVEL", "V+" = "GND", "V-" = "V5"')],
            ["U2"],
            2,
        ),
    ],
)
def test_swapped_supply_pins(board, name, changes, refs, moves):
    """Supply pins exchanged are found, behind series resistors too, and two moves an amplifier mend them."""
    design = board(name, *changes)
    finding = assert_finds(Connectivity, design, parts=refs)
    assert "swapped" in finding.message
    assert [type(edit) for edit in finding.remedies[0].edits] == [Move] * moves
    assert_clean(Connectivity, mended(design, finding.remedies[0]))


@pytest.mark.parametrize(
    ("name", "old", "new", "to"),
    [
        ("gas_log", 'OUT = "DRIVE1", "V+" = "V15P"', 'OUT = "DRIVE1", "V+" = "V15N"', "V15P"),
        ("gas_log", 'OUT = "DRIVE1", "V+" = "V15P"', 'OUT = "DRIVE1", "V+" = "LOG2"', "V15P"),
        ("dose_rate", 'OUT = "LEVEL", "V+" = "V5"', 'OUT = "LEVEL", "V+" = "VCC"', "V5"),
    ],
    ids=["both on one rail", "on a signal", "on nothing"],
)
def test_unpowered_amplifier(board, name, old, new, to):
    """A supply pin that no supply feeds goes where those of the others are."""
    design = board(name, (old, new))
    finding = assert_finds(Connectivity, design)
    assert [edit.to for edit in finding.remedies[0].edits] == [to]
    assert_clean(Connectivity, mended(design, finding.remedies[0]))


def test_series_resistance_of_a_supply(board):
    """Ten to a hundred ohm are fine, more where the stated current drops little across it, 2.2 kohm are not."""
    for ohm in ("10 ohm", "100 ohm", "150 ohm"):  # 2.8 mA at most across 150 ohm: 0.42 V
        assert_clean(Connectivity, board("gas_log", ("22 ohm", ohm)))
    assert_finds(Connectivity, board("gas_log", ("22 ohm", "2.2 kohm")), parts=["U2"])


def test_diode_in_series_with_a_supply():
    """A diode that protects from reverse supply feeds the amplifier; turned round it does not."""
    diode = 'D1 = {{ kind = "diode", model = "small-signal-diode", pins = {{ A = "{}", K = "{}" }} }}'
    amplifier = (
        'U2 = { kind = "op-amp", model = "bifet-precision", pins = '
        '{ "IN+" = "GND", IN- = "F", OUT = "F", "V+" = "VD", V- = "GND" } }\n'
    )
    assert_clean(Connectivity, chain(amplifier + diode.format("V9", "VD")))
    assert_finds(Connectivity, chain(amplifier + diode.format("VD", "V9")), parts=["U2"])


@pytest.mark.parametrize(
    ("parts", "nets"),
    [
        (
            'R3 = { kind = "resistor", value = "0 ohm", pins = ["V5", "V9"] }',
            'V5 = { role = "supply", voltage = "5 V" }',
        ),
        ('B1 = { kind = "voltage-source", value = "1 V", pins = { P = "V9", N = "GND" } }', ""),
    ],
)
def test_loop_of_voltage_sources(parts, nets):
    """Two ideal sources in parallel have nothing that limits their current."""
    assert "loop of ideal voltage sources" in assert_finds(Connectivity, chain(parts, nets)).message


def test_link_between_grounds_is_no_loop_of_sources():
    """Joining two grounds at one point is good practice."""
    link = 'R3 = { kind = "resistor", value = "0 ohm", pins = ["GND", "AGND"] }'
    assert_clean(Connectivity, chain(link, 'AGND = { role = "ground" }'))


def test_net_that_no_part_touches(board):
    """A net named in [nets] and nowhere else is told of, one that a reference hangs on or a part left out is not."""
    spare_supply = ("[nets]\n", '[nets]\nV3 = { role = "supply", voltage = "3.3 V" }\n')
    finding = assert_finds(Connectivity, board("gas_log", spare_supply))
    assert list(finding.nets) == ["V3"]
    hangs = 'REF = { role = "reference", voltage = "1 V", from = "V3" }\nV3 = { role = "supply", voltage = "3.3 V" }'
    assert_clean(Connectivity, chain('R3 = { kind = "resistor", value = "1 kohm", pins = ["REF", "GND"] }', hangs))
    left_out = 'R3 = { kind = "resistor", value = "1 kohm", pins = ["V3", "GND"], mounted = false }'
    assert_clean(Connectivity, chain(left_out, 'V3 = { role = "supply", voltage = "3.3 V" }'))


def test_misspelt_input(board):
    """An input that nothing touches, and a net that reads like it, are one slip with one edit."""
    design = board("gas_log", ('["VIN", "SUM1"]', '["VlN", "SUM1"]'))
    finding = assert_finds(Connectivity, design, parts=["R1"])
    assert len(findings_of(design, Connectivity)) == 1
    assert_clean(Connectivity, mended(design, finding.remedies[0]))


def test_spare_parts_are_exempt():
    """An amplifier that is not used may leave its pins open."""
    pins = '{ "IN+" = "A", IN- = "B", OUT = "GND", "V+" = "C" }'
    spare = f'U2 = {{ kind = "op-amp", model = "bifet-precision", pins = {pins}, spare = true }}'
    assert_clean(Connectivity, chain(spare))
    assert findings_of(chain(spare.replace(", spare = true", "")), Connectivity)


@pytest.mark.parametrize(
    ("name", "changes", "title"),
    [
        ("gas_log", [('"V+" = "U2P", V- = "U2N"', '"V+" = "U2N", V- = "U2P"')], "swap V+ and V-"),
        (
            "steam_root",
            [('IN- = "S4", OUT = "VOUT", "V+" = "V15P"', 'IN- = "S4", OUT = "VOUT", "V+" = "VCC"')],
            "connect it to V15P",
        ),
    ],
)
def test_remedies_cure(board, cures, name, changes, title):
    """The one edit mends the board and brings nothing new, by all rules."""
    assert cures(board(name, *changes), Connectivity) == {title: []}


def test_a_doubled_letter_is_a_slip(board):
    """A net written with a character too many is moved to the one that was meant, and the design is whole again."""
    design = board("gas_log")
    net = next(n for n in design.nets if design.nets[n].role is None)
    doubled = net + net[-1]
    text = design.text.replace(f'"{net}"', f'"{doubled}"', 1)
    found = assert_finds("connectivity", design_from(text))
    assert any(Move(edit.key, net) == edit for remedy in found.remedies for edit in remedy.edits)
