"""Junction temperatures of published sums."""

from __future__ import annotations

import pytest

from .builder import amplifier, figures, resistor, supply, voltage_input


def loaded_follower(supply_current, loads, theta, ambient):
    """Junction temperature and heat of a follower on +-5 V with half a rail across its loads."""
    parts = {
        "U1": amplifier("VIN", "OUT", "OUT", supply_current=supply_current),
        **{f"RL{k}": resistor("OUT", "GND", value) for k, value in enumerate(loads)},
    }
    nets = {"VP": supply(5.0), "VN": supply(-5.0), "VIN": voltage_input(-2.5, 2.5)}
    found = figures(parts, nets, [{"VIN": 2.5, "ambient": ambient}], packages={"U1": {"theta_ja": f"{theta} K/W"}})
    temperature = found["parts"]["U1"]["temperature"][0]
    return temperature - 273.15, (temperature - ambient) / theta


@pytest.mark.parametrize(
    ("supply_current", "loads", "theta", "ambient", "power", "junction"),
    [
        (23.5e-3, (100.0, 500.0), 64.9, 105.0, 0.3100, 125.119),
        (6.2e-3, (20.0, 804.0), 150.0, 85.0, 0.38227, 142.34),
    ],
    ids=["OPA817", "OPA690"],
)
def test_junction_of_a_loaded_amplifier(supply_current, loads, theta, ambient, power, junction):
    """Quiescent power plus half a rail into the load: 310 mW and 125.1 degC, 382 mW and 142 degC.

    TI OPA817 data sheet SBOS847B; TI OPA690 data sheet SBOS223F p. 25.
    """
    found, heat = loaded_follower(supply_current, loads, theta, ambient + 273.15)
    assert heat == pytest.approx(power, rel=1e-4)
    assert found == pytest.approx(junction, abs=5e-3)


def idle(supplies, currents, theta, ambient):
    """Junction temperature of idle amplifiers that share a package [degC]."""
    parts = {
        f"U{k}": amplifier("GND", f"O{k}", f"O{k}", supply_current=current, package="U")
        for k, current in enumerate(currents)
    }
    nets = {"VP": supply(supplies[0]), "VN": supply(supplies[1])}
    found = figures(parts, nets, [{"ambient": ambient + 273.15}], packages={"U": {"theta_ja": f"{theta} K/W"}})
    return [found["parts"][ref]["temperature"][0] - 273.15 for ref in parts]


def test_two_amplifiers_in_a_package():
    """Two amplifiers of 4 mA on +-15 V make 0.24 W and 54 degC from 30 degC at 100 K/W.

    show-my-homework.com, OPA2134 (2014).
    """
    assert idle((15.0, -15.0), (4e-3, 4e-3), 100.0, 30.0) == pytest.approx([54.0, 54.0], abs=2e-3)


def test_ambient_that_a_junction_allows():
    """265 mW at 150 K/W reach 125 degC from 85.25 degC.

    Analog Devices EngineerZone DOC-14012.
    """
    assert idle((5.0, -5.0), (26.5e-3,), 150.0, 85.25) == pytest.approx([125.0], abs=2e-3)


def test_derating_of_a_small_package():
    """625 mW at 200 K/W raise a junction by 125 K.

    2N3904 data sheets: 625 mW, 200 degC/W (their 2.8 mW/degC belongs to an older rating).
    """
    assert idle((12.5, -12.5), (25e-3,), 200.0, 25.0) == pytest.approx([150.0], abs=2e-3)


def test_chain_of_thermal_resistances():
    """5 W through 3, 1 and 8 K/W from 25 degC: junction 85 degC, case 70 degC, sink 65 degC.

    theprimecalculator.com, thermal chain.
    """
    parts = {
        "U1": amplifier("GND", "O", "O", supply_current=0.5),
        "RC": resistor("VP", "GND", 1e5, package="CASE"),
        "RS": resistor("VP", "GND", 1e5, package="SINK"),
    }
    nets = {"VP": supply(5.0), "VN": supply(-5.0)}
    packages = {"CASE": {}, "SINK": {"theta_ja": "8 K/W"}}
    links = [
        {"between": ["U1", "CASE"], "theta": "3 K/W"},
        {"between": ["CASE", "SINK"], "theta": "1 K/W"},
    ]
    found = figures(parts, nets, [{"ambient": 298.15}], packages=packages, thermal_links=links)["parts"]
    celsius = [found[ref]["temperature"][0] - 273.15 for ref in ("U1", "RC", "RS")]
    assert celsius == pytest.approx([85.0, 70.0, 65.0], abs=2e-3)
