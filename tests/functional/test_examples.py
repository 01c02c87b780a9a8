"""The example designs: the sound ones are clean, the faulty ones are found at the fault and nowhere else."""

from __future__ import annotations

import functools
import re
from dataclasses import dataclass
from pathlib import Path

import pytest

from rulecheck.design.load import load
from rulecheck.findings import Severity
from rulecheck.testing import findings_of

EXAMPLES = Path(__file__).parents[2] / "example_designs"
SERIOUS = (Severity.MAJOR, Severity.MINOR)
MAJOR, MINOR, OBSERVATION = Severity.MAJOR, Severity.MINOR, Severity.OBSERVATION

SOUND = (
    "absorbance", "conductivity", "expander", "gas_mass_flow", "heater_power", "ion_gauge", "level_meter", "light_meter",
    "nozzle_flow", "weir_flow",
)  # fmt: skip


@dataclass(frozen=True)
class Fault:
    """What is wrong with a faulty design: the rule that finds it, how serious, at which parts and nets."""

    rule: str
    severity: Severity
    parts: tuple[str, ...] = ()
    nets: tuple[str, ...] = ()
    follows: frozenset[str] = frozenset()
    """Rules that rightly speak too, of what the fault brings about."""


FAULTY = {
    "bare_rails": Fault("decoupling", MINOR, ("U2",), ("V12P",)),
    "floating_divider": Fault("connectivity", MAJOR, ("R5",), ("GNDA",)),
    "flooded_input": Fault("input-protection", MAJOR, ("U1C",)),
    "leaky_clamp": Fault("input-protection", MINOR, ("D2",), ("SY",), frozenset({"transfer-law"})),
    "loose_scale": Fault("transfer-law", MAJOR, nets=("VOUT",)),
    # the base current has a spread, which takes the error budget
    "loaded_divider": Fault("base-loading", MINOR, ("Q4",), ("HALF",), follows=frozenset({"transfer-law"})),
    "low_rail": Fault("input-headroom", MAJOR, ("U1A", "U1B")),
    "low_rating": Fault("voltage-rating", MAJOR, ("C3",), ("V12P",)),
    "milliohms": Fault("plausible-value", MINOR, ("R7",)),
    "moist_board": Fault("board-leakage", MINOR, ("Q1",), ("S1",)),
    "no_clamp": Fault("junction-reverse", MAJOR, ("Q1", "Q2")),
    "odd_value": Fault("preferred-value", OBSERVATION, ("R3",)),
    "over_voltage": Fault("supply-rating", MAJOR, ("U1A", "U1B", "U1C")),
    # a slope that rises leaves the law too
    "rising_slope": Fault("slope-temperature", MAJOR, ("Q1", "Q2"), ("VOUT",), frozenset({"transfer-law"})),
    "overdriven": Fault("drive-level", MAJOR, ("Q2",)),
    "root_of_volts": Fault("transfer-law", MAJOR, nets=("VOUT",)),
    "short_trim": Fault("transfer-law", MAJOR, ("RV1",), ("VOUT",)),
    "silent_resistor": Fault("bare-assumption", OBSERVATION, ("R2",)),
    "slow_sample": Fault("bandwidth", MAJOR, nets=("VOUT",)),
    "small_bleeder": Fault("dissipation", MAJOR, ("R7",)),
    "starved_sample": Fault("signal-current", MINOR, ("Q1",), ("S1",), frozenset({"transfer-law"})),
    "strays_only": Fault("log-loop-compensation", MINOR, ("U1",)),
    "supply_reference": Fault("reference-current", MAJOR, ("Q2",)),
    # an amplifier that holds nothing computes nothing
    "swapped_inputs": Fault("feedback-sign", MAJOR, ("U1B",), follows=frozenset({"transfer-law"})),
    "tight_swing": Fault("output-swing", MINOR, ("U2B",)),
    "two_packages": Fault("shared-temperature", MAJOR, ("Q1", "Q2")),
    "uncompensated": Fault("loop-stability", MAJOR, ("U1A", "U1B")),
    "unmatched_pair": Fault("matched-pair", MAJOR, ("Q3", "Q4"), follows=frozenset({"transfer-law"})),
    "weak_tail": Fault("latch-up", MAJOR, ("U1A", "U1B")),
    "wide_output": Fault("noise", MAJOR, nets=("VOUT",)),
    "wrong_gain": Fault("transfer-law", MAJOR, nets=("VOUT",)),
}


