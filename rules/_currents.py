"""What remedies do about currents: scale them by their resistors, take a better amplifier, narrow the range."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator, Sequence

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    Carrier, Design, Edit, Model, OperatingPoints, Part, Remedy, Remove, Review, Set, bias_limit, carriers,
    decade_values, forward_current, in_use, join_key, partner_of,
)  # fmt: skip

from ._edits import quantity, set_parameter

Array = npt.NDArray[np.float64]
SERIES = "E96"
SEARCH = 1.3  # how far beyond what is needed a set of preferred values is looked for
NOMINAL = 298.15  # K: where bias currents are stated


def feeds(review: Review, carrier: Carrier) -> list[Part]:
    """Resistors and current sources that set the current of a junction; none where something else does too."""
    design = review.design
    on_node = [p for p in design.parts.values() if carrier.node in p.pins.values() and carrier.part != p.ref]
    if not carrier.is_log and not carrier.is_fixed:
        output = design.parts[carrier.amplifier].pins["OUT"] if carrier.amplifier else None
        return [p for p in on_node if p.kind == "resistor" and output in (None, *p.pins.values())]
    found = [p for p in on_node if p.ref in carrier.sources.parts]
    free = carrier.node in design.inputs or any(p.kind not in ("resistor", "current-source") for p in found)
    return [] if free else found


def scaled(review: Review, carrier: Carrier, factor: float) -> Remedy | None:
    """Remedy that scales a current by `factor` or a little more, and with it the one it is compared with.

    Their ratio, and with it the transfer, is kept as well as E96 values allow.

    Parameters
    ----------
    review : Review
    carrier : Carrier
    factor : float
        Wanted over present current; below 1 the current is reduced.
    """
    partner = partner_of(review, carrier.part)
    others = [c for c in carriers(review) if c.part == partner]
    groups = [feeds(review, c) for c in (carrier, *others)]
    if not all(groups):
        return None
    parts = list({p.ref: p for group in groups for p in group}.values())
    values = _preferred([p.value.typ for p in parts], [p.kind == "current-source" for p in parts], factor)
    if values is None:
        return None
    edits = [set_parameter(p.ref, "value", _text(p, v)) for p, v in zip(parts, values, strict=True)]
    words = ", ".join(f"{p.ref} {_text(p, v)}" for p, v in zip(parts, values, strict=True))
    return Remedy(f"{'larger' if factor > 1 else 'smaller'} currents at the same ratio: {words}", edits)


def _text(part: Part, value: float) -> str:
    return quantity(value, "A" if part.kind == "current-source" else "ohm")


def _preferred(values: Sequence[float], is_current: Sequence[bool], factor: float) -> list[float] | None:
    """Values scaled by one common factor, resistors to E96, at least as far as asked; the set of best ratio."""
    lead = next((i for i, current in enumerate(is_current) if not current), None)
    reach = (factor, factor * SEARCH) if factor > 1 else (factor / SEARCH, factor)
    if lead is None:
        return [value * factor for value in values]
    best: tuple[float, list[float]] | None = None
    for candidate in decade_values(SERIES, values[lead] / reach[1], values[lead] / reach[0]):
        scale = values[lead] / candidate
        found = [v * scale if c else _nearest(v / scale) for v, c in zip(values, is_current, strict=True)]
        off = max((abs(math.log(f * scale / v)) for f, v, c in zip(found, values, is_current, strict=True) if not c))
        if best is None or off < best[0] - 1e-6:
            best = (off, found)
    return best[1] if best else None


def _nearest(value: float) -> float:
    from rulecheck.api import nearest

    return nearest(value, SERIES)


def better_amplifiers(review: Review, node: str, bias: float, offset: float | None) -> Iterator[Remedy]:
    """Models of the catalogues whose bias current and offset voltage are within limits.

    Parameters
    ----------
    review : Review
    node : str
        The net that an input of the amplifiers is on.
    bias : float
        Largest input current at the hottest [A].
    offset : float, optional
        Largest offset voltage at the hottest [V].
    """
    design = review.design
    refs = [r for r in review.structure.amplifiers_of(node)
            if node in (design.parts[r].pins["IN+"], design.parts[r].pins["IN-"])]  # fmt: skip
    if not refs:
        return
    part = design.parts[refs[0]]
    hottest = float(np.nanmax(review.operating_points.temperature(part.ref)))
    fitting = [m for m in design.models.values() if m.kind == "op-amp" and m.name != part.model
               and _is_within(m, bias, offset, hottest)]  # fmt: skip
    if not fitting:
        return

    def distance(model: Model) -> float:
        return abs(math.log(model.parameters.gain_bandwidth.typ / part.gain_bandwidth.typ))

    model = min(fitting, key=distance)
    same = [p for r in refs for p in design.parts.values()
            if p.ref == r or (p.kind == "op-amp" and p.package == design.parts[r].package)]  # fmt: skip
    edits = [e for p in {p.ref: p for p in same}.values() for e in _with_model(design, p, model)]
    yield Remedy(f"use {model.name} for {', '.join(dict.fromkeys(p.ref for p in same))}", edits)


def _is_within(model: Model, bias: float, offset: float | None, hottest: float) -> bool:
    p = model.parameters
    doubling = p.bias_current_doubling.typ if p.bias_current_doubling is not None else math.inf
    if p.bias_current is None or bias_limit(p) * 2 ** ((hottest - NOMINAL) / doubling) > bias:
        return False
    limit = 0.0 if p.offset_voltage is None else p.offset_voltage.half
    drift = 0.0 if p.offset_drift is None else p.offset_drift.half * abs(hottest - NOMINAL)
    return offset is None or limit + drift <= offset


def _with_model(design: Design, part: Part, model: Model) -> list[Edit]:
    """Another model, and away with what the part states of its own about input currents."""
    stated = design.data["parts"][part.ref]
    own = [name for name in ("bias_current", "offset_current", "bias_current_doubling") if name in stated]
    return [set_parameter(part.ref, "model", model.name), *(Remove(join_key(("parts", part.ref, n))) for n in own)]


def narrowed(review: Review, carrier: Carrier, least: float = 0.0, most: float = math.inf) -> Iterator[Remedy]:
    """Remedy that narrows the range of the input of a current to magnitudes from `least` to `most`."""
    if len(carrier.sources.inputs) != 1:
        return
    name = carrier.sources.inputs[0]
    source = review.design.inputs[name]
    sign = 1.0 if source.high >= -source.low else -1.0
    near, far = sorted((sign * source.low, sign * source.high))
    low, high = max(near, _rounded(least, math.ceil)), min(far, _rounded(most, math.floor))
    if not 0 < low < high:
        return
    key = ("parts", name, "photocurrent") if source.kind == "photodiode" else ("nets", name, "range")
    ends = sorted((sign * low, sign * high))
    words = [quantity(end, source.unit) for end in ends]
    edits: list[Edit] = []
    if high < far or source.cutoff is None:
        edits.append(Set(join_key(key), words))
    else:
        edits.append(Set(join_key(("nets", name, "cutoff")), quantity(low, source.unit)))
    edits += [Set(join_key(("requirements", r.name, "range", name)), words)
              for r in review.design.requirements.values() if name in r.range and edits[0].key == join_key(key)]  # fmt: skip
    yield Remedy(f"ask {name} only from {words[0]} to {words[1]}", edits)


def _rounded(value: float, way: object) -> float:
    """Value to two digits, up or down."""
    if not 0 < value < math.inf:
        return value
    step = 10.0 ** (math.floor(math.log10(value)) - 1)
    assert callable(way)
    return float(f"{way(round(value / step, 6)) * step:.2g}")


def source_magnitude(points: OperatingPoints, carrier: Carrier) -> Array | None:
    """Magnitude of the input that sets a current, over the conditions; None where there are several."""
    if len(carrier.sources.inputs) != 1:
        return None
    return np.abs(points.conditions.values[carrier.sources.inputs[0]])


def outside(current: Array, log_range: tuple[float, float] | None) -> Array:
    """How many decades a current is outside a range, 0 inside; NaN where the current is not positive."""
    with np.errstate(all="ignore"):
        size = np.log10(np.where(current > 0, current, np.nan))
    if log_range is None:
        return np.where(np.isfinite(size), 0.0, np.nan)
    return np.maximum(0.0, np.maximum(math.log10(log_range[0]) - size, size - math.log10(log_range[1])))


def middle_of(review: Review, refs: Iterable[str]) -> float | None:
    """Geometric middle of what junctions carry where the circuit is in use; None where a current is not positive."""
    used = in_use(review)
    currents = np.concatenate([forward_current(review.operating_points, r)[used] for r in refs])
    if not currents.size or not currents.min() > 0:
        return None
    return float(math.sqrt(currents.min() * currents.max()))
