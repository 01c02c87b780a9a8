"""Element values of a network at given conditions and temperatures, arrays with the condition first."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, fields, is_dataclass
from typing import TYPE_CHECKING, Any, TypeVar

import numpy as np

from ..devices import amplifier, diode, passive, transistor
from ..devices.constants import NOMINAL_TEMPERATURE, Array, Index
from ..devices.diode import HotDiode
from ..devices.transistor import HotTransistor
from .network import Element

if TYPE_CHECKING:
    from ..design.model import Design, Part
    from .conditions import Conditions
    from .network import Network

Overrides = Mapping[tuple[str, str], Any]
T = TypeVar("T")
INDEFINITE = 1e30  # ohm: what an infinite resistance is taken as
LINK = 1e-9
"""Resistance of a link [ohm]: a milliampere drops a picovolt in it, and links in parallel have an answer."""


@dataclass(frozen=True, slots=True)
class Values:
    """Element values; all arrays of shape (conditions, elements) in the order of the network's lists.

    Attributes
    ----------
    fixed : ndarray [V]
        Voltages of the fixed nodes.
    conductance : ndarray [S]
    branch_resistance, branch_voltage : ndarray [ohm], [V]
    source : ndarray [A]
    transistor : HotTransistor
    polarity : ndarray, shape (1, transistors)
        +1 npn, -1 pnp.
    diode, clamp : HotDiode
    gain, offset, low_headroom, high_headroom, output_resistance : ndarray
        Of amplifiers: voltage gain, offset voltage [V], headrooms [V], [ohm].
    """

    fixed: Array
    conductance: Array
    branch_resistance: Array
    branch_voltage: Array
    source: Array
    transistor: HotTransistor
    polarity: Array
    diode: HotDiode
    clamp: HotDiode
    gain: Array
    offset: Array
    low_headroom: Array
    high_headroom: Array
    output_resistance: Array


def take(record: T, index: Index) -> T:
    """The record with every array (nested too) reduced to the conditions that `index` picks."""
    parts: dict[str, Any] = {}
    for entry in fields(record):  # type: ignore[arg-type]  # a dataclass by construction
        value = getattr(record, entry.name)
        if is_dataclass(value) and not isinstance(value, type):
            parts[entry.name] = take(value, index)
        elif isinstance(value, np.ndarray) and value.shape[0] > 1:
            parts[entry.name] = value[index]
        else:
            parts[entry.name] = value
    return type(record)(**parts)


class Parameters:
    """Parameter values by part, with overrides; `read` holds what has been asked for.

    Parameters
    ----------
    design : Design
    overrides : mapping of (part reference, parameter) to float or ndarray of shape (conditions,)
        In place of the nominal; net names stand for references in loads and source resistances.
    """

    def __init__(self, design: Design, overrides: Overrides | None = None) -> None:
        self.design = design
        self.overrides = dict(overrides or {})
        self.read: dict[tuple[str, str], Array] = {}

    def of(self, ref: str, name: str, default: float = 0.0) -> Array:
        """Value of one parameter, shape (conditions,) or (1,); `default` where it is absent."""
        self.read[ref, name] = found = self._find(ref, name, default)
        return found

    def change(self, ref: str, name: str) -> Array:
        """An override of something that no design states; 0 where there is none, shape (conditions,) or (1,)."""
        self.read[ref, name] = found = np.atleast_1d(np.asarray(self.overrides.get((ref, name), 0.0), dtype=float))
        return found

    def _find(self, ref: str, name: str, default: float) -> Array:
        if (ref, name) in self.overrides:
            return np.atleast_1d(np.asarray(self.overrides[ref, name], dtype=float))
        value: Any = self.design.parts.get(ref) or self.design.nets[ref]
        for step in name.split("."):
            value = getattr(value, step, None)
        return np.array([default if value is None else getattr(value, "typ", value)], dtype=float)

    def table(self, refs: list[str], names: tuple[str, ...], size: int) -> dict[str, Array]:
        """Parameters of several parts, each of shape (conditions, parts)."""
        return {n: columns([self.of(r, n) for r in refs], size) for n in names}


def columns(arrays: list[Array], size: int) -> Array:
    """Stack arrays of shape (conditions,) or (1,) as columns, shape (conditions, len(arrays))."""
    out = np.empty((size, len(arrays)))
    for i, array in enumerate(arrays):
        out[:, i] = array
    return out


TRANSISTOR_NAMES = (
    "saturation_current", "emission_coefficient", "forward_beta", "reverse_beta", "beta_exponent",
    "early_voltage", "knee_current", "leakage_saturation_current", "leakage_emission_coefficient",
    "bandgap", "temperature_exponent",
)  # fmt: skip
DIODE_NAMES = (
    "saturation_current", "emission_coefficient", "reverse_leakage", "leakage_doubling", "bandgap",
    "temperature_exponent",
)  # fmt: skip


def compute_values(
    network: Network, conditions: Conditions, temperature: Callable[[str], Array], parameters: Parameters
) -> Values:
    """Values of all elements.

    Parameters
    ----------
    network : Network
    conditions : Conditions
    temperature : callable
        Temperature of a part [K], shape (conditions,).
    parameters : Parameters

    Returns
    -------
    Values
    """
    size = conditions.size
    context = _Context(network, conditions, temperature, parameters)
    p = parameters
    amps = network.amplifiers
    hot = columns([temperature(r) for r in network.transistors], size)
    table = p.table(network.transistors, TRANSISTOR_NAMES, size)
    table["mismatch"] = columns([context.mismatch(r) for r in network.transistors], size)
    return Values(
        fixed=columns([context.fixed(name) for name in network.fixed], size),
        conductance=columns([1 / np.minimum(context.resistance(e), INDEFINITE) for e in network.resistors], size),
        branch_resistance=columns([context.resistance(e) for e in network.branches], size),
        branch_voltage=columns([context.branch_voltage(e) for e in network.branches], size),
        source=columns([context.source(e) for e in network.sources], size),
        transistor=transistor.heat(table, hot),
        polarity=np.array([[1.0 if p.design.parts[r].kind == "npn" else -1.0 for r in network.transistors]]),
        diode=_hot_diodes(context),
        clamp=diode.heat_clamps(columns([context.temperature(e.key[0]) for e in network.clamps], size)),
        gain=columns([p.of(r, "open_loop_gain") for r in amps], size),
        offset=columns([context.offset(r) for r in amps], size),
        low_headroom=columns([context.headroom(r, "low") for r in amps], size),
        high_headroom=columns([context.headroom(r, "high") for r in amps], size),
        output_resistance=columns([p.of(r, "output_resistance") for r in amps], size),
    )


@dataclass(frozen=True, slots=True)
class _Context:
    """What the value of an element depends on."""

    network: Network
    conditions: Conditions
    part_temperature: Callable[[str], Array]
    parameters: Parameters

    @property
    def ambient(self) -> Array:
        return self.conditions.values["ambient"]

    def temperature(self, name: str) -> Array:
        return self.part_temperature(name) if name in self.parameters.design.parts else self.ambient

    def present(self, supply: str | None) -> Array:
        """1 where a supply or reference is on, 0 where it is absent; nothing named: 1."""
        absent = self.conditions.absent.get(supply or "")
        return np.ones(1) if absent is None else np.where(absent, 0.0, 1.0)

    def headroom(self, ref: str, side: str) -> Array:
        return self.parameters.of(ref, f"output_headroom.{side}")

    def part(self, ref: str) -> Part:
        return self.parameters.design.parts[ref]

    def fixed(self, node: str) -> Array:
        name, _, hidden = node.rpartition(".")
        nets = self.parameters.design.nets
        if node not in nets and hidden.startswith("compliance"):
            return np.array([nets[name].compliance * (1 if hidden.endswith("+") else -1)])
        if node not in nets:
            return self.conditions.values[name]
        net = nets[node]
        if net.role == "ground":
            return np.zeros(1)
        value = self.conditions.values[node]
        if net.role == "input":
            return np.asarray(value)
        tempco = net.tempco + self.parameters.change(node, "voltage_tempco")
        return value * passive.scale(self.ambient, tempco) * self.present(node)

    def mismatch(self, ref: str) -> Array:
        """What adds to the base-emitter voltage of a transistor."""
        p = self.parameters
        return p.of(ref, "vbe_offset") + p.change(ref, "mismatch") + self._drift(ref, "mismatch_drift")

    def offset(self, ref: str) -> Array:
        """Offset voltage of an amplifier."""
        return self.parameters.of(ref, "offset") + self._drift(ref, "offset_drift")

    def _drift(self, ref: str, name: str) -> Array:
        return self.parameters.change(ref, name) * (self.temperature(ref) - NOMINAL_TEMPERATURE)

    def resistance(self, element: Element) -> Array:
        ref, name = element.key
        p = self.parameters
        if ref not in p.design.parts or name not in ("value", "lower", "upper", "source"):
            return p.of(ref, name)
        part = p.design.parts[ref]
        if part.kind == "voltage-source":
            return np.zeros(1)
        value = p.of(ref, "value") * passive.scale(self.temperature(ref), p.of(ref, "tempco"))
        if part.kind == "resistor":
            return np.maximum(value, LINK)
        position = self.conditions.values[ref]
        return np.maximum(value * (position if name == "lower" else 1 - position), LINK)

    def branch_voltage(self, element: Element) -> Array:
        ref, name = element.key
        return self.drive(ref) if name == "source" else np.zeros(1)

    def drive(self, ref: str) -> Array:
        """Value of an independent source part at ambient, 0 where its supply is absent."""
        p = self.parameters
        tempco = p.of(ref, "tempco")
        return p.of(ref, "value") * passive.scale(self.ambient, tempco) * self.present(self.part(ref).source)

    def source(self, element: Element) -> Array:
        ref, name = element.key
        if name in ("drive", "photocurrent"):
            return self.conditions.values[ref]
        if name == "value":
            return self.drive(ref)
        if name == "supply_current":
            return self.parameters.of(ref, name)
        p = self.parameters
        doubling = p.of(ref, "bias_current_doubling", default=np.inf)
        currents = amplifier.input_currents(
            p.of(ref, "bias_current"), p.change(ref, "offset_current"), doubling, self.temperature(ref)
        )
        return currents[0 if name == "IN+" else 1]


def _hot_diodes(context: _Context) -> HotDiode:
    network, p, size = context.network, context.parameters, context.conditions.size
    records = []
    for element in network.diodes:
        ref, kind = element.key
        heat = context.temperature(ref)[:, None]
        if kind == "photo":
            dark = p.table([ref], ("dark_current", "dark_current_doubling"), size)
            records.append(diode.heat_photodiode(dark["dark_current"], dark["dark_current_doubling"], heat))
        else:
            records.append(diode.heat(p.table([ref], DIODE_NAMES, size), heat))
    empty = np.zeros((size, 0))
    join = {f.name: np.concatenate([getattr(r, f.name) for r in records] or [empty], axis=1) for f in fields(HotDiode)}
    return HotDiode(**join)
