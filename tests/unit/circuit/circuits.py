"""Small circuits for the tests of the structure, built part by part and read as a design file."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable, Mapping
from pathlib import Path
from typing import Any

from rulecheck.circuit.graph import build_graph
from rulecheck.circuit.structure import JunctionLoop, Structure, find_structure
from rulecheck.design.load import load_text
from rulecheck.design.model import Design

Part = tuple[str, dict[str, Any]]
SUPPLIES = {
    "GND": {"role": "ground"},
    "VP": {"role": "supply", "voltage": "15 V"},
    "VN": {"role": "supply", "voltage": "-15 V"},
}
VREF = {"role": "reference", "voltage": "5 V"}
OUTPUT = {"role": "output"}


def voltage_input(low: str = "10 mV", high: str = "10 V", **more: Any) -> dict[str, Any]:
    """Give the table of an input driven by a voltage."""
    return {"role": "input", "drive": "voltage", "range": [low, high], **more}


def current_input(low: str = "1 nA", high: str = "1 mA") -> dict[str, Any]:
    """Give the table of an input driven by a current."""
    return {"role": "input", "drive": "current", "range": [low, high]}


#: Nets of most tests: three inputs, a reference, an output.
USUAL = {name: voltage_input() for name in ("VX", "VY", "VZ")} | {"VREF": VREF, "VOUT": OUTPUT}


def resistor(ref: str, value: str, a: str, b: str) -> Part:
    """Give a resistor."""
    return ref, {"kind": "resistor", "value": value, "pins": [a, b]}


def capacitor(ref: str, a: str, b: str) -> Part:
    """Give a capacitor."""
    return ref, {"kind": "capacitor", "value": "100 pF", "pins": [a, b]}


def potentiometer(ref: str, value: str, position: float, end1: str, wiper: str, end2: str) -> Part:
    """Give a potentiometer at a position."""
    pins = {"END1": end1, "WIPER": wiper, "END2": end2}
    return ref, {"kind": "potentiometer", "value": value, "position": {"typ": position}, "pins": pins}


def npn(ref: str, c: str, b: str, e: str) -> Part:
    """Give an npn transistor."""
    return ref, {"kind": "npn", "model": "test-npn", "pins": {"C": c, "B": b, "E": e}}


def pnp(ref: str, c: str, b: str, e: str) -> Part:
    """Give a pnp transistor."""
    return ref, {"kind": "pnp", "model": "test-pnp", "pins": {"C": c, "B": b, "E": e}}


def diode(ref: str, a: str, k: str) -> Part:
    """Give a diode."""
    return ref, {"kind": "diode", "model": "test-diode", "pins": {"A": a, "K": k}}


def amplifier(ref: str, plus: str, minus: str, out: str, rails: tuple[str, str] = ("VP", "VN")) -> Part:
    """Give an op-amp."""
    pins = {"IN+": plus, "IN-": minus, "OUT": out, "V+": rails[0], "V-": rails[1]}
    return ref, {"kind": "op-amp", "model": "test-amplifier", "pins": pins}


def current_source(ref: str, value: str, p: str, n: str) -> Part:
    """Give a source that drives its current out of `p`."""
    return ref, {"kind": "current-source", "value": value, "pins": {"P": p, "N": n}}


def voltage_source(ref: str, value: str, p: str, n: str) -> Part:
    """Give a voltage source."""
    return ref, {"kind": "voltage-source", "value": value, "pins": {"P": p, "N": n}}


def photodiode(ref: str, a: str, k: str) -> Part:
    """Give a photodiode."""
    return ref, {"kind": "photodiode", "photocurrent": ["1 nA", "100 uA"], "pins": {"A": a, "K": k}}


def design_text(nets: Mapping[str, Any], parts: Iterable[Part], **tables: Any) -> str:
    """Write a design file of these nets and parts, the usual ground and supplies first."""
    lines = ["format = 1", 'catalogues = ["parts.toml"]', "[design]", 'title = "test"']
    lines += [f"[nets.{json.dumps(n)}]\n{_entries(table)}" for n, table in {**SUPPLIES, **nets}.items()]
    lines += [f"[parts.{json.dumps(ref)}]\n{_entries(table)}" for ref, table in parts]
    for name, content in tables.items():
        if isinstance(content, list):
            lines += [f"[[{name}]]\n{_entries(table)}" for table in content]
        else:
            lines.append(f"[{name}]\n{_entries(content)}")
    return "\n".join(lines) + "\n"


def _entries(table: Mapping[str, Any]) -> str:
    return "\n".join(f"{json.dumps(key)} = {_value(value)}" for key, value in table.items())


def _value(value: Any) -> str:
    if isinstance(value, dict):
        return "{ " + ", ".join(f"{json.dumps(k)} = {_value(v)}" for k, v in value.items()) + " }"
    return json.dumps(value)


def design_of(nets: Mapping[str, Any], parts: Iterable[Part], **tables: Any) -> Design:
    """Load the design of these nets and parts."""
    return load_text(design_text(nets, parts, **tables), Path(__file__).parent / "test.toml")


def structure_of(parts: Iterable[Part], nets: Mapping[str, Any] = USUAL) -> Structure:
    """Find the structure of the design of these parts and nets."""
    design = design_of(nets, parts)
    return find_structure(design, build_graph(design))


def transdiode(
    n: int | str, drive: Part, *, base: str = "GND", emitter: str = "", kind: Callable[..., Part] = npn
) -> list[Part]:
    """Build one log stage: amplifier ``U``, transistor ``Q``, emitter resistor ``RE``, capacitor ``C`` of a number.

    Its summing node is ``S`` with the number, its emitter ``E``; `drive` brings the current.
    """
    at = emitter or f"E{n}"
    return [
        drive,
        kind(f"Q{n}", f"S{n}", base, at),
        amplifier(f"U{n}", "GND", f"S{n}", f"O{n}"),
        resistor(f"RE{n}", "2.2 kohm", f"O{n}", at),
        capacitor(f"C{n}", f"S{n}", f"O{n}"),
    ]


def log_ratio(n: int, over: Part, under: Part, out: str, *, base: str = "") -> list[Part]:
    """Build a log-ratio stage of two transistors ``Q`` and ``P`` with a shared emitter ``T``.

    `over` drives ``S``, `under` drives ``W``; the second amplifier ``V`` leads `out`, which reaches the base
    of ``Q`` directly, or as the net `base` says. The output is kT/q·ln(I(Q)/I(P)) where direct.
    """
    return [
        *transdiode(n, over, base=base or out, emitter=f"T{n}"),
        under,
        npn(f"P{n}", f"W{n}", "GND", f"T{n}"),
        amplifier(f"V{n}", "GND", f"W{n}", out),
    ]


def antilog(n: int, reference: Part, *, base: str, out: str) -> list[Part]:
    """Build an antilog stage: ``Q`` carries the reference, ``A`` the output's current through ``RF``."""
    return [
        *transdiode(n, reference, base=base),
        npn(f"A{n}", f"X{n}", "GND", f"E{n}"),
        amplifier(f"W{n}", "GND", f"X{n}", out),
        resistor(f"RF{n}", "10 kohm", f"X{n}", out),
    ]


def weights(loop: JunctionLoop) -> dict[str, float]:
    """Signed weights of a loop's junctions by part."""
    return {junction.part: junction.turn * junction.weight for junction in loop.junctions}


def inverting(ref, gain, a, out):
    """Inverting stage of a gain, from net `a` to `out`."""
    return [
        resistor(f"RI{ref}", "10 kohm", a, f"M{ref}"),
        resistor(f"RO{ref}", f"{10 * gain} kohm", f"M{ref}", out),
        amplifier(ref, "GND", f"M{ref}", out),
    ]


def difference(ref, a, b, out, gain=1, foot="GND"):
    """Difference stage: `out` is `gain` times `b` less `a`, upon `foot`."""
    return [
        resistor(f"RA{ref}", "10 kohm", a, f"N{ref}"),
        resistor(f"RB{ref}", f"{10 * gain} kohm", f"N{ref}", out),
        resistor(f"RC{ref}", "10 kohm", b, f"P{ref}"),
        resistor(f"RD{ref}", f"{10 * gain} kohm", f"P{ref}", foot),
        amplifier(ref, f"P{ref}", f"N{ref}", out),
    ]
