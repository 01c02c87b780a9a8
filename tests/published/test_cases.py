"""The numeric cases: figures of another solver of the equations for four designs and their faults.

Tolerances are those of ``cases/README.md``: nets 1e-6 of reading or of 1 mV, temperatures 2 mK, margins 0.1
degrees, rightmost natural frequency 1e-3, damping 0.005; in faults nets to 1 mV and clamp currents to 1 %.
"""

from __future__ import annotations

import functools
import json
from pathlib import Path

import pytest

from rulecheck.testing import fault_figures_of, figures_of

CASES = Path(__file__).parent / "cases"
STEADY = ("log_stage", "cube_root", "current_ratio", "heated_pair")
STABLE = STEADY[:3]
STATES = {0: "linear", 1: "high", -1: "low"}


def read(name):
    """Text of a file of the cases."""
    return (CASES / name).read_text("utf-8")


def expected(name):
    """Records of a case."""
    return json.loads(read(f"{name}.expected.json"))


@functools.cache
def figures(name):
    """The program's figures of a case at all its points."""
    points = [record["point"] for record in expected(name)]
    return figures_of(read(f"{name}.toml"), points, read("case_parts.toml"))


@functools.cache
def fault_figures(name):
    """The program's figures of a case at its fault scenarios, which keep their place in the list."""
    points = [record["point"] for record in expected("faults") if record["design"] == name]
    return fault_figures_of(read(f"{name}.toml"), points, read("case_parts.toml"))


def worst(pairs, allowed):
    """Those of the named pairs of found and expected that differ by more than is allowed."""
    return {
        key: (found, wanted)
        for key, (found, wanted) in pairs.items()
        if found is None or not abs(found - wanted) <= allowed(wanted)
    }


def paired(records, series, key):
    """Found and expected figures of every record by name."""
    return {
        (k, name): (series(name)[k], wanted) for k, record in enumerate(records) for name, wanted in record[key].items()
    }


@pytest.mark.parametrize("name", STEADY)
def test_nets(name):
    """Every net agrees to 1e-6 of its reading, or of 1 mV where that is smaller."""
    found = figures(name)
    assert all(found["converged"])
    pairs = paired(expected(name), found["nets"].__getitem__, "nets")
    assert worst(pairs, lambda wanted: 1e-6 * max(abs(wanted), 1e-3)) == {}


@pytest.mark.parametrize("name", STEADY)
def test_states(name):
    """Every amplifier is in the state expected; what is not listed is linear."""
    parts = figures(name)["parts"]
    amplifiers = {ref: table["state"] for ref, table in parts.items() if "state" in table}
    wanted = {ref: [STATES[record["state"].get(ref, 0)] for record in expected(name)] for ref in amplifiers}
    assert amplifiers
    assert amplifiers == wanted


@pytest.mark.parametrize("name", STABLE)
@pytest.mark.parametrize(
    ("key", "relative", "absolute"),
    [
        ("phase_margin", 0.0, 0.1),
        ("crossover", 1e-3, 0.0),
        ("modulus_margin", 0.0, 1e-3),
        (
            "dc_return_ratio",
            1e-2,
            0.0,
        ),  # the cases give the real part at 0.1 Hz, up to 0.7 % below that at rest
    ],
)
def test_loops(name, key, relative, absolute):
    """Margins, crossovers and return ratios of every amplifier agree."""
    found = figures(name)["loops"]
    pairs = {
        (k, ref): (found[ref][key][k], loop[key])
        for k, record in enumerate(expected(name))
        for ref, loop in record["loops"].items()
    }
    assert worst(pairs, lambda wanted: relative * abs(wanted) + absolute) == {}


@pytest.mark.parametrize("name", STABLE)
def test_natural_frequencies(name):
    """The rightmost natural frequency agrees to 1e-3 and the least damping to 0.005."""
    found = figures(name)["natural_frequencies"]
    records = dict(enumerate(expected(name)))
    rightmost = {k: (found["rightmost"][k], record["rightmost"]) for k, record in records.items()}
    damping = {k: (found["least_damping"][k], record["least_damping"]) for k, record in records.items()}
    assert worst(rightmost, lambda wanted: 1e-3 * abs(wanted)) == {}
    assert worst(damping, lambda wanted: 0.005) == {}


def test_temperatures():
    """Every part of the heated pair is at its temperature within 2 mK."""
    parts = figures("heated_pair")["parts"]
    pairs = {
        (k, ref): (parts[ref]["temperature"][k], wanted)
        for k, record in enumerate(expected("heated_pair"))
        for ref, wanted in record["temperature"].items()
        if ref in parts and "temperature" in parts[ref]
    }
    assert {ref for _, ref in pairs} >= {"Q1", "Q2", "U1", "U2", "U3", "R1", "R4"}
    assert worst(pairs, lambda wanted: 2e-3) == {}


def test_dissipation():
    """The heat of the packages that have a way to ambient shows in their temperatures.

    M1 (180 K/W) and U3 (120 K/W) are linked by 60 K/W, so both rises together give both powers back.
    """
    parts = figures("heated_pair")["parts"]
    for k, record in enumerate(expected("heated_pair")):
        pair, output = (parts[ref]["temperature"][k] - record["point"]["ambient"] for ref in ("Q1", "U3"))
        between = (pair - output) / 60
        assert pair / 180 + between == pytest.approx(record["dissipation"]["M1"], abs=5e-5)
        assert output / 120 - between == pytest.approx(record["dissipation"]["U3"], abs=5e-5)


FAULTS = [
    (record["design"], sum(r["design"] == record["design"] for r in expected("faults")[:k]), record)
    for k, record in enumerate(expected("faults"))
]
fault = pytest.mark.parametrize(("name", "k", "record"), FAULTS, ids=[f"{name}-{k}" for name, k, _ in FAULTS])


@fault
def test_fault_nets_and_states(name, k, record):
    """In a fault every net agrees to 1 mV and every amplifier is in the state expected."""
    found = fault_figures(name)
    assert found["converged"][k]
    pairs = {net: (found["nets"][net][k], wanted) for net, wanted in record["nets"].items()}
    assert worst(pairs, lambda wanted: 1e-3) == {}
    assert {ref: found["parts"][ref]["state"][k] for ref in record["state"]} == record["state"]


@fault
def test_fault_transistors(name, k, record):
    """In a fault the junction voltages agree to 1 mV."""
    parts = fault_figures(name)["parts"]
    pairs = {
        (ref, key): (parts[ref][key][k], wanted)
        for ref, table in record["transistors"].items()
        for key, wanted in table.items()
    }
    assert worst(pairs, lambda wanted: 1e-3) == {}


@fault
def test_fault_clamp_currents(name, k, record):
    """In a fault the same clamps conduct as expected, to 1 %."""
    clamps = fault_figures(name)["clamps"]
    found = {key: values[k] for key, values in clamps.items() if abs(values[k]) > 1e-9}
    assert found == pytest.approx(record["clamp_currents"], rel=1e-2)
