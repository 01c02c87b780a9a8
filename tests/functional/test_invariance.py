"""What a designer may change without changing the circuit changes no finding and no figure."""

import random
import re
from pathlib import Path

import pytest
import tomli
from hypothesis import given, settings
from hypothesis import strategies as st

from rulecheck.design.edit import to_toml
from rulecheck.testing import design_from, findings_of

CASES = Path(__file__).parents[1] / "published" / "cases"
CATALOGUE = (CASES / "case_parts.toml").read_text()
NAMES = ("log_stage", "cube_root", "current_ratio")


def faulty(name):
    """Data of a case with its compensation and its matching taken away, so that several rules speak."""
    data = tomli.loads((CASES / f"{name}.toml").read_text())
    data["parts"].pop("C1")
    data.pop("matching", None)
    return data


def text_of(data):
    """A design file of the data."""
    lines = [f"{key} = {to_toml(value)}" for key, value in data.items() if not isinstance(value, dict)]
    for table, entries in data.items():
        if isinstance(entries, dict):
            lines += [f"\n[{table}]", *(f'"{key}" = {to_toml(value)}' for key, value in entries.items())]
    return "\n".join(lines)


def summary(text, back=None):
    """Findings as rule, severity, parts and nets (by their first names) and figures."""
    names = back or {}
    found = findings_of(design_from(text, CATALOGUE))
    return sorted(
        (
            f.rule,
            int(f.severity),
            tuple(sorted(names.get(p, p) for p in f.parts)),
            tuple(sorted(names.get(n, n) for n in f.nets)),
            tuple(round(e.value, 9) if abs(e.value) < 1 else float(f"{e.value:.6g}") for e in f.evidence),
        )
        for f in found
    )


def renamed(data, rng):
    """The data with other names of parts and ordinary nets, and the way back."""
    parts = {ref: f"{ref}{rng.randrange(1000, 9999)}" for ref in data["parts"] if not ref.startswith(("PD", "RV"))}
    nets = {n for part in data["parts"].values() for n in pins_of(part).values()} - set(data["nets"])
    other = {net: f"n {rng.randrange(10**6)}" for net in sorted(nets)}
    out = {**data, "parts": {}}
    for ref, part in data["parts"].items():
        pins = part["pins"]
        moved = (
            [other.get(n, n) for n in pins] if isinstance(pins, list) else {p: other.get(n, n) for p, n in pins.items()}
        )
        out["parts"][parts.get(ref, ref)] = {**part, "pins": moved}
    return out, {new: old for old, new in {**parts, **other}.items()}


def pins_of(part):
    """Nets by pin."""
    return part["pins"] if isinstance(part["pins"], dict) else dict(enumerate(part["pins"]))


@pytest.mark.parametrize("name", NAMES)
@settings(max_examples=2, deadline=None)
@given(seed=st.integers(0, 10**6))
def test_names_change_no_finding(name, seed):
    """Other names of parts and nets give the same findings at the same places with the same figures."""
    data = faulty(name)
    other, back = renamed(data, random.Random(seed))
    assert summary(text_of(other), back) == summary(text_of(data))


@pytest.mark.parametrize("name", NAMES)
@settings(max_examples=2, deadline=None)
@given(seed=st.integers(0, 10**6))
def test_order_changes_no_finding(name, seed):
    """The order of parts in the file does not matter."""
    data = faulty(name)
    order = list(data["parts"])
    random.Random(seed).shuffle(order)
    assert summary(text_of({**data, "parts": {ref: data["parts"][ref] for ref in order}})) == summary(text_of(data))


@pytest.mark.parametrize("name", NAMES)
def test_units_change_no_finding(name):
    """The same values written with other prefixes give the same findings."""
    text = text_of(faulty(name))
    other = re.sub(r'"(\d+(?:\.\d+)?) kohm"', lambda m: f'"{float(m[1]) * 1000!r} ohm"', text)
    other = re.sub(r'"(\d+) pF"', lambda m: f'"{int(m[1]) / 1000!r} nF"', other)
    assert other != text
    assert summary(other) == summary(text)
