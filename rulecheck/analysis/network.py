"""A design as nodes, branches and elements with index arrays: what modified nodal analysis works on.

Unknowns are the node voltages that no ideal source fixes, the currents of voltage-like branches
(voltage sources, links, potentiometer halves), and two a amplifier: its output current, and the
parameter of its characteristic (see `rulecheck.devices.amplifier`). Fixed nodes share one place
after the last unknown, so that what is stamped there falls away.
"""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from ..errors import AnalysisError

if TYPE_CHECKING:
    from ..design.model import Design, Part

Ints = NDArray[np.intp]
AMPLIFIER_PINS = ("IN+", "IN-", "OUT", "V+", "V-")


@dataclass(frozen=True)
class Element:
    """A two-terminal element: current counts from node `a` to node `b`.

    `key` names it: a part reference with an element's role, such as ``("RV1", "lower")``.
    """

    key: tuple[str, str]
    a: int
    b: int


@dataclass
class Network:
    """Topology of a design for the solver; values are in `rulecheck.analysis.values`.

    Attributes
    ----------
    nodes : dict of node name to index
        Nets by name, internal nodes as ``REF.pin``; unknown nodes first.
    free : int
        Number of unknown nodes.
    resistors, branches, sources, diodes, clamps : list of Element
        Branches are voltage-like; sources drive a current from `a` to `b` through themselves.
    transistors, amplifiers : list of str
    terminals : ndarray of int, shape (transistors, 3)
        Internal nodes collector, base, emitter.
    pins : ndarray of int, shape (amplifiers, 5)
        Nodes of IN+, IN-, OUT, V+, V-.
    """

    design: Design
    with_clamps: bool
    nodes: dict[str, int] = field(default_factory=dict)
    free: int = 0
    resistors: list[Element] = field(default_factory=list)
    branches: list[Element] = field(default_factory=list)
    sources: list[Element] = field(default_factory=list)
    diodes: list[Element] = field(default_factory=list)
    clamps: list[Element] = field(default_factory=list)
    transistors: list[str] = field(default_factory=list)
    amplifiers: list[str] = field(default_factory=list)
    terminals: Ints = field(default_factory=lambda: np.zeros((0, 3), dtype=np.intp))
    pins: Ints = field(default_factory=lambda: np.zeros((0, 5), dtype=np.intp))

    @property
    def unknowns(self) -> int:
        """Number of unknowns of the nodal equations."""
        return self.free + len(self.branches) + 2 * len(self.amplifiers)

    @property
    def fixed(self) -> list[str]:
        """Names of fixed nodes in the order of their columns."""
        return list(self.nodes)[self.free :]

    def row(self, node: int) -> int:
        """Row of a node in the equations; all fixed nodes share the row after the last."""
        return node if node < self.free else self.unknowns

    def branch_row(self, index: int) -> int:
        """Row and column of a branch current."""
        return self.free + index

    def output_row(self, index: int) -> int:
        """Row and column of an amplifier's output current."""
        return self.free + len(self.branches) + index

    def gain_row(self, index: int) -> int:
        """Row and column of the parameter of an amplifier's characteristic."""
        return self.output_row(index) + len(self.amplifiers)

    def rows(self, nodes: Ints) -> Ints:
        """Rows of many nodes."""
        return np.where(nodes < self.free, nodes, self.unknowns)


def build_network(design: Design, with_clamps: bool = False) -> Network:
    """Lay out the nodes and elements of a design.

    Parameters
    ----------
    design : Design
    with_clamps : bool
        Fault scenarios: with the input clamps of amplifiers and the compliance of current drives.

    Returns
    -------
    Network

    Raises
    ------
    AnalysisError
        Where a pin that the equations need is not connected, or there is no ground.
    """
    _check_pins(design)
    network = Network(design, with_clamps)
    _number_nodes(network)
    for ref, part in in_circuit(design).items():
        _add_part(network, ref, part)
    _add_inputs(network)
    network.terminals = np.array(
        [[_internal(network, design.parts[r], pin) for pin in "CBE"] for r in network.transistors],
        dtype=np.intp,
    ).reshape(-1, 3)
    network.pins = np.array(
        [[network.nodes[design.parts[r].pins[pin]] for pin in AMPLIFIER_PINS] for r in network.amplifiers],
        dtype=np.intp,
    ).reshape(-1, 5)
    return network


