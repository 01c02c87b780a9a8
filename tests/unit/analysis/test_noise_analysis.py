"""Noise: Nyquist's theorem on circuits in equilibrium, resonances, contributions, and where there is no figure."""

import numpy as np
import pytest
from designs import board
from pieces import OUTPUT, VOLTAGE, amplifier, capacitor, diode, photodiode, resistor, solved, transistor

from rulecheck.analysis.bandwidth import respond
from rulecheck.analysis.noise import noise
from rulecheck.analysis.noise_sources import transistor_flows
from rulecheck.analysis.review import Review
from rulecheck.devices import transistor as device
from rulecheck.devices.transistor import HotTransistor
from rulecheck.errors import AnalysisError
from rulecheck.testing import design_from

BOLTZMANN = 1.380649e-23  # J/K, exact (SI 2019)
DARK = 'X = { role = "input", drive = "current", range = ["0 A", "1 mA"], source_resistance = "1 Gohm" }\n'
POTENTIOMETER = 'RV = { kind = "potentiometer", value = "50 Mohm", pins = { END1 = "X", WIPER = "W", END2 = "GND" } }\n'
LEAKY = """, saturation_current = "1 nA", leakage_saturation_current = "2 nA", leakage_emission_coefficient = 1, \
early_voltage = "80 V", knee_current = "1 mA\""""
AT_REST = {
    "resistors": resistor("R1", "X", "W", 1e6) + resistor("R2", "W", "GND", 3e6) + capacitor("C1", "W", "GND", 1e-9),
    "potentiometer": POTENTIOMETER + capacitor("C1", "W", "GND", 1e-12),
    "diode": diode(
        "D1", "X", "GND", ', reverse_leakage = "20 nA", series_resistance = "100 kohm", capacitance = "1 nF"'
    ),
    "photodiode": photodiode("D1", "X", "GND", ', shunt_resistance = "100 Mohm", capacitance = "1 nF"'),
    "collector": transistor("Q1", "X", "GND", "GND", LEAKY),
    "base": transistor("Q1", "GND", "X", "GND", LEAKY + ', base_resistance = "1 Mohm"'),
    "emitter": transistor("Q1", "GND", "GND", "X", LEAKY + ', bulk_emitter_resistance = "1 Mohm"'),
    "floating": transistor("Q1", "X", "B", "GND", LEAKY) + resistor("RB", "B", "GND", 20e6),
}


@pytest.mark.parametrize("kind", AT_REST)
@pytest.mark.parametrize("ambient", [273.15, 320.0])
def test_in_equilibrium_the_noise_is_that_of_the_resistance(kind, ambient):
    """Without any source the density is 4kT Re Z at every frequency, whatever the parts (Nyquist, 1928).

    Emission coefficients are 1: with others the laws of the junctions themselves are not those of equilibrium.
    """
    points = solved(DARK, AT_REST[kind], X=[0.0], ambient=[ambient])
    found = noise(points, "X", (1.0, 1e6))
    placed = next(p for p in points.placed if "X" in p.nets)
    impedance = respond(placed.solution, "X", "X").at(found.frequency[None, :])[placed.index]
    assert found.density**2 == pytest.approx(4 * BOLTZMANN * ambient * impedance.real, rel=1e-6)


@pytest.mark.parametrize("quality", [0.4, 3.0, 30.0, 300.0])
def test_a_resonance_is_integrated_in_full(quality):
    """White noise through two poles has the power ``H0^2 w0 Q/4``, the sharper the higher.

    W. B. Davenport and W. L. Root, "An Introduction to the Theory of Random Signals and Noise" (1958), table of
    integrals (memory). The resistor of a transimpedance amplifier, over a band 1e4 times either side.
    """
    rf, total, gain, unity = 1e5, 1e-9, 1e8, 2 * np.pi * 1e9
    # Y = -i RF/(1 + s RF CF + (1/A0 + s/wu)(1 + s RF (CF + CS))), worked out by hand
    natural = np.sqrt((1 + 1 / gain) * unity / (rf * total))
    cf = float(((1 + 1 / gain) / (natural * quality) - 1 / unity - rf * total / gain) / rf)
    points = solved(
        VOLTAGE,
        resistor("RF", "N", "Y", rf),
        capacitor("CS", "N", "GND", total - cf),
        capacitor("CF", "N", "Y", cf),
        amplifier("U1", "GND", "N", "Y").replace("1e5", "1e8").replace("1 MHz", "1 GHz"),
    )
    corner = float(natural / (2 * np.pi))
    found = noise(points, "Y", (corner * 1e-4, corner * 1e4))
    power = next(c for c in found.contributions if c.owner == "RF").rms[0] ** 2
    assert power == pytest.approx(4 * BOLTZMANN * 298.15 * rf * natural * quality / 4, rel=3e-4)


def test_contributions_make_up_the_whole():
    """Their squares add up to that of the total, they are sorted, and the density integrates to the same."""
    points = Review(design_from(board(1))).operating_points
    picked = Review(points.design).solve(points.conditions.take(np.arange(0, points.conditions.size, 40)))
    found = noise(picked, "Y0", (1.0, 1e6))
    assert np.sqrt(sum(c.rms**2 for c in found.contributions)) == pytest.approx(found.rms, rel=1e-12)
    worst = [c.rms.max() for c in found.contributions]
    assert worst == sorted(worst, reverse=True)
    here = [c.rms[2] for c in found.sorted_at(2)]
    assert here == sorted(here, reverse=True)
    assert len(here) == len(worst)
    by_trapezia = np.sqrt(np.trapezoid(found.density**2, found.frequency, axis=1))
    assert by_trapezia == pytest.approx(found.rms, rel=0.02)


