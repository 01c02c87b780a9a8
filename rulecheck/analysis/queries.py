"""Questions that several rules ask of a review: which current a junction carries, and what disturbs it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..circuit.structure import CurrentSources
from ..devices.constants import NOMINAL_TEMPERATURE, Array, BoolArray, thermal_voltage
from .conditions import Conditions
from .operating_points import OperatingPoints
from .review import Cost

if TYPE_CHECKING:
    from .review import Review

STEADY = 0.05  # of a current: base currents and Early voltages of the others move a fixed one by less
FOLLOWING = 0.1  # of the inputs' own relative change
SMALL_RESISTANCE = 1e-6  # ohm: in place of zero, so that the internal node stays
IDEAL = {
    "bulk_emitter_resistance": SMALL_RESISTANCE, "base_resistance": SMALL_RESISTANCE,
    "series_resistance": SMALL_RESISTANCE, "knee_current": np.inf, "early_voltage": np.inf,
    "leakage_saturation_current": 0.0,
}  # fmt: skip


@dataclass(frozen=True, slots=True)
class Carrier:
    """A junction at work and the current it carries.

    Attributes
    ----------
    part : str
        Transistor or log diode.
    node : str
        Net at which its current arrives: the summing node, else the net of its collector or anode.
    amplifier : str, optional
        The amplifier that holds the node.
    is_log : bool
        Turns a current into a voltage; else its current follows a voltage, or nothing.
    is_fixed : bool
        No input moves its current.
    sources : CurrentSources
        What sets the current of the node.
    """

    part: str
    node: str
    amplifier: str | None
    is_log: bool
    is_fixed: bool
    sources: CurrentSources


def carriers(review: Review) -> tuple[Carrier, ...]:
    """Junctions of log, antilog and junction loops with their currents, in the order of the file.

    The current of a log transistor is fixed where no input reaches its summing node; that of another where it
    does not vary with the inputs over the review conditions.

    Parameters
    ----------
    review : Review
    """
    structure, parts = review.structure, review.design.parts
    nodes = {log.part: log.summing_node for log in (*structure.log_transistors, *structure.log_diodes)}
    others = {a.part for a in structure.antilog_transistors} | {r for loop in structure.junction_loops for r in loop.parts}
    found = []
    for ref in parts:
        if ref not in nodes and ref not in others:
            continue
        pins = parts[ref].pins
        node = nodes.get(ref) or pins.get("C") or pins["A"]
        sources = structure.current_sources_of(node)
        is_fixed = not sources.inputs if ref in nodes else not _follows_inputs(review, ref)
        found.append(Carrier(ref, node, structure.amplifier_of(node), ref in nodes, is_fixed, sources))
    return tuple(found)


def _follows_inputs(review: Review, ref: str) -> bool:
    """Whether a current varies with the inputs at typical ambient, supplies and potentiometers."""
    values, inputs = review.conditions.values, review.design.inputs
    rows = at_typical(review, [name for name in values if name not in inputs]) & review.operating_points.converged
    current = forward_current(review.operating_points, ref)[rows]
    own = max((_change(values[name][rows]) for name in inputs), default=0.0)
    return _change(current) > min(STEADY, FOLLOWING * own)


def _change(values: Array) -> float:
    """Span of values over the largest magnitude."""
    largest = float(np.abs(values).max(initial=0.0))
    return float(np.ptp(values)) / largest if largest else 0.0


def at_typical(review: Review, names: Sequence[str]) -> BoolArray:
    """Review conditions at which the quantities named are at their typ."""
    values, typical = review.conditions.values, review.typical
    masks = [values[name] == typical[name] for name in names]
    return np.logical_and.reduce(masks) if masks else np.ones(review.conditions.size, dtype=bool)


def potentiometers(review: Review) -> list[str]:
    """References of the potentiometers."""
    return [ref for ref, part in review.design.parts.items() if part.kind == "potentiometer"]


def in_use(review: Review) -> BoolArray:
    """Review conditions at which the circuit is asked to compute: above the cutoffs, potentiometers as set."""
    below = _below_cutoff(review)
    mask = at_typical(review, potentiometers(review)) & review.operating_points.converged
    return mask & ~np.logical_or.reduce([*below.values(), np.zeros_like(mask)])


def points_in_use(review: Review) -> OperatingPoints:
    """Operating points of the review conditions, inputs below their cutoff raised to it."""
    values: dict[str, Array] = {}
    for name, below in _below_cutoff(review).items():
        source = review.design.inputs[name]
        sign = 1.0 if source.high >= -source.low else -1.0
        values[name] = np.where(below, sign * (source.cutoff or 0.0), review.conditions.values[name])
    return review.solve(Conditions({**review.conditions.values, **values})) if values else review.operating_points


def _below_cutoff(review: Review) -> dict[str, BoolArray]:
    """By input with a cutoff, the conditions at which it is below; only the larger side of a range counts."""
    below = {}
    for name, source in review.design.inputs.items():
        if source.cutoff is not None:
            x = review.conditions.values[name] * (1 if source.high >= -source.low else -1)
            below[name] = np.abs(x) < source.cutoff if source.low == -source.high else x < source.cutoff * (1 - 1e-9)
    return below


def forward_current(points: OperatingPoints, ref: str) -> Array:
    """Current of a junction in its forward direction: of a transistor its collector current [A]."""
    kind = points.design.parts[ref].kind
    if kind == "diode":
        return points.current(ref, "A")
    return points.current(ref, "C") * (1 if kind == "npn" else -1)


def forward_voltage(points: OperatingPoints, ref: str) -> Array:
    """Voltage across a junction in its forward direction [V]."""
    part = points.design.parts[ref]
    if part.kind == "diode":
        return points.voltage(part.pins["A"]) - points.voltage(part.pins["K"])
    return points.vbe(ref) * (1 if part.kind == "npn" else -1)


def junction_offset(review: Review, ref: str, volts: Array | float) -> dict[tuple[str, str], Any]:
    """Parameter change that adds a voltage to that of a junction, for `Review.re_solve`."""
    part = review.design.parts[ref]
    if part.kind != "diode":
        return {(ref, "mismatch"): volts}
    slope = part.emission_coefficient.typ * thermal_voltage(review.operating_points.temperature(ref))
    return {(ref, "saturation_current"): part.saturation_current.typ * np.exp(np.nan_to_num(volts / slope))}


def worst_cost(
    review: Review, *, values: Mapping[tuple[str, str], Any] | None = None, temperatures: Mapping[str, Array] | None = None
) -> Cost | None:
    """The output that a change costs most of its share, judged where the circuit is in use; None: none is judged.

    Parameters
    ----------
    review : Review
    values, temperatures : mapping
        As for `Review.re_solve`; arrays over the review conditions.
    """
    rows, points = in_use(review), review.operating_points
    if not rows.any():
        return None
    changed = review.solve(
        review.conditions.take(rows),
        overrides={key: value[rows] if isinstance(value, np.ndarray) else value for key, value in (values or {}).items()},
        temperatures={ref: value[rows] for ref, value in (temperatures or {}).items()},
    )
    costs = []
    for net in (n for n, entry in review.design.nets.items() if entry.role == "output"):
        error = np.full(rows.shape, np.nan)
        error[rows] = changed.voltage(net) - points.voltage(net)[rows]
        share = review.share(net)
        with np.errstate(all="ignore"):
            ratio = np.abs(error) / share
        if np.isfinite(ratio).any():
            costs.append(Cost(net, error, share, ratio, points.worst(ratio)))
    return max(costs, key=lambda cost: cost.worst.value, default=None)


def conformity_cost(review: Review, ref: str) -> Cost | None:
    """What a junction's departure from an ideal exponential costs the outputs.

    The circuit is solved again with the ohmic resistances, the knee, the leakage and the Early effect of this one
    junction taken away.

    Parameters
    ----------
    review : Review
    ref : str
        Transistor or diode.
    """
    part = review.design.parts[ref]
    ideal: Mapping[tuple[str, str], float] = {
        (ref, name): value for name, value in IDEAL.items()
        if name in part.parameters and part.parameters[name].typ not in (0.0, np.inf)
    }  # fmt: skip
    return worst_cost(review, values=ideal) if ideal else None


@dataclass(frozen=True)
class Disturbance:
    """Currents that add to the current of a node, limits, over the conditions of `points` [A].

    Attributes
    ----------
    points : OperatingPoints
        At the highest ambient, supplies and potentiometers at typ, inputs above their cutoffs.
    bias, offset, leakage : ndarray
        From bias currents of amplifiers, from their offset voltages over the resistance at the node, and from
        diodes and photodiodes on it.
    """

    points: OperatingPoints
    bias: Array
    offset: Array
    leakage: Array


def disturbance(review: Review, carrier: Carrier) -> Disturbance:
    """What adds to a junction's current at the hottest, by solving again with bias and offset at their limits.

    Parameters
    ----------
    review : Review
    carrier : Carrier
    """
    design, everywhere = review.design, points_in_use(review).conditions
    fixed = [n for n in everywhere.values if n != "ambient" and n not in design.inputs]
    hot = (everywhere.values["ambient"] == design.ambient.max) & at_typical(review, fixed)
    conditions = everywhere.take(hot)
    points = review.solve(conditions)
    amplifiers = [r for r in review.structure.amplifiers_of(carrier.node)
                  if carrier.node in (design.parts[r].pins["IN+"], design.parts[r].pins["IN-"])]  # fmt: skip

    def current(name: str, limits: Mapping[str, Any]) -> Array:
        changed = review.solve(conditions, overrides={(r, name): limits[r] for r in amplifiers})
        return forward_current(changed, carrier.part)

    bias = current("bias_current", {r: bias_limit(design.parts[r]) for r in amplifiers})
    offset = current("offset", {r: _offset_limit(points, r) for r in amplifiers})
    return Disturbance(
        points,
        np.abs(bias - current("bias_current", dict.fromkeys(amplifiers, 0.0))),
        np.abs(offset - forward_current(points, carrier.part)),
        _leakage(review, points, carrier),
    )


def bias_limit(amplifier: Any) -> float:  # noqa: ANN401  # a part or the parameters of a model
    """Largest input current of an amplifier at 25 °C, offset current included [A]."""
    bias, offset = amplifier.bias_current, amplifier.offset_current
    largest = 0.0 if bias is None else max(abs(bias.min), abs(bias.max))
    return float(largest + (0.0 if offset is None else offset.half / 2))


def _offset_limit(points: OperatingPoints, ref: str) -> Array:
    """Offset voltage of an amplifier at its limit; what a single unit states is known, and stays [V]."""
    part = points.design.parts[ref]
    known = part.offset
    if known is not None:
        return np.full(points.conditions.size, getattr(known, "typ", known), dtype=float)
    limit = 0.0 if part.offset_voltage is None else part.offset_voltage.half
    drift = 0.0 if part.offset_drift is None else part.offset_drift.half
    return limit + drift * np.abs(np.nan_to_num(points.temperature(ref)) - NOMINAL_TEMPERATURE)


def _leakage(review: Review, points: OperatingPoints, carrier: Carrier) -> Array:
    """Currents at a node of diodes that do not carry the signal, and dark currents of photodiodes, at limits."""
    design = review.design
    working = {log.part for log in review.structure.log_diodes} | {carrier.part}
    total = np.zeros(points.conditions.size)
    for ref, part in design.parts.items():
        if carrier.node not in part.pins.values() or ref in working:
            continue
        if part.kind == "diode":
            spread = part.reverse_leakage if part.reverse_leakage.typ > 0 else part.saturation_current
            total = total + np.abs(points.current(ref, "A")) * spread.max / spread.typ
        elif part.kind == "photodiode":
            dark = points.current(ref, "A") + points.conditions.values[ref]
            spread = part.dark_current
            total = total + np.abs(dark) * (spread.max / spread.typ if spread is not None and spread.typ else 1.0)
    return total


def partner_of(review: Review, ref: str) -> str | None:
    """The junction that a junction is compared with in its loop, None where nothing stands against it."""
    for loop in review.structure.loops_of(ref):
        for pairing in loop.pairings[:1]:
            for one, other in pairing:
                if ref in (one, other):
                    return other if ref == one else one
    return None