REQUIRED_PINS = {
    "npn": ("C", "B", "E"), "pnp": ("C", "B", "E"), "op-amp": AMPLIFIER_PINS, "diode": ("A", "K"),
    "photodiode": ("A", "K"), "potentiometer": ("END1", "WIPER", "END2"),
}  # fmt: skip
TWO_PINS = ("resistor", "capacitor", "voltage-source", "current-source")


def in_circuit(design: Design) -> dict[str, Part]:
    """Parts that the equations hold: spare ones with a pin or an input left open are not."""
    pins = [net for part in design.parts.values() for net in part.pins.values()]

    def is_open(part: Part) -> bool:
        missing = [p for p in REQUIRED_PINS.get(part.kind, ()) if p not in part.pins]
        inputs = [part.pins[p] for p in ("IN+", "IN-") if p in part.pins]
        floating = [n for n in inputs if pins.count(n) == 1 and design.nets[n].role is None]
        return bool(missing or floating or (part.kind in TWO_PINS and len(part.pins) != 2))

    return {ref: part for ref, part in design.parts.items() if not (part.spare and is_open(part))}


def _check_pins(design: Design) -> None:
    for ref, part in in_circuit(design).items():
        missing = [p for p in REQUIRED_PINS.get(part.kind, ()) if p not in part.pins]
        if missing or (part.kind in TWO_PINS and len(part.pins) != 2):
            names = ", ".join(missing) or "one of two"
            raise AnalysisError(f"{ref}: pin {names} is not connected", "give it a net, or set mounted = false")
    if not any(net.role == "ground" for net in design.nets.values()):
        raise AnalysisError("no net has the role of ground", 'add `GND = { role = "ground" }` to [nets]')


TERMINAL_RESISTANCE = {"C": "collector_resistance", "B": "base_resistance", "E": "bulk_emitter_resistance"}


def _number_nodes(network: Network) -> None:
    design = network.design
    fixed = [n for n, net in design.nets.items() if _is_fixed(net)]
    used = {net for part in design.parts.values() for net in part.pins.values()}
    free = [n for n in design.nets if n not in set(fixed) and (n in used or design.nets[n].role is not None)]
    for ref, part in design.parts.items():
        free += [f"{ref}.{pin}" for pin, name in _resistive_terminals(part)]
    hidden = [f"{n}.source" for n, net in design.nets.items() if _has_hidden_source(net)]
    if network.with_clamps:
        hidden += [f"{n}.compliance{end}" for n, net in design.nets.items() if net.drive == "current" for end in "+-"]
    network.nodes = {name: i for i, name in enumerate([*free, *fixed, *hidden])}
    network.free = len(free)


def _is_fixed(net: object) -> bool:
    role = getattr(net, "role", None)
    if role in ("ground", "supply", "reference"):
        return True
    return role == "input" and getattr(net, "drive", "") == "voltage" and not _source_resistance(net)


def _has_hidden_source(net: object) -> bool:
    return getattr(net, "role", None) == "input" and getattr(net, "drive", "") == "voltage" and _source_resistance(net)


def _source_resistance(net: object) -> bool:
    spread = getattr(net, "source_resistance", None)
    return spread is not None and spread.typ > 0


def _resistive_terminals(part: Part) -> Iterable[tuple[str, str]]:
    if part.kind in ("npn", "pnp"):
        return [(pin, name) for pin, name in TERMINAL_RESISTANCE.items() if getattr(part, name).typ > 0]
    if part.kind == "diode" and part.series_resistance.typ > 0:
        return [("A", "series_resistance")]
    return []


def _internal(network: Network, part: Part, pin: str) -> int:
    inner = network.nodes.get(f"{part.ref}.{pin}")
    return network.nodes[part.pins[pin]] if inner is None else inner


