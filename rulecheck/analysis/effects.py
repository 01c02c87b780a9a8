"""What changes do to the outputs of a design where it is at work: errors over their shares, and disturbances."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING, Any

import numpy as np

from ..devices.constants import (
    NOMINAL_TEMPERATURE,
    Array,
    BoolArray,
    doubling_scale,
    saturation_scale,
    thermal_voltage,
)
from .conditions import Conditions
from .operating_points import OperatingPoints
from .queries import Carrier, at_typical, forward_current, in_use, is_regulated, points_in_use
from .review import Cost

if TYPE_CHECKING:
    from ..design.model import Part
    from .review import Review

SMALL_RESISTANCE = 1e-6  # ohm: in place of zero, so that the internal node stays
IDEAL = {
    "bulk_emitter_resistance": SMALL_RESISTANCE,
    "base_resistance": SMALL_RESISTANCE,
    "series_resistance": SMALL_RESISTANCE,
    "knee_current": np.inf,
    "early_voltage": np.inf,
    "leakage_saturation_current": 0.0,
}
FOLLOWS = 1e-4  # of the relative change of a supply: a current that moves by less does not come from it


def outputs(review: Review) -> Iterable[str]:
    """Output nets, in the order of the file."""
    return [name for name, net in review.design.nets.items() if net.role == "output"]


def junction_offset(review: Review, ref: str, volts: Array | float) -> dict[tuple[str, str], Any]:
    """Parameter change that adds a voltage to that of a junction, for `Review.re_solve`."""
    part = review.design.parts[ref]
    if part.kind != "diode":
        return {(ref, "mismatch"): volts}
    slope = part.emission_coefficient.typ * thermal_voltage(review.operating_points.temperature(ref))
    return {(ref, "saturation_current"): part.saturation_current.typ * np.exp(np.nan_to_num(volts / slope))}


def worst_cost(
    review: Review,
    *,
    values: Mapping[tuple[str, str], Any] | None = None,
    temperatures: Mapping[str, Array] | None = None,
) -> Cost | None:
    """The output that a change costs most of its share; None where none is judged.

    Judged are the conditions at which the circuit is in use and no amplifier before the output at a limit.

    Parameters
    ----------
    review : Review
    values, temperatures : mapping
        As for `Review.re_solve`; arrays over the review conditions.
    """
    rows, points = in_use(review), review.operating_points
    if not rows.any():
        return None
    given = {key: v[rows] if isinstance(v, np.ndarray) else v for key, v in (values or {}).items()}
    heat = {ref: v[rows] for ref, v in (temperatures or {}).items()}
    changed = review.solve(review.conditions.take(rows), overrides=given, temperatures=heat)
    costs = []
    for net in outputs(review):
        judged = is_regulated(review, points, net) & rows
        judged[rows] &= is_regulated(review, changed, net)
        error = np.full(rows.shape, np.nan)
        error[rows] = changed.voltage(net) - points.voltage(net)[rows]
        error = np.where(judged, error, np.nan)
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
    bias, offset, dark, clamps : ndarray
        From bias currents of amplifiers, from their offset voltages over the resistance at the node, from
        photodiodes on it without light, and from diodes on it that stand by.
    """

    points: OperatingPoints
    bias: Array
    offset: Array
    dark: Array
    clamps: Array


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
        *_leakages(review, points, carrier),
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


def _leakages(review: Review, points: OperatingPoints, carrier: Carrier) -> tuple[Array, Array]:
    """Currents at a node of photodiodes without light, and of diodes that carry no signal, at their limits."""
    working = {log.part for log in review.structure.log_diodes} | {carrier.part}
    dark, clamps = np.zeros(points.conditions.size), np.zeros(points.conditions.size)
    for ref, part in review.design.parts.items():
        if carrier.node not in part.pins.values() or ref in working:
            continue
        if part.kind == "diode":
            clamps = clamps + np.abs(points.current(ref, "A")) + _more_at_limit(points, part)
        elif part.kind == "photodiode":
            spread = part.dark_current
            rise = spread.max / spread.typ if spread is not None and spread.typ else 1.0
            dark = dark + np.abs(points.current(ref, "A") + points.conditions.values[ref]) * rise
    return dark, clamps


def _more_at_limit(points: OperatingPoints, diode: Part) -> Array:
    """What the currents of a diode in reverse may be above their typical values [A]."""
    heat = points.temperature(diode.ref)
    n = np.full(heat.shape, diode.emission_coefficient.typ)
    bandgap, exponent = (np.full(heat.shape, getattr(diode, k).typ) for k in ("bandgap", "temperature_exponent"))
    saturation = (diode.saturation_current.max - diode.saturation_current.typ) * saturation_scale(
        heat, bandgap, exponent, n
    )
    leakage = diode.reverse_leakage.max - diode.reverse_leakage.typ
    return saturation + leakage * doubling_scale(heat, np.full(heat.shape, diode.leakage_doubling.typ))


@dataclass(frozen=True, slots=True)
class SupplyEffect:
    """The largest effect of a supply's tolerance on an output through one current.

    Attributes
    ----------
    output : str
    share : float
        Of the reading; of an output that crosses zero, of the ratio of currents that it shows.
    moved : float
        Change of the output [V].
    conditions : dict of str to float
    """

    output: str
    share: float
    moved: float
    conditions: dict[str, float]


def supply_effect(review: Review, ref: str, supply: str) -> SupplyEffect | None:
    """What the tolerance of a supply does to the outputs through the current of a junction, by solving again.

    Parameters
    ----------
    review : Review
    ref, supply : str
        Junction; supply net.

    Returns
    -------
    SupplyEffect or None
        None where the current does not follow the supply, or no output is judged.
    """
    values, net = review.conditions.values, review.design.nets[supply]
    rows = at_typical(review, [n for n in values if n not in review.design.inputs and n != "ambient"]) & in_use(review)
    if net.voltage is None or not rows.any():
        return None
    before = review.solve(review.conditions.take(rows))
    found = []
    for end in (net.voltage.min, net.voltage.max):
        moved = Conditions({**before.conditions.values, supply: np.full(before.conditions.size, end)})
        after = review.solve(moved)
        with np.errstate(all="ignore"):
            followed = np.abs(forward_current(after, ref) / forward_current(before, ref) - 1)
        if np.nanmax(followed, initial=0.0, where=np.isfinite(followed)) > FOLLOWS * abs(end / net.voltage.typ - 1):
            found += [e for output in outputs(review) if (e := _effect(review, output, before, after, rows))]
    return max(found, key=lambda effect: effect.share, default=None)


def _effect(
    review: Review, output: str, before: OperatingPoints, after: OperatingPoints, rows: BoolArray
) -> SupplyEffect | None:
    moved = after.voltage(output) - before.voltage(output)
    steady = is_regulated(review, before, output) & is_regulated(review, after, output)
    with np.errstate(all="ignore"):
        share = np.where(steady, np.abs(moved) / _scale(review, output, before.voltage(output), rows), np.nan)
    if not np.isfinite(share).any():
        return None
    worst = before.worst(share)
    return SupplyEffect(output, worst.value, float(moved[worst.index]), worst.conditions)


def _scale(review: Review, output: str, voltage: Array, rows: BoolArray) -> Array:
    """Reading of an output; unless it has one sign, its change for a whole change of an input's logarithm."""
    if (voltage > 0).all() or (voltage < 0).all():
        return np.abs(voltage)
    slopes = [np.abs(review.log_slope(output, name)[rows]) for name in review.design.inputs]
    return np.fmax.reduce(slopes) if slopes else np.abs(voltage)