def test_equal_channels_have_their_own_names():
    """What disturbs the second channel is called after its parts, and is as much as in the first."""
    points = Review(design_from(board(2))).solve(Review(design_from(board(2))).conditions.take([0]))
    one, two = (noise(points, net, (1.0, 1e5)) for net in ("Y0", "Y1"))
    assert {c.owner for c in two.contributions} == {
        c.owner.replace("_0", "_1").replace("Y0", "Y1") for c in one.contributions
    }
    assert two.contributions[0].element == one.contributions[0].element == "collector current"


@pytest.mark.parametrize(("base", "collector"), [(0.6, 0.6), (0.6, 0.59), (0.6, 0.55), (0.6, -5.0), (0.3, 0.6)])
def test_both_flows_of_a_transistor_make_noise(base, collector):
    """``I_F + I_R + 2 I_S`` of the transport current, whether it saturates, conducts forward or backward.

    The law of a transistor without Early effect and knee, by hand.
    """
    vt = 0.0257
    figures = {
        "saturation": 1e-14, "forward_beta": 100.0, "reverse_beta": 2.0, "early": np.inf, "knee": np.inf,
        "leakage": 1e-15, "slope": vt, "leakage_slope": 2 * vt, "mismatch": 0.0, "critical": 0.8,
    }  # fmt: skip
    hot = HotTransistor(**{name: np.array([[value]]) for name, value in figures.items()})
    v_be, v_bc = np.array([[base]]), np.array([[collector]])
    flows = transistor_flows(v_be, v_bc, hot, device.respond(v_be, v_bc, hot))
    forward, back = (1e-14 * np.exp(v / vt) for v in (base, collector))
    assert flows["collector current"] == pytest.approx(forward + back, rel=1e-9)
    assert flows["base-collector current"] == pytest.approx((back + 1e-14) / 2, rel=1e-9)
    leak = 1e-15 * (np.exp(base / vt / 2) + 1)
    assert flows["base current"] == pytest.approx((forward + 1e-14) / 100 + leak, rel=1e-9)


NOISY = ', voltage_noise = "10 nV/sqrt(Hz)", current_noise = "1 pA/sqrt(Hz)"'
CORNERS = ', voltage_noise_corner = "10 Hz", current_noise_corner = "10 Hz"'


@pytest.mark.parametrize(
    ("figures", "missing"),
    [
        ("", {"U1": ("voltage_noise", "current_noise")}),
        (NOISY, {"U1": ("voltage_noise_corner", "current_noise_corner")}),
        (NOISY + CORNERS, {}),
    ],
)
def test_amplifiers_without_noise_figures_are_named(figures, missing):
    """Silence for want of data is not quiet: the parameters that lack are told."""
    points = solved(VOLTAGE, resistor("R", "X", "P", 1e3), amplifier("U1", "P", "Y", "Y", figures))
    assert noise(points, "Y", (1.0, 1e3)).missing == missing


def test_an_amplifier_at_its_limit_passes_no_noise():
    """Its own input noise does not reach the output, nor does that of what drives it."""
    parts = resistor("R", "X", "P", 1e6), amplifier("U1", "P", "GND", "O", NOISY + ', output_resistance = "100 ohm"')
    out = resistor("RL", "O", "Y", 1e3), resistor("R2", "Y", "GND", 1e3)
    found = noise(solved(VOLTAGE, *parts, *out, X=[1.0]), "Y", (1.0, 1e3))
    assert {c.owner for c in found.contributions if c.rms[0] > 0} == {"RL", "R2"}


def test_where_it_is_not_stable_there_is_no_figure():
    """Nor a share of it."""
    ends = resistor("R1", "X", "N", 1e3), resistor("R2", "N", "Y", 1e3)
    found = noise(solved(VOLTAGE, *ends, amplifier("U1", "N", "GND", "Y", NOISY)), "Y", (1.0, 1e3))
    assert np.isnan([found.rms, *(c.rms for c in found.contributions)]).all()
    assert np.isnan(found.density).all()


@pytest.mark.parametrize("output", ["VREF", "FREE"])
def test_what_a_source_holds_is_quiet(output):
    """References have no noise here, and a net without parts has none."""
    nets = VOLTAGE + 'FREE = { role = "output" }\n'
    found = noise(solved(nets, resistor("R", "VREF", "Y", 1e3)), output, (1.0, 1e3))
    assert (found.rms, found.contributions) == (np.zeros(1), ())
    assert not found.density.any()


@pytest.mark.parametrize("band", [(0.0, 1e3), (1e3, 1.0), (1.0, 1.0)])
def test_a_band_that_is_none_is_refused(band):
    """1/f noise has no power down to 0 Hz."""
    with pytest.raises(AnalysisError, match="no noise band"):
        noise(solved(OUTPUT, resistor("R", "GND", "Y", 1e3)), "Y", band)
