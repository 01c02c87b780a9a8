"""Voltage across capacitors against their rating."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Annotated

import numpy as np

from rulecheck.api import (
    BaseModel,
    Evidence,
    Finding,
    Part,
    Remedy,
    Review,
    Rule,
    Severity,
    Unit,
    format_quantity,
)

from ._edits import quantity, set_parameter
from ._saturation import nets_without_a_level, working
from ._words import percent

USUAL_RATINGS = (6.3, 10.0, 16.0, 25.0, 35.0, 50.0, 63.0, 100.0, 160.0, 200.0, 250.0, 400.0, 630.0, 1000.0)  # V


class VoltageRating(Rule):
    """Capacitors whose voltage, at any review condition, comes near or over what they are rated for.

    The supplies stand at the ends of their tolerances. Over the rating the dielectric breaks down; close below it
    ceramic capacitors lose much of their capacitance, and electrolytic ones their life.
    """

    name = "voltage-rating"
    title = "Capacitor near or over its voltage rating"
    source = "the maker's rating, as the part states it; derating to 80 %: common practice, no source"
    default_severity = Severity.MAJOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits."""

        share_of_rating: Annotated[float, Unit("%")] = 0.8

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge capacitors of one rating across the same nets together: they have one cause."""
        groups: dict[tuple[frozenset[str], float], list[Part]] = {}
        unjudged = nets_without_a_level(review)
        for part in working(review.design).values():
            if part.kind == "capacitor" and part.voltage is not None and not unjudged & set(part.pins.values()):
                key = (frozenset(part.pins.values()), float(part.voltage.min))
                groups.setdefault(key, []).append(part)
        for (_, rating), parts in groups.items():
            yield from _judge(review, settings, parts, rating)


def _judge(review: Review, settings: VoltageRating.Settings, parts: list[Part], rating: float) -> Iterator[Finding]:
    points = review.operating_points
    first, second = parts[0].pins.values()
    voltage = np.abs(points.voltage(first) - points.voltage(second))
    used = float(np.nanmax(voltage, initial=0.0)) / rating
    if used <= settings.share_of_rating:
        return
    worst, is_over = points.worst(voltage), used > 1
    refs = [part.ref for part in parts]
    who = ", ".join(refs)
    allowed = 1.0 if is_over else settings.share_of_rating
    usual = next((v for v in USUAL_RATINGS if v >= worst.value / settings.share_of_rating), None)
    yield Finding(
        f"{who}: {format_quantity(worst.value, 'V')} across {'them' if len(refs) > 1 else 'it'}, {percent(used)} of "
        f"the rating of {format_quantity(rating, 'V')}; {percent(allowed)} allowed",
        parts=refs, nets=[first, second], conditions=worst.conditions,
        severity=Severity.MAJOR if is_over else Severity.MINOR,
        consequence="the capacitor breaks down" if is_over else "capacitance and life are less than stated",
        evidence=[Evidence("voltage", worst.value, "V", allowed * rating, "<=", over=voltage, basis="limit")],
        remedies=[
            Remedy(f"take capacitors of {quantity(usual, 'V')} for {who}",
                   [set_parameter(ref, "voltage", quantity(usual, "V")) for ref in refs])
            if usual is not None
            else Remedy(f"put capacitors in series for {who}, with resistors that share the voltage")
        ],
    )  # fmt: skip