@functools.cache
def found(folder, name):
    """Findings of an example, by all installed rules; fails where a rule or an analysis does."""
    return findings_of(load(EXAMPLES / folder / f"{name}.toml"))


def words(findings):
    """Findings for the message of an assertion."""
    return "; ".join(f"{f.severity.name} {f.rule} {list(f.parts)}: {f.message}" for f in findings)


@pytest.mark.parametrize("name", SOUND)
def test_a_sound_design_is_clean(name):
    """No major and no minor, and every rule and analysis has run."""
    serious = [f for f in found("sound", name) if f.severity in SERIOUS]
    assert not serious, words(serious)


@pytest.mark.parametrize("name", FAULTY)
def test_the_fault_is_found_where_it_is(name):
    """The rule that is about the fault finds it with its severity, at the parts and nets that are at fault."""
    fault = FAULTY[name]
    fitting = [
        f for f in found("faulty", name)
        if f.rule == fault.rule and set(f.parts) == set(fault.parts) and set(fault.nets) <= set(f.nets)
    ]  # fmt: skip
    assert fitting, words(found("faulty", name))
    assert {f.severity for f in fitting} == {fault.severity}, words(fitting)


@pytest.mark.parametrize("name", FAULTY)
def test_one_fault_speaks_once(name):
    """No other rule finds anything serious, save those that speak of what the fault brings about."""
    fault = FAULTY[name]
    others = [f for f in found("faulty", name) if f.severity in SERIOUS and f.rule not in {fault.rule, *fault.follows}]
    assert not others, words(others)


@pytest.mark.parametrize(("folder", "names"), [("sound", SOUND), ("faulty", FAULTY)])
def test_every_example_is_judged_and_described(folder, names):
    """The files in a folder, the tests here and the table of the README are the same."""
    files = {path.stem for path in (EXAMPLES / folder).glob("*.toml")} - {"house_parts"}
    described = re.findall(rf"^\| `{folder}/(\w+)\.toml` \|", (EXAMPLES / "README.md").read_text("utf-8"), re.M)
    assert files == set(names)
    assert sorted(described) == sorted(files)


def test_the_readme_names_the_rule_that_finds_each_fault():
    """The last column of the table of faults is the rule that finds it."""
    text = (EXAMPLES / "README.md").read_text("utf-8")
    rows = re.findall(r"^\| `faulty/(\w+)\.toml` \|.*\| `([\w-]+)` \|$", text, re.M)
    assert dict(rows) == {name: fault.rule for name, fault in FAULTY.items()}


def test_both_folders_have_the_same_parts():
    """The catalogue beside the faulty designs is that beside the sound ones, and calls its parts invented."""
    sound, faulty = ((EXAMPLES / folder / "house_parts.toml").read_text("utf-8") for folder in ("sound", "faulty"))
    assert sound == faulty
    assert sound.count("[models.") == sound.count('note = "Invented')


@pytest.mark.parametrize("name", FAULTY)
def test_a_faulty_design_owns_up_to_its_fault(name):
    """The head of a faulty design names the sound design that it is a copy of, and differs from it by few lines."""
    lines = (EXAMPLES / "faulty" / f"{name}.toml").read_text("utf-8").splitlines()
    head = re.fullmatch(r"# Faulty on purpose, a copy of (sound/\w+\.toml) with one fault:", lines[0])
    assert head is not None, lines[0]
    kept = set((EXAMPLES / head[1]).read_text("utf-8").splitlines())
    changed = [line for line in lines if line not in kept and not line.startswith("#")]
    assert 1 <= len(changed) <= 8, changed
