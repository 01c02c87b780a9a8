"""Parameters with a spread: what may deviate from its nominal, by how much, and what moves with it."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np

from ..design.keypath import join_key
from ..devices.constants import Array
from ..units import Spread
from .conditions import Conditions
from .values import DIODE_NAMES, TRANSISTOR_NAMES, Overrides, Parameters

if TYPE_CHECKING:
    from ..design.model import Design, Matching, Net, Package, Part

CONDITION_KEYS = ("voltage", "position", "input")
"""What a condition states, not a parameter: voltages of sources, positions of potentiometers, inputs."""
NET_KEYS = ("voltage", "voltage_tempco", "load", "source_resistance")
"""Keys that belong to a net, not to a part."""


class Move(NamedTuple):
    """A parameter that a deviation moves, and by how much for a deviation of one."""

    owner: str
    key: str
    per: float = 1.0


@dataclass(frozen=True, slots=True)
class Deviation:
    """A quantity that a design lets deviate from its nominal.

    Attributes
    ----------
    name : str
        Key path, such as ``parts.R1.value``.
    low, high : float
        Limits of the deviation, around 0: in the unit of the quantity; of one that several parameters share in
        proportion, -1 and 1.
    moves : tuple of Move
    """

    name: str
    low: float
    high: float
    moves: tuple[Move, ...]

    @property
    def half(self) -> float:
        """The larger one-sided distance from the nominal."""
        return max(-self.low, self.high)


def deviations(design: Design) -> tuple[Deviation, ...]:
    """All deviations that a design allows, in the order of its parts, nets, matched groups and packages.

    Matched transistors share the spread of their process: each but the first has its mismatch to the first of
    its own. Resistors of a package with a ratio tolerance (or ratio tempco) share theirs likewise: each but the
    first has its own deviation from the first, within that limit. What stands at its nominal exactly is left out.
    """
    found: list[Deviation] = []
    shared = _shared_keys(design)
    for ref, part in design.parts.items():
        found += [d for key, d in _of_part(part) if (ref, key) not in shared]
    for net in design.nets.values():
        found += _of_net(net)
    for group in design.matching.values():
        found += _of_group(design, group)
    for package in design.packages.values():
        found += _of_network(design, package)
    return tuple(d for d in found if d.half > 0 and any(move.per for move in d.moves))


def _plain(path: Iterable[str], owner: str, key: str, spread: Spread) -> Deviation:
    return Deviation(join_key(path), spread.min - spread.typ, spread.max - spread.typ, (Move(owner, key),))


PROCESS = (
    *(name for name in TRANSISTOR_NAMES if name != "saturation_current"),  # that is in the spread of V_BE
    "bulk_emitter_resistance", "base_resistance", "collector_resistance",
)  # fmt: skip
COUNTED: Mapping[str, tuple[str, ...]] = {
    "resistor": ("value", "tempco"),
    "potentiometer": ("value", "tempco", "position"),
    "voltage-source": ("value", "tempco"),
    "current-source": ("value", "tempco"),
    "diode": (*DIODE_NAMES, "series_resistance"),
    "photodiode": ("dark_current", "dark_current_doubling", "shunt_resistance"),
    "npn": ("vbe_offset", "vbe_spread", *PROCESS),
    "pnp": ("vbe_offset", "vbe_spread", *PROCESS),
    "op-amp": (
        "offset", "offset_voltage", "offset_drift", "bias_current", "offset_current", "bias_current_doubling",
        "open_loop_gain", "output_resistance", "output_headroom.low", "output_headroom.high", "supply_current",
    ),
}  # fmt: skip
ENTERS_AS = {"offset_voltage": "offset", "vbe_spread": "mismatch", "vbe_mismatch": "mismatch",
             "vbe_mismatch_drift": "mismatch_drift"}  # fmt: skip
KNOWN_BY = {"offset_voltage": "offset", "vbe_spread": "vbe_offset", "vbe_mismatch": "vbe_offset"}
"""Limits of what is known of a single unit that states its own error."""


def _of_part(part: Part) -> Iterator[tuple[str, Deviation]]:
    for key in COUNTED.get(part.kind, ()):
        spread = _spread(part, key)
        if spread is not None:
            yield key, _plain(("parts", part.ref, *key.split(".")), part.ref, ENTERS_AS.get(key, key), spread)


def _spread(part: Part, key: str) -> Spread | None:
    """Spread of a parameter; None where it is absent, known otherwise, or set by trimming."""
    if (key in KNOWN_BY and getattr(part, KNOWN_BY[key]) is not None) or (key == "position" and part.adjusts):
        return None
    value: Any = part
    for step in ("value_spread" if key == "value" else key).split("."):
        value = getattr(value, step, None)
    return value if isinstance(value, Spread) else None


def _of_net(net: Net) -> Iterator[Deviation]:
    path = ("nets", net.name)
    if net.role in ("supply", "reference"):
        if net.voltage is not None:
            yield _plain((*path, "voltage"), net.name, "voltage", net.voltage)
        yield _plain((*path, "tempco"), net.name, "voltage_tempco", net.tempco_spread)
    for key in ("load", "source_resistance"):
        spread = getattr(net, key)
        if spread is not None:
            yield _plain((*path, key), net.name, key, spread)


def _shared_keys(design: Design) -> set[tuple[str, str]]:
    """Parameters of single parts that the deviations of groups and packages stand for."""
    keys = {(ref, key) for group in design.matching.values() for ref in group.parts for key in _process(design, group)}
    for package in design.packages.values():
        keys |= {(ref, key) for key in _tracking(package) for ref in _resistors(design, package)}
    return keys


def _process(design: Design, group: Matching) -> list[str]:
    """Parameters whose spread a matched group has in common: those that are alike in all its members."""
    members = [design.parts[ref] for ref in group.parts]
    alike = [key for key in PROCESS if len({_spread(part, key) for part in members}) == 1]
    return ["vbe_spread", *alike]


def _of_group(design: Design, group: Matching) -> Iterator[Deviation]:
    if not group.parts:
        return
    path = ("matching", group.name)
    first = design.parts[group.parts[0]]
    for key in _process(design, group):
        spread = first.vbe_spread if key == "vbe_spread" else _spread(first, key)
        if spread is not None:
            moves = tuple(Move(ref, ENTERS_AS.get(key, key)) for ref in group.parts)
            yield Deviation(join_key((*path, key)), spread.min - spread.typ, spread.max - spread.typ, moves)
    for ref in group.parts[1:]:
        part = design.parts[ref]
        for key, last in (("vbe_mismatch", ()), ("vbe_mismatch_drift", ("drift",))):
            spread = getattr(group, key) or _spread(part, key)
            if spread is not None and (key not in KNOWN_BY or getattr(part, KNOWN_BY[key]) is None):
                yield _plain((*path, ref, *last), ref, ENTERS_AS[key], spread)


def _tracking(package: Package) -> dict[str, float]:
    """Parameters in which the resistors of a package track each other, with the limit to the first."""
    limits = {"value": package.ratio_tolerance, "tempco": package.ratio_tempco}
    return {key: limit for key, limit in limits.items() if limit is not None}


def _resistors(design: Design, package: Package) -> list[str]:
    return [ref for ref in package.parts if design.parts[ref].kind == "resistor"]


def _of_network(design: Design, package: Package) -> Iterator[Deviation]:
    parts = [design.parts[ref] for ref in _resistors(design, package)]
    for key, limit in _tracking(package).items():
        moves = tuple(Move(part.ref, key, (_spread(part, key) or Spread.exactly(0.0)).half) for part in parts)
        yield Deviation(join_key(("packages", package.name, key)), -1.0, 1.0, moves)
        for part in parts[1:]:
            own = limit * part.value.typ if key == "value" else limit
            yield Deviation(join_key(("parts", part.ref, key)), -own, own, (Move(part.ref, key),))


def of_supply(design: Design, deviation: Deviation) -> bool:
    """Whether a deviation is that of a supply's voltage, which is a condition of its own in a review."""
    return any(key == "voltage" and design.nets[owner].role == "supply" for owner, key, _ in deviation.moves)


