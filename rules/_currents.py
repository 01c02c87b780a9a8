"""How remedies scale currents: by their resistors or sources, together with what they are compared with."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from typing import Any

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    Carrier,
    Design,
    Edit,
    Model,
    OperatingPoints,
    Part,
    Remedy,
    Remove,
    Review,
    Set,
    bias_limit,
    carriers,
    decade_values,
    format_quantity,
    join_key,
    nearest,
    partner_of,
)

from ._edits import quantity, set_parameter

Array = npt.NDArray[np.float64]
SERIES = "E96"
SEARCH = 1.3  # how far beyond what is needed a set of preferred values is looked for
MOST_MODELS = 2
NOMINAL = 298.15  # K: where bias currents are stated
INPUT_STATEMENTS = ("bias_current", "offset_current", "bias_current_doubling")


def compared_with(review: Review, carrier: Carrier) -> Carrier | None:
    """The junction that stands against another in its loop, with its current."""
    partner = partner_of(review, carrier.part)
    return next((c for c in carriers(review) if c.part == partner), None)


def feeds(review: Review, carrier: Carrier) -> list[Part]:
    """Resistors and current sources that set the current of a junction; none where something else does too."""
    design = review.design
    on_node = [p for p in design.parts.values() if carrier.node in p.pins.values() and carrier.part != p.ref]
    if not carrier.is_log and not carrier.is_fixed:
        output = design.parts[carrier.amplifier].pins["OUT"] if carrier.amplifier else None
        return [p for p in on_node if p.kind == "resistor" and output in (None, *p.pins.values())]
    found = [p for p in on_node if p.ref in carrier.sources.parts]
    is_free = carrier.node in design.inputs or any(p.kind not in ("resistor", "current-source") for p in found)
    return [] if is_free else found


def scaled(review: Review, carrier: Carrier, factor: float) -> list[Remedy]:
    """Remedy that scales a current by `factor` or a little more, and with it the one it is compared with.

    Their ratio, and with it the transfer, is kept as well as E96 values allow, where both can be scaled.

    Parameters
    ----------
    review : Review
    carrier : Carrier
    factor : float
        Wanted over present current; below 1 the current is reduced.
    """
    own, *rest = (feeds(review, c) for c in (carrier, compared_with(review, carrier)) if c is not None)
    parts = list({part.ref: part for group in (own, *rest) for part in group}.values())
    values = _preferred(parts, factor) if own else None
    if values is None:
        return []
    texts = [_text(part, value) for part, value in zip(parts, values, strict=True)]
    edits = [set_parameter(part.ref, "value", text) for part, text in zip(parts, texts, strict=True)]
    size = "larger" if factor > 1 else "smaller"
    what = "currents at the same ratio" if rest and all(rest) else "current"
    words = ", ".join(f"{part.ref} {text}" for part, text in zip(parts, texts, strict=True))
    return [Remedy(f"{size} {what}: {words}", edits)]


def _preferred(parts: Sequence[Part], factor: float) -> list[float] | None:
    """Values for currents scaled at least by `factor`, resistors from E96: the set that keeps the ratio best."""
    values = [part.value.typ for part in parts]
    lead = next((p.value.typ for p in parts if p.kind == "resistor"), None)
    if lead is None:
        return [value * factor for value in values]
    reach = (factor, factor * SEARCH) if factor > 1 else (factor / SEARCH, factor)
    best: tuple[float, list[float]] | None = None
    for candidate in decade_values(SERIES, lead / reach[1], lead / reach[0]):
        scale = lead / candidate
        found = [v / scale if p.kind == "resistor" else v * scale for v, p in zip(values, parts, strict=True)]
        kept = [nearest(v, SERIES) if p.kind == "resistor" else v for v, p in zip(found, parts, strict=True)]
        off = max(abs(math.log(a / b)) for a, b in zip(kept, found, strict=True))
        if best is None or off < best[0] - 1e-6:
            best = (off, kept)
    return best[1] if best else None


def _text(part: Part, value: float) -> str:
    return quantity(value, "ohm") if part.kind == "resistor" else format_quantity(value, "A", 3)


def better_amplifiers(review: Review, node: str, budget: float, conductance: float = 0.0) -> Iterator[Remedy]:
    """Models of the catalogues whose input current and offset voltage add little enough to a node.

    Parameters
    ----------
    review : Review
    node : str
        The net that an input of the amplifiers is on.
    budget : float
        Largest current that they may add at the hottest [A].
    conductance : float
        Of the node, through which the offset voltage drives a current [S].
    """
    design, points = review.design, review.operating_points
    own = [design.parts[ref] for ref in review.structure.amplifiers_of(node)]
    own = [part for part in own if node in (part.pins["IN+"], part.pins["IN-"])]
    if not own:
        return
    part = own[0]
    hottest = float(np.nanmax(points.temperature(part.ref)))
    supply = float(np.nanmax(points.voltage(part.pins["V+"]) - points.voltage(part.pins["V-"])))
    fitting = [
        m
        for m in design.models.values()
        if m.kind == "op-amp" and _added(m, conductance, hottest) <= budget and _takes(m, supply)
    ]
    packages = {p.package for p in own}
    parts = [p for p in design.parts.values() if p.kind == "op-amp" and p.package in packages]

    def distance(model: Model) -> float:
        return abs(math.log(model.parameters.gain_bandwidth.typ / part.gain_bandwidth.typ))

    for model in sorted(fitting, key=distance)[:MOST_MODELS]:
        edits = [edit for p in parts for edit in _with_model(design, p, model)]
        yield Remedy(f"use {model.name} for {', '.join(p.ref for p in parts)}", edits)


def _added(model: Model, conductance: float, hottest: float) -> float:
    """Current that an amplifier adds to a node at the hottest, infinite where its bias current is not known [A]."""
    p = model.parameters
    if p.bias_current is None:
        return math.inf
    doubling = math.inf if p.bias_current_doubling is None else p.bias_current_doubling.typ
    return bias_limit(p) * float(2 ** ((hottest - NOMINAL) / doubling)) + conductance * offset_limit(p, hottest)


def offset_limit(amplifier: Any, hottest: float) -> float:  # noqa: ANN401  # a part, or the parameters of a model
    """Largest offset voltage of an amplifier at a temperature [V]."""
    limit, drift = (0.0 if s is None else s.half for s in (amplifier.offset_voltage, amplifier.offset_drift))
    return float(limit + drift * abs(hottest - NOMINAL))


def _takes(model: Model, supply: float) -> bool:
    limits = model.parameters.supply
    return limits is None or float(limits.min) <= supply <= float(limits.max)


def _with_model(design: Design, part: Part, model: Model) -> list[Edit]:
    """Another model, and away with what the part states of its own about input currents."""
    stated = [name for name in INPUT_STATEMENTS if name in design.data["parts"][part.ref]]
    removed = [Remove(join_key(("parts", part.ref, name))) for name in stated]
    return [set_parameter(part.ref, "model", model.name), *removed]


def input_magnitude(points: OperatingPoints, carrier: Carrier) -> Array | None:
    """Magnitude of the input that sets a current, over the conditions; None where there are several."""
    if len(carrier.sources.inputs) != 1:
        return None
    return np.abs(points.conditions.values[carrier.sources.inputs[0]])


def narrowed(review: Review, carrier: Carrier, least: float = 0.0, most: float = math.inf) -> Iterator[Remedy]:
    """Remedy that narrows the range of the input of a current to magnitudes from `least` to `most`."""
    if len(carrier.sources.inputs) != 1:
        return
    name = carrier.sources.inputs[0]
    source = review.design.inputs[name]
    sign = 1.0 if source.high >= -source.low else -1.0
    near, far = sorted((sign * source.low, sign * source.high))
    low, high = max(near, _two_digits(least, math.ceil)), min(far, _two_digits(most, math.floor))
    if not 0 < low < high:
        return
    words = [quantity(end, source.unit) for end in sorted((sign * low, sign * high))]
    title = f"ask {name} only from {words[0]} to {words[1]}"
    if source.cutoff is not None and high == far:
        yield Remedy(title, [Set(join_key(("nets", name, "cutoff")), quantity(low, source.unit))])
        return
    key = ("parts", name, "photocurrent") if source.kind == "photodiode" else ("nets", name, "range")
    asked = [r.name for r in review.design.requirements.values() if name in r.range]
    ranges = [key, *(("requirements", requirement, "range", name) for requirement in asked)]
    yield Remedy(title, [Set(join_key(path), words) for path in ranges])


def _two_digits(value: float, way: Callable[[float], int]) -> float:
    """Value to two digits, up or down."""
    if not 0 < value < math.inf:
        return value
    step = 10.0 ** (math.floor(math.log10(value)) - 1)
    return float(f"{way(round(value / step, 6)) * step:.2g}")