def _add_part(network: Network, ref: str, part: Part) -> None:
    pins = {pin: network.nodes[net] for pin, net in part.pins.items()}
    # In faults whole chains of junctions are off, and nodes hang on picosiemens or less. A bulk resistance as a
    # conductance of siemens would drown these in rounding; as a branch with its own current it does not.
    terminals = network.branches if network.with_clamps else network.resistors
    for pin, name in _resistive_terminals(part):
        terminals.append(Element((ref, name), pins[pin], network.nodes[f"{ref}.{pin}"]))
    adders = {
        "resistor": _add_resistor, "potentiometer": _add_potentiometer, "diode": _add_diode,
        "photodiode": _add_photodiode, "voltage-source": _add_voltage_source,
        "current-source": _add_current_source, "op-amp": _add_amplifier,
        "npn": _add_transistor, "pnp": _add_transistor,
    }  # fmt: skip
    adder = adders.get(part.kind)
    if adder is not None:
        adder(network, part, pins)


def _add_resistor(network: Network, part: Part, pins: dict[str, int]) -> None:
    a, b = pins.values()
    target = network.resistors if part.value.typ > 0 else network.branches
    target.append(Element((part.ref, "value"), a, b))


def _add_potentiometer(network: Network, part: Part, pins: dict[str, int]) -> None:
    network.branches.append(Element((part.ref, "lower"), pins["END1"], pins["WIPER"]))
    network.branches.append(Element((part.ref, "upper"), pins["WIPER"], pins["END2"]))


def _add_diode(network: Network, part: Part, pins: dict[str, int]) -> None:
    network.diodes.append(Element((part.ref, "junction"), _internal(network, part, "A"), pins["K"]))


def _add_photodiode(network: Network, part: Part, pins: dict[str, int]) -> None:
    network.diodes.append(Element((part.ref, "photo"), pins["A"], pins["K"]))
    network.sources.append(Element((part.ref, "photocurrent"), pins["K"], pins["A"]))
    if part.shunt_resistance is not None and np.isfinite(part.shunt_resistance.typ):
        network.resistors.append(Element((part.ref, "shunt_resistance"), pins["A"], pins["K"]))


def _add_voltage_source(network: Network, part: Part, pins: dict[str, int]) -> None:
    p, n = pins.values()
    network.branches.append(Element((part.ref, "source"), p, n))


def _add_current_source(network: Network, part: Part, pins: dict[str, int]) -> None:
    p, n = pins.values()
    network.sources.append(Element((part.ref, "value"), n, p))


def _add_transistor(network: Network, part: Part, pins: dict[str, int]) -> None:
    network.transistors.append(part.ref)


def _add_amplifier(network: Network, part: Part, pins: dict[str, int]) -> None:
    ref = part.ref
    network.amplifiers.append(ref)
    ground = _ground(network)
    network.sources.append(Element((ref, "IN+"), pins["IN+"], ground))
    network.sources.append(Element((ref, "IN-"), pins["IN-"], ground))
    network.sources.append(Element((ref, "supply_current"), pins["V+"], pins["V-"]))
    if not network.with_clamps:
        return
    if part.input_clamps in ("rails", "both"):
        for pin in ("IN+", "IN-", "OUT"):
            network.clamps.append(Element((ref, f"{pin}.hi"), pins[pin], pins["V+"]))
            network.clamps.append(Element((ref, f"{pin}.lo"), pins["V-"], pins[pin]))
    if part.input_clamps in ("differential", "both"):
        network.clamps.append(Element((ref, "IN+.across"), pins["IN+"], pins["IN-"]))
        network.clamps.append(Element((ref, "IN-.across"), pins["IN-"], pins["IN+"]))


def _ground(network: Network) -> int:
    return next(network.nodes[n] for n, net in network.design.nets.items() if net.role == "ground")


def _add_inputs(network: Network) -> None:
    ground = _ground(network)
    for name, net in network.design.nets.items():
        if net.role == "output" and net.load is not None:
            network.resistors.append(Element((name, "load"), network.nodes[name], ground))
        if net.role != "input":
            continue
        node = network.nodes[name]
        if _has_hidden_source(net):
            network.resistors.append(Element((name, "source_resistance"), network.nodes[f"{name}.source"], node))
        if net.drive == "current":
            network.sources.append(Element((name, "drive"), ground, node))
            if _source_resistance(net):
                network.resistors.append(Element((name, "source_resistance"), node, ground))
            if network.with_clamps:
                network.clamps.append(Element((name, "compliance+"), node, network.nodes[f"{name}.compliance+"]))
                network.clamps.append(Element((name, "compliance-"), network.nodes[f"{name}.compliance-"], node))