def in_force(design: Design, deviation: Deviation, conditions: Conditions) -> Array:
    """1 where a deviation counts, 0 where a condition already states a supply away from its nominal."""
    counts = np.ones(conditions.size)
    if of_supply(design, deviation):
        for owner, _, _ in deviation.moves:
            voltage = design.nets[owner].voltage
            counts = counts * (voltage is not None and conditions.values[owner] == voltage.typ)
    return counts


def moved(
    design: Design, conditions: Conditions, amounts: Iterable[tuple[tuple[Move, ...], Array | float]]
) -> tuple[Overrides, Conditions]:
    """Parameters and conditions with deviations in them.

    Parameters
    ----------
    design : Design
    conditions : Conditions
    amounts : iterable of (moves, deviation)
        Deviations as numbers or of shape (conditions,); those of one parameter add.

    Returns
    -------
    overrides : mapping of (owner, key) to float or ndarray
    conditions : Conditions
    """
    nominal = Parameters(design)
    overrides: dict[tuple[str, str], Any] = {}
    values = dict(conditions.values)
    for moves, amount in amounts:
        for owner, key, per in moves:
            if key in CONDITION_KEYS:
                values[owner] = values[owner] + per * amount
            else:
                before = overrides.get((owner, key))
                base = _base(nominal, owner, key) if before is None else before
                overrides[owner, key] = base + per * amount
    return overrides, Conditions(values, conditions.scenario, conditions.absent)


def _base(nominal: Parameters, owner: str, key: str) -> float:
    return 0.0 if key == "voltage_tempco" else float(nominal.of(owner, key)[0])
