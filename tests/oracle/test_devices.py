"""The device functions against the same equations in 50 digits (mpmath), derivatives included."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest

from rulecheck.devices import diode, transistor

PRECISION = 50
TEMPERATURES = (253.15, 298.15, 373.15)
TRANSISTOR = {
    "saturation_current": 25e-15,
    "emission_coefficient": 1.02,
    "forward_beta": 320.0,
    "reverse_beta": 3.0,
    "beta_exponent": 1.4,
    "early_voltage": 110.0,
    "knee_current": 30e-3,
    "leakage_saturation_current": 4e-15,
    "leakage_emission_coefficient": 1.9,
    "bandgap": 1.11,
    "temperature_exponent": 3.2,
    "mismatch": 80e-6,
}
DIODE = {
    "saturation_current": 1.5e-9,
    "emission_coefficient": 1.7,
    "bandgap": 1.12,
    "temperature_exponent": 3.0,
    "reverse_leakage": 2e-9,
    "leakage_doubling": 9.0,
}
BIASES = [(0.75, -5.0), (0.6, -0.1), (0.3, 0.3), (1e-9, -12.0), (-3.0, 0.65), (0.7, 0.68), (-6.0, -20.0)]


def constants(temperature):
    """Thermal voltage, ratio to 25 degC and the exponent of the bandgap per volt."""
    k, q = mpmath.mpf("1.380649e-23"), mpmath.mpf("1.602176634e-19")
    t, tn = mpmath.mpf(temperature), mpmath.mpf(298.15)
    return k * t / q, t / tn, q / k * (1 / tn - 1 / t)


def transistor_currents(temperature):
    """Collector and base current and the transport current of an npn as functions of V_BE and V_BC."""
    p = {name: mpmath.mpf(value) for name, value in TRANSISTOR.items()}
    vt, ratio, per_volt = constants(temperature)
    growth = ratio ** p["temperature_exponent"] * mpmath.exp(p["bandgap"] * per_volt)
    n_vt, nl_vt = p["emission_coefficient"] * vt, p["leakage_emission_coefficient"] * vt
    leak = p["leakage_saturation_current"] * growth ** (1 / p["leakage_emission_coefficient"])
    beta_f, beta_r = (p[beta] * ratio ** p["beta_exponent"] for beta in ("forward_beta", "reverse_beta"))

    def parts(vbe, vbc):
        forward = p["saturation_current"] * growth * mpmath.expm1((vbe + p["mismatch"]) / n_vt)
        reverse = p["saturation_current"] * growth * mpmath.expm1(vbc / n_vt)
        charge = (1 + mpmath.sqrt(1 + 4 * forward / p["knee_current"])) / (2 * (1 - vbc / p["early_voltage"]))
        return forward, reverse, charge

    def collector(vbe, vbc):
        forward, reverse, charge = parts(vbe, vbc)
        return (forward - reverse) / charge - reverse / beta_r

    def base(vbe, vbc):
        forward, reverse, _ = parts(vbe, vbc)
        return forward / beta_f + reverse / beta_r + leak * mpmath.expm1((vbe + p["mismatch"]) / nl_vt)

    def transport(vbe, vbc):
        forward, _, charge = parts(vbe, vbc)
        return forward / charge

    return collector, base, transport


def column(*values):
    """Values of one device over conditions."""
    return np.array(values, dtype=float)[:, None]


@pytest.mark.parametrize("temperature", TEMPERATURES)
def test_transistor(temperature):
    """Currents and every derivative of a transistor are those of its equations from cut-off to saturation."""
    hot = transistor.heat(
        {name: np.array([[value]]) for name, value in TRANSISTOR.items()},
        np.full((len(BIASES), 1), temperature),
    )
    vbe, vbc = (column(*side) for side in zip(*BIASES, strict=True))
    found = transistor.respond(vbe, vbc, hot)
    with mpmath.workdps(PRECISION):
        collector, base, transport = transistor_currents(temperature)
        for k, bias in enumerate(BIASES):
            be, bc = (mpmath.mpf(v) for v in bias)
            wanted = {
                "collector": collector(be, bc),
                "base": base(be, bc),
                "dc_be": mpmath.diff(collector, (be, bc), (1, 0)),
                "dc_bc": mpmath.diff(collector, (be, bc), (0, 1)),
                "db_be": mpmath.diff(base, (be, bc), (1, 0)),
                "db_bc": mpmath.diff(base, (be, bc), (0, 1)),
                "transport_be": mpmath.diff(transport, (be, bc), (1, 0)),
            }
            for name, value in wanted.items():
                tolerance = {"rel": 1e-11, "abs": 1e-28}
                assert getattr(found, name)[k, 0] == pytest.approx(float(value), **tolerance), (name, bias)


@pytest.mark.parametrize("temperature", TEMPERATURES)
def test_diode(temperature):
    """Current and conductance of a diode are those of its equation, with its leakage in reverse."""
    voltages = (0.8, 0.3, 1e-9, -0.05, -0.5, -60.0)
    hot = diode.heat(
        {name: np.array([[value]]) for name, value in DIODE.items()},
        np.full((len(voltages), 1), temperature),
    )
    current, conductance = diode.respond(column(*voltages), hot)
    with mpmath.workdps(PRECISION):
        p = {name: mpmath.mpf(value) for name, value in DIODE.items()}
        vt, ratio, per_volt = constants(temperature)
        n = p["emission_coefficient"]
        i_s = (
            p["saturation_current"] * ratio ** (p["temperature_exponent"] / n) * mpmath.exp(p["bandgap"] / n * per_volt)
        )
        leak = p["reverse_leakage"] * 2 ** ((mpmath.mpf(temperature) - mpmath.mpf(298.15)) / p["leakage_doubling"])

        def law(v):
            return i_s * mpmath.expm1(v / (n * vt)) - leak * max(0, -mpmath.expm1(v / (n * vt)))

        for k, v in enumerate(voltages):
            assert current[k, 0] == pytest.approx(float(law(mpmath.mpf(v))), rel=1e-11)
            assert conductance[k, 0] == pytest.approx(float(mpmath.diff(law, v)), rel=1e-9, abs=1e-28)
