"""Bandwidth: against transfer functions of general libraries, slow changes of operating points, and limits."""

import control
import numpy as np
import pytest
from designs import board
from pieces import CURRENT, OUTPUT, VOLTAGE, amplifier, capacitor, diode, photodiode, resistor, solved

from rulecheck.analysis.bandwidth import bandwidth, respond
from rulecheck.analysis.conditions import Conditions
from rulecheck.analysis.review import Review
from rulecheck.testing import design_from

HALF_POWER = 20 * np.log10(np.sqrt(0.5))
BEHIND = VOLTAGE.replace('"1 V"]', '"1 V"], source_resistance = "1 kohm", source_capacitance = "1 nF"')


def test_amplifier_of_two_poles_against_a_control_library():
    """A gain of 11 with a capacitor in the feedback has the bandwidth that python-control finds."""
    points = solved(
        VOLTAGE,
        resistor("RF", "Y", "N", 100e3),
        resistor("RG", "N", "GND", 10e3),
        capacitor("CF", "Y", "N", 5e-12),
        amplifier("U1", "X", "N", "Y", ', second_pole = "300 kHz"'),
    )
    s = control.tf("s")
    gain = 1e5 / ((1 + s * 1e5 / (2 * np.pi * 1e6)) * (1 + s / (2 * np.pi * 300e3)))
    feedback = 10e3 / (10e3 + 100e3 / (1 + s * 100e3 * 5e-12))
    closed = control.feedback(gain, feedback)
    assert bandwidth(points, "X", "Y") == pytest.approx(closed.bandwidth(HALF_POWER) / (2 * np.pi), rel=1e-6)


def test_a_ladder_behind_a_source_resistance():
    """Two sections, the capacitance of the source in the first, fall to half power where the polynomial does."""
    points = solved(BEHIND, resistor("R1", "X", "Y", 2e3), capacitor("C1", "Y", "GND", 3e-9))
    # 1/(1 + s(R0 C0 + (R0 + R1) C1) + s² R0 C0 R1 C1), worked out by hand
    one, two = 1e3 * 1e-9 + 3e3 * 3e-9, 1e3 * 1e-9 * 2e3 * 3e-9
    squares = np.roots([two**2, one**2 - 2 * two, -1.0])
    assert bandwidth(points, "X", "Y") == pytest.approx(np.sqrt(squares.max()) / (2 * np.pi), rel=1e-9)


@pytest.mark.parametrize(("across", "falls"), [(10e-12, True), (100e-12, False), (200e-12, False)])
def test_a_capacitor_from_the_input_itself_counts(across, falls):
    """A divider of 10:1 with 900 pF below is flat with 100 pF above, falls with less, rises with more."""
    points = solved(
        VOLTAGE,
        resistor("R1", "X", "Y", 900e3),
        resistor("R2", "Y", "GND", 100e3),
        capacitor("C1", "X", "Y", across),
        capacitor("C2", "Y", "GND", 900e-12),
    )
    # |1 + sa|²/|1 + sb|² = 1/2 with a = R1 C1 and b = (R1 || R2)(C1 + C2)
    a, b = 900e3 * across, 90e3 * (across + 900e-12)
    wanted = 1 / np.sqrt(b**2 - 2 * a**2) / (2 * np.pi) if falls else np.inf
    assert bandwidth(points, "X", "Y") == pytest.approx(wanted, rel=1e-9)


JUNCTION = diode("D1", "Y", "GND", ', series_resistance = "10 ohm"')
BY_KIND = {
    "voltage": ("X", VOLTAGE, resistor("R", "X", "Y", 10e3), [0.5, 1.0]),
    "behind a resistance": ("X", BEHIND, resistor("R", "X", "Y", 10e3), [0.5, 1.0]),
    "current": ("X", CURRENT, resistor("R", "X", "Y", 10e3), [1e-6, 1e-4]),
    "light": ("D", OUTPUT, resistor("R", "Y", "GND", 10e3) + photodiode("D", "Y", "GND"), [1e-6, 1e-4]),
}


