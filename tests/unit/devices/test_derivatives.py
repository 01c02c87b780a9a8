"""The derivatives of the devices are those of their currents."""

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from rulecheck.devices import diode, transistor
from rulecheck.devices.constants import thermal_voltage

AT = np.array([[300.0]])
PARAMETERS = {
    "saturation_current": 2e-14,
    "emission_coefficient": 1.02,
    "forward_beta": 250.0,
    "reverse_beta": 3.0,
    "beta_exponent": 1.5,
    "early_voltage": 90.0,
    "knee_current": 0.02,
    "leakage_saturation_current": 5e-15,
    "leakage_emission_coefficient": 1.9,
    "bandgap": 1.11,
    "temperature_exponent": 3.1,
    "mismatch": 1e-4,
}


def hot_transistor():
    """A transistor with every term of its equations in use."""
    return transistor.heat({name: np.array([[value]]) for name, value in PARAMETERS.items()}, AT)


@given(st.floats(-5, 0.85), st.floats(-20, 0.6))
def test_transistor_derivatives_are_those_of_its_currents(v_be, v_bc):
    """Central differences of collector, base and transport currents agree with the derivatives given."""
    hot = hot_transistor()
    step = 1e-6
    here = transistor.respond(np.array([[v_be]]), np.array([[v_bc]]), hot)
    ends = {
        sign: (
            transistor.respond(np.array([[v_be + sign * step]]), np.array([[v_bc]]), hot),
            transistor.respond(np.array([[v_be]]), np.array([[v_bc + sign * step]]), hot),
        )
        for sign in (1, -1)
    }
    scale = 1e-9 + 1e-6 * abs(here.collector) / 0.025
    for current, by_be, by_bc in (("collector", "dc_be", "dc_bc"), ("base", "db_be", "db_bc")):
        for axis, name in enumerate((by_be, by_bc)):
            slope = (getattr(ends[1][axis], current) - getattr(ends[-1][axis], current)) / (2 * step)
            assert getattr(here, name) == pytest.approx(slope, rel=1e-5, abs=float(scale[0, 0]))


def test_currents_of_an_ideal_transistor_follow_the_exponential_law():
    """60 mV/decade law: kT/q·ln 10 more base-emitter voltage is ten times the current (textbook)."""
    ideal = PARAMETERS | {
        "emission_coefficient": 1.0, "early_voltage": np.inf, "knee_current": np.inf, "leakage_saturation_current": 0.0,
        "mismatch": 0.0,
    }  # fmt: skip
    hot = transistor.heat({name: np.array([[value]]) for name, value in ideal.items()}, AT)
    decade = float(thermal_voltage(AT)[0, 0]) * np.log(10)
    low, high = (
        transistor.respond(np.array([[v]]), np.array([[0.0]]), hot).collector[0, 0] for v in (0.6, 0.6 + decade)
    )
    assert high / low == pytest.approx(10.0, rel=1e-9)


@given(st.floats(-30, -1e-5) | st.floats(1e-5, 1.2))  # the reverse leakage has a kink at zero
def test_diode_conductance_is_the_slope_of_its_current(voltage):
    """Central differences agree with the conductance, reverse leakage included."""
    hot = diode.HotDiode(np.array([[1e-9]]), np.array([[0.045]]), np.array([[2e-9]]))
    step = 1e-6
    up, down = (diode.respond(np.array([[voltage + s]]), hot)[0] for s in (step, -step))
    current, conductance = diode.respond(np.array([[voltage]]), hot)
    assert conductance == pytest.approx(
        (up - down) / (2 * step), rel=1e-4, abs=1e-12 + 1e-6 * abs(float(current[0, 0]))
    )


@given(st.floats(-15, 15), st.floats(1.0, 1e4))
def test_clamp_with_resistance_satisfies_its_loop_equation(voltage, resistance):
    """Voltage across diode and resistance adds up to what was given (Kirchhoff), at any drive."""
    hot = diode.HotDiode(np.array([[1e-14]]), np.array([[0.02585]]), np.array([[0.0]]))
    current, _ = diode.respond_with_resistance(np.array([[voltage]]), hot, resistance)
    junction = 0.02585 * np.log1p(max(float(current[0, 0]) / 1e-14, -1 + 1e-16))
    if voltage > 0:
        assert junction + resistance * current[0, 0] == pytest.approx(voltage, rel=1e-9, abs=1e-9)
    else:
        assert -1.01e-14 <= current[0, 0] <= 0


def test_clamp_current_stays_finite_at_any_voltage():
    """A wild iterate of the solver asks for megavolts at any temperature, and gets a finite current without a warning."""
    for heat in (200.0, 300.0, 1000.0):
        hot = diode.heat_clamps(np.full((1, 5), heat))
        current, conductance = diode.respond_with_resistance(np.array([[-1e9, -1.0, 0.0, 1e3, 1e9]]), hot, 20.0)
        assert np.isfinite(current).all()
        assert np.isfinite(conductance).all()
