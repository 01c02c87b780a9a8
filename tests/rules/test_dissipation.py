"""Parts against their ratings of power, current and temperature. The boards are invented, parts added to them too."""

import pytest
from rulecheck_rules.dissipation import Dissipation

from rulecheck.api import Severity
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

V15 = {"gas_log": 15 * 1.03, "log_ratio": 15 * 1.05, "steam_root": 15 * 1.05}  # V, the supply at its highest
VREF = 5.0  # V, of the boards with followers


def with_part(text):
    """Change that adds a part to a board."""
    return ("[parts]\n", f"[parts]\n{text}\n")


def load(ohm, watt):
    """A resistor across a supply."""
    return with_part(f'R90 = {{ kind = "resistor", value = "{ohm}", power = "{watt}", pins = ["V15P", "GND"] }}')


def follower(ohm, extra=""):
    """An emitter follower that feeds a resistor from the reference."""
    return with_part(
        f'R90 = {{ kind = "resistor", value = "{ohm}", power = "2 W", pins = ["FED", "GND"] }}\n'
        f'Q90 = {{ kind = "npn", model = "small-signal-npn"{extra}, '
        'pins = { C = "V15P", B = "VREF", E = "FED" } }'
    )


LAMP = (
    'D90 = { kind = "diode", model = "small-signal-diode", forward_current = "100 mA", pins = { A = "V15P", K = "LAMP" } }\n'
    'R90 = { kind = "resistor", value = "270 ohm", power = "5 W", pins = ["LAMP", "GND"] }'
)


@pytest.mark.parametrize("name", ["gas_log", "steam_root", "log_ratio", "light_ratio"])
def test_sound_boards(board, name):
    """Boards whose parts carry microamperes are clean."""
    assert_clean(Dissipation, board(name))


@pytest.mark.parametrize("name", list(V15))
@pytest.mark.parametrize(("watt", "severity"), [(0.5, Severity.MAJOR), (0.75, Severity.MINOR), (1.0, None)])
def test_power_of_a_resistor(board, name, watt, severity):
    """Over its rating a resistor is a major finding, over 60 % of it a minor one, below that none."""
    design = board(name, load("470 ohm", f"{watt} W"))
    if severity is None:
        assert_clean(Dissipation, design)
        return
    finding = assert_finds(Dissipation, design, {"R90"})
    assert finding.severity is severity
    assert finding.evidence[0].value == pytest.approx(V15[name] ** 2 / 470, rel=1e-6)  # Ohm and Joule
    assert finding.evidence[0].limit == pytest.approx(watt * (1 if severity is Severity.MAJOR else 0.6))


@pytest.mark.parametrize("name", list(V15))
def test_a_larger_resistor_cures(board, cures, name):
    """The next usual rating that leaves 40 % brings nothing new, by all rules."""
    title = "take a resistor of 1 W for R90"
    assert cures(board(name, load("470 ohm", "0.25 W")), Dissipation, title) == {title: []}


def test_no_single_resistor_takes_it(board):
    """Beyond the usual ratings the remedy says that several are needed."""
    (remedy,) = assert_finds(Dissipation, board("gas_log", load("10 ohm", "1 W")), {"R90"}).remedies
    assert not remedy.edits


@pytest.mark.parametrize(("name", "ohm"), [("steam_root", "120 ohm"), ("log_ratio", "100 ohm")])
def test_hot_junction(board, name, ohm):
    """A follower that drops most of its supply is too hot; the temperature is that of its heat in its package."""
    finding = assert_finds(Dissipation, board(name, follower(ohm)), {"Q90"})
    assert finding.severity is Severity.MAJOR
    temperature = finding.evidence[0].value
    assert temperature > 273.15 + 150
    resistance = float(ohm.split()[0])
    # V_BE falls to somewhere between 0.4 and 0.8 V; the heat is what it leaves of the reference times V_CE
    heat = [(VREF - vbe) / resistance * (V15[name] - VREF + vbe) for vbe in (0.8, 0.4)]
    ambient = finding.conditions["ambient"]
    assert ambient + 350 * heat[0] < temperature < ambient + 350 * heat[1]


@pytest.mark.parametrize(("name", "ohm"), [("steam_root", "330 ohm"), ("log_ratio", "240 ohm")])
def test_warm_junction(board, name, ohm):
    """The same followers at half the current are clean."""
    assert_clean(Dissipation, board(name, follower(ohm)))


@pytest.mark.parametrize(("name", "ohm"), [("steam_root", "120 ohm"), ("log_ratio", "100 ohm")])
def test_a_collector_resistor_cures(board, name, ohm):
    """A resistor in the collector takes its share, and is itself not overloaded."""
    design = board(name, follower(ohm))
    (remedy,) = (r for r in assert_finds(Dissipation, design, {"Q90"}).remedies if r.edits)
    assert_clean(Dissipation, mended(design, remedy))


def test_junctions_of_one_package_are_one_finding(board):
    """Two transistors of a die too hot together are told of once."""
    second = 'Q91 = { kind = "npn", model = "small-signal-npn", package = "P9", '
    second += 'pins = { C = "V15P", B = "GND", E = "V15N2" } }\n'
    second += 'R91 = { kind = "resistor", value = "1 kohm", pins = ["V15N2", "V15N"] }'
    die = ("[matching.log]", '[packages.P9]\ndie = "single"\n\n[matching.log]')
    design = board("steam_root", follower("120 ohm", ', package = "P9"'), with_part(second), die)
    assert [set(f.parts) for f in findings_of(design, Dissipation)] == [{"Q90", "Q91"}]


def test_an_overload_is_told_of_once(board):
    """A transistor over its current is too hot through that: one finding, about the current."""
    (finding,) = findings_of(board("log_ratio", follower("100 ohm", ', collector_current = "20 mA"')), Dissipation)
    assert finding.subject == "current"
    assert finding.evidence[0].limit == pytest.approx(20e-3)


@pytest.mark.parametrize("name", ["gas_log", "steam_root"])
def test_diode_within_its_current(board, name):
    """A diode that carries half its rating is clean."""
    assert_clean(Dissipation, board(name, with_part(LAMP)))


@pytest.mark.parametrize("name", ["gas_log", "steam_root"])
def test_forward_current_of_a_diode(board, name):
    """A diode is judged by what it carries forward, at the highest supply."""
    finding = assert_finds(Dissipation, board(name, with_part(LAMP.replace("270", "100"))), {"D90"})
    assert finding.evidence[0].value == pytest.approx((15 * 1.03 - 0.9) / 100, rel=0.05)  # about 0.9 V forward


def test_log_transistors_are_left_alone(board):
    """What a signal drives through a log transistor is another rule's finding."""
    large = ('R1 = { kind = "resistor", value = "100 kohm"', 'R1 = { kind = "resistor", value = "220 ohm"')
    assert_clean(Dissipation, board("log_ratio", large))


def test_nothing_is_said_where_feedback_is_positive(board):
    """Where an amplifier's loop would balance with its inputs swapped says nothing of the parts about it."""
    swapped = ('pins = { "IN+" = "GND", IN- = "S1"', 'pins = { "IN+" = "S1", IN- = "GND"')
    assert_clean(Dissipation, board("log_ratio", swapped))