@pytest.mark.parametrize("kind", BY_KIND)
def test_gain_at_zero_frequency_is_the_slope_of_the_operating_points(kind):
    """For every kind of input, over a junction, as a slow change of it shows."""
    name, nets, parts, at = BY_KIND[kind]
    points = solved(nets, parts, JUNCTION, **{name: at})
    values = points.conditions.values
    step = 1e-4 * values[name]
    up, down = (
        Review(points.design).solve(Conditions({**values, name: values[name] + sign * step})).voltage("Y")
        for sign in (1, -1)
    )
    found = respond(points.placed[0].solution, name, "Y")
    assert found.dc[points.placed[0].index] == pytest.approx((up - down) / (2 * step), rel=1e-5)


def test_the_modal_form_is_the_solution_of_the_network_at_each_frequency():
    """On a log-ratio stage from millihertz to gigahertz, against a direct solution of the matrices."""
    review = Review(design_from(board(1)))
    solution = review.operating_points.placed[0].solution
    system, found = review.loops.islands[0].system, respond(solution, "X0", "Y0")
    rows, frequency = np.array([0, 50, 100]), np.geomspace(1e-3, 1e9, 25)
    drive = np.zeros((system.conductance.shape[-1], 1))
    drive[solution.network.nodes["S0"]] = 1e-5  # 100 kohm from the input
    s = 2j * np.pi * frequency[:, None, None]
    direct = np.linalg.solve(system.conductance[rows][:, None] + s * system.capacitance[rows][:, None], drive)
    direct = direct[..., solution.network.nodes["Y0"], 0]
    modal = found.at(np.broadcast_to(frequency, direct.shape), rows)
    assert np.abs(modal - direct).max() < 1e-9 * np.abs(direct).max()


def test_many_conditions_are_one_batch():
    """The bandwidth of a junction's node follows its current at each condition: g/(2π C)."""
    current = np.geomspace(1e-6, 1e-4, 7)
    parts = diode("D", "X", "GND"), capacitor("C", "X", "GND", 1e-9), resistor("R", "X", "Y", 1e3)
    found = bandwidth(solved(CURRENT, *parts, X=current), "X", "Y")
    slope = (current + 10e-15) / (1.380649e-23 * 298.15 / 1.602176634e-19)
    assert found == pytest.approx(slope / (2 * np.pi * 1e-9), rel=1e-6)


def test_equal_channels_have_equal_bandwidths_and_no_cross_talk():
    """Each channel answers to its own input; from another one nothing arrives, which is no figure."""
    points = Review(design_from(board(3))).operating_points
    alike = points.conditions.values["X0"] == points.conditions.values["X2"]
    own = bandwidth(points, "X0", "Y0")
    assert np.isfinite(own).all()
    assert own[alike] == pytest.approx(bandwidth(points, "X2", "Y2")[alike], rel=1e-9)
    assert np.isnan(bandwidth(points, "X1", "Y0")).all()


def test_without_a_gain_at_zero_frequency_there_is_no_figure():
    """Behind a coupling capacitor there is nothing to have fallen from."""
    points = solved(VOLTAGE, capacitor("C", "X", "Y", 1e-6), resistor("R", "Y", "GND", 1e3))
    assert np.isnan(bandwidth(points, "X", "Y")).all()


def test_without_stability_there_is_no_figure():
    """A stage with its inputs swapped has a linear solution, but no signal ever passes it."""
    ends = resistor("R1", "X", "N", 1e3), resistor("R2", "N", "Y", 1e3)
    sound = solved(VOLTAGE, *ends, amplifier("U1", "GND", "N", "Y"))
    swapped = solved(VOLTAGE, *ends, amplifier("U1", "N", "GND", "Y"))
    assert bandwidth(sound, "X", "Y") == pytest.approx(0.5e6, rel=1e-4)
    assert swapped.linear("U1").all()
    assert np.isnan(bandwidth(swapped, "X", "Y")).all()


@pytest.mark.parametrize("output", ["VREF", "X", "FREE"])
def test_an_output_that_a_source_holds_or_nothing_touches_has_no_figure(output):
    """References, the input net itself, and a net without parts."""
    nets = VOLTAGE + 'FREE = { role = "output" }\n'
    points = solved(nets, resistor("R1", "X", "Y", 1e3), resistor("R2", "Y", "VREF", 1e3))
    assert np.isnan(bandwidth(points, "X", output)).all()
