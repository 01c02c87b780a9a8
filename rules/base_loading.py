"""Base currents in what drives the bases."""

from __future__ import annotations

from collections.abc import Iterable, Iterator

from rulecheck.api import (
    BaseModel,
    Cost,
    Edit,
    Finding,
    Part,
    Remedy,
    Review,
    Rule,
    Severity,
    carriers,
    format_quantity,
    nearest,
    partner_of,
    worst_cost,
)

from ._edits import add_capacitor, add_in_series, add_part, move, quantity, set_parameter
from ._pairs import cost_evidence, cost_words
from ._source_resistance import drive_of_base

NO_BASE_CURRENT = {"forward_beta": 1e12, "leakage_saturation_current": 0.0}
LEAST_RESISTANCE = 1.0  # ohm: below it a base is driven as if by a source
MOST_DECADES = 3
BYPASS = 100e-9  # F


class BaseLoading(Rule):
    """Dividers and sources whose resistance turns base currents into an error.

    A base current through the resistance that drives the base adds to the base-to-base voltage of a pair, less what
    the current of the other base drops in its own resistance. The circuit is solved again with the base currents of
    the pair nil: what the outputs differ by is the cost, at the typical current gain.
    """

    name = "base-loading"
    title = "Base current in the resistance of what drives the base"
    source = "Gray and Meyer, base current of the transistor model; share: common practice, no source"
    default_severity = Severity.MINOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits, in shares of an output."""

        shares: float = 1.0
        serious_shares: float = 4.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge pairs, each once."""
        judged: set[str] = set()
        for ref in (c.part for c in carriers(review)):
            pair = [r for r in (ref, partner_of(review, ref)) if r is not None and _has_base(review.design.parts[r])]
            driven = {r: ohm for r in pair if (ohm := drive_of_base(review, r).ohm) > LEAST_RESISTANCE}
            if driven and not judged & set(driven):
                judged.update(driven)
                yield from _judge(review, settings, driven)


def _has_base(part: Part) -> bool:
    return part.kind in ("npn", "pnp") and part.pins["B"] != part.pins["C"]


def _cost(review: Review, driven: Iterable[str]) -> Cost | None:
    return worst_cost(review, values={(ref, key): v for ref in driven for key, v in NO_BASE_CURRENT.items()})


def _judge(review: Review, settings: BaseLoading.Settings, driven: dict[str, float]) -> Iterator[Finding]:
    cost = _cost(review, driven)
    if cost is None or cost.worst.value <= settings.shares:
        return
    points, at = review.operating_points, cost.worst.index

    def drop(ref: str) -> float:
        return abs(float(points.current(ref, "B")[at])) * driven[ref]

    first = max(driven, key=drop)
    other = partner_of(review, first)
    beside = f", less {format_quantity(drop(other), 'V', 3)} at the other base, {other}" if other in driven else ""
    net = review.design.parts[first].pins["B"]
    current = float(points.current(first, "B")[at])
    yield Finding(
        f"{first}: a base current of {format_quantity(abs(current), 'A', 3)} drops about "
        f"{format_quantity(drop(first), 'V', 3)} in the {format_quantity(driven[first], 'ohm', 3)} that drive {net}"
        f"{beside}: {cost.worst.value:.3g} times its share at {cost.output}",
        parts=[first], nets=[net], conditions=cost.worst.conditions,
        severity=Severity.MAJOR if cost.worst.value > settings.serious_shares else Severity.MINOR,
        consequence=cost_words(cost.output, float(cost.error[at]), float(points.voltage(cost.output)[at])),
        evidence=[cost_evidence(cost.worst.value, cost.ratio, "typ")],
        remedies=list(_remedies(review, settings, first, cost.worst.value)) if review.seeks_remedies else (),
    )  # fmt: skip


def _remedies(review: Review, settings: BaseLoading.Settings, ref: str, cost: float) -> Iterator[Remedy]:
    """Lower resistances by decades, which keeps their ratios; the same resistance at the other base; a buffer."""
    parts = review.design.parts
    drive = drive_of_base(review, ref)
    decades = next((n for n in range(1, MOST_DECADES + 1) if cost / 10**n < settings.shares), None)
    if drive.resistors and decades is not None:
        values = {r: quantity(parts[r].value.typ / 10**decades, "ohm") for r in drive.resistors}
        words = ", ".join(f"{r} {text}" for r, text in values.items())
        yield Remedy(f"lower resistance: {words}", [set_parameter(r, "value", text) for r, text in values.items()])
    other = partner_of(review, ref)
    missing = drive.ohm - drive_of_base(review, other).ohm if other and _has_base(parts[other]) else 0.0
    if other is not None and missing > LEAST_RESISTANCE:
        ohm = nearest(missing, "E24")
        edits = add_in_series(review.design, ohm, other, "B")
        after = _cost(review.edited(edits), [ref, other])
        if after is not None and after.worst.value < settings.shares:
            yield Remedy(f"equal resistances: {quantity(ohm, 'ohm')} in series with the base of {other}", edits)
    yield from _buffered(review, ref)


def _buffered(review: Review, ref: str) -> Iterator[Remedy]:
    """A follower of a kind that the board has between the divider and the base, with its bypass capacitors."""
    design = review.design
    amplifier = next((p for p in design.parts.values() if p.kind == "op-amp" and not p.spare and p.model), None)
    if amplifier is None:
        return
    base = design.parts[ref].pins["B"]
    own = f"{base}_{ref}"
    pins = {"IN+": base, "IN-": own, "OUT": own, "V+": amplifier.pins["V+"], "V-": amplifier.pins["V-"]}
    table = {"kind": "op-amp", "model": amplifier.model, "pins": pins}
    edits: list[Edit] = [add_part(design, "U", table), move(ref, "B", own)]
    grounds = [net for net, entry in design.nets.items() if entry.role == "ground"]
    for rail in (pins["V+"], pins["V-"]):
        if rail not in grounds:
            edits.append(add_capacitor(design, BYPASS, (rail, grounds[0]), edits, tolerance="10 %"))
    yield Remedy(f"a follower between {base} and the base of {ref}", edits)
