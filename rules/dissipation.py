"""Power, current and junction temperature of parts against their ratings in normal operation."""

from __future__ import annotations

import math
from collections.abc import Iterable, Iterator
from typing import Annotated

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    BaseModel,
    Edit,
    Evidence,
    Finding,
    Part,
    Remedy,
    Review,
    Rule,
    Severity,
    Unit,
    carriers,
    decade_values,
    format_quantity,
    forward_current,
)

from ._edits import add_part, move, new_net, quantity, set_parameter
from ._protection import rated, sturdier
from ._saturation import nets_without_a_level, working
from ._words import percent

Array = npt.NDArray[np.float64]
USUAL_POWERS = (0.063, 0.1, 0.125, 0.25, 0.4, 0.6, 1.0, 2.0, 3.0, 5.0, 7.0, 10.0)  # W
DERATED = 0.6
CURRENTS = {"npn": "collector_current", "pnp": "collector_current", "diode": "forward_current"}


class Dissipation(Rule):
    """Parts that take more power, current or heat than they are rated for, at any review condition.

    Resistors are derated: near their rating they run some 100 K above their surroundings, drift, and heat the
    junctions beside them. What transistors and diodes carry is judged here where no signal sets it: the currents
    of log and antilog junctions are other rules' concern, and so is the heat that such an overload brings.
    """

    name = "dissipation"
    title = "Part over its power, current or junction temperature"
    source = "the maker's ratings, as the part or its model states them; derating to 60 %: common practice, no source"
    default_severity = Severity.MAJOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits."""

        share_of_rating: Annotated[float, Unit("%")] = DERATED

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Resistors one by one, then currents, then junctions by package."""
        unjudged = nets_without_a_level(review)
        parts = {r: p for r, p in working(review.design).items() if not unjudged & set(p.pins.values())}
        signals = {c.part for c in carriers(review) if not c.is_fixed}
        overloaded = {ref for ref, part in parts.items() if _is_overloaded(review, part)}
        for part in parts.values():
            if part.kind == "resistor" and part.power is not None:
                yield from _power(review, settings, part)
            elif part.ref in overloaded - signals:
                yield _current(review, part)
        for package in review.design.packages.values():
            hot = [ref for ref in package.parts if ref in parts and _is_too_hot(review, parts[ref])]
            if hot and not overloaded & set(package.parts):
                yield _heat(review, hot)


def _power(review: Review, settings: Dissipation.Settings, part: Part) -> Iterator[Finding]:
    points, rating = review.operating_points, float(part.power.min)
    power = points.dissipation(part.ref)
    used = float(np.nanmax(power, initial=0.0)) / rating
    if used <= settings.share_of_rating:
        return
    worst, is_over = points.worst(power), used > 1
    limit = rating if is_over else settings.share_of_rating * rating
    needed = worst.value / settings.share_of_rating
    usual = next((p for p in USUAL_POWERS if p >= needed), None)
    yield Finding(
        f"{part.ref}: {format_quantity(worst.value, 'W', 3)}, {percent(used)} of its rating of "
        f"{format_quantity(rating, 'W')}; {percent(1.0 if is_over else settings.share_of_rating)} allowed",
        parts=[part.ref], subject="power", conditions=worst.conditions,
        severity=Severity.MAJOR if is_over else Severity.MINOR,
        consequence="it overheats and may burn" if is_over else "it runs hot, drifts, and heats what is near",
        evidence=[Evidence("power", worst.value, "W", limit, "<=", over=power, basis="limit")],
        remedies=[
            Remedy(f"take a resistor of {quantity(usual, 'W')} for {part.ref}",
                   [set_parameter(part.ref, "power", quantity(usual, "W"))])
            if usual is not None
            else Remedy(f"divide {part.ref} among several resistors: no single one takes so much")
        ],
    )  # fmt: skip


def _figure(review: Review, part: Part) -> Array:
    """What is held against the current rating of a transistor or diode [A]."""
    current = forward_current(review.operating_points, part.ref)
    figure: Array = np.maximum(current, current if part.kind == "diode" else -current)
    return figure


def _limit(part: Part, name: str) -> float:
    limit = rated(part, name)
    return math.inf if limit is None else limit


def _is_overloaded(review: Review, part: Part) -> bool:
    if part.kind not in CURRENTS or rated(part, CURRENTS[part.kind]) is None:
        return False
    return bool(np.nanmax(_figure(review, part), initial=0.0) > _limit(part, CURRENTS[part.kind]))


def _current(review: Review, part: Part) -> Finding:
    rating = CURRENTS[part.kind]
    current, limit, words = _figure(review, part), _limit(part, rating), rating.replace("_", " ")
    worst = review.operating_points.worst(current)
    return Finding(
        f"{part.ref}: {words} {format_quantity(worst.value, 'A', 3)}, rated {format_quantity(limit, 'A', 3)}",
        parts=[part.ref], subject="current", conditions=worst.conditions,
        consequence=f"the {'diode' if part.kind == 'diode' else 'transistor'} is overloaded and may be destroyed",
        evidence=[Evidence(words, worst.value, "A", limit, "<=", over=current, basis="limit")],
        remedies=[*sturdier(review, part.ref, rating, worst.value), Remedy(f"reduce the current of {part.ref}")],
    )  # fmt: skip


def _is_too_hot(review: Review, part: Part) -> bool:
    if part.kind not in ("npn", "pnp") or part.junction is None:
        return False
    return bool(np.nanmax(review.operating_points.temperature(part.ref), initial=0.0) > _limit(part, "junction"))


def _heat(review: Review, hot: list[str]) -> Finding:
    """Junctions of one package: they heat each other."""
    points, parts = review.operating_points, review.design.parts

    def excess(ref: str) -> float:
        return float(np.nanmax(points.temperature(ref))) - _limit(parts[ref], "junction")

    first = max(hot, key=excess)
    temperature, limit = points.temperature(first), _limit(parts[first], "junction")
    worst = points.worst(temperature)
    ambient, power = worst.conditions["ambient"], float(points.dissipation(first)[worst.index])
    return Finding(
        f"{', '.join(hot)}: junction at {format_quantity(worst.value, 'degC', 4)}, allowed "
        f"{format_quantity(limit, 'degC')}; {first} turns {format_quantity(power, 'W', 3)} to heat",
        parts=hot, subject="junction", conditions=worst.conditions,
        consequence="the transistor is overheated and may be destroyed",
        evidence=[Evidence("junction temperature", worst.value, "degC", limit, "<=", over=temperature, basis="limit")],
        remedies=list(_cooler(review, hot, worst.value - ambient, limit - ambient)),
    )  # fmt: skip


def _cooler(review: Review, hot: list[str], rise: float, allowed: float) -> Iterator[Remedy]:
    """A resistor in the collector that takes part of the heat; a package of less thermal resistance."""
    if len(hot) == 1 and allowed > 0 and review.seeks_remedies:
        yield from _relieved(review, hot[0], rise, allowed)
    package = review.design.packages[review.design.parts[hot[0]].package]
    if package.theta_ja is not None and allowed > 0:
        most = format_quantity(package.theta_ja * allowed / rise, "K/W", 3)
        yield Remedy(f"cool {package.name}: at most {most} to ambient, or a transistor in a larger case")
    else:
        yield Remedy(f"less voltage or current for {', '.join(hot)}")


def _relieved(review: Review, ref: str, rise: float, allowed: float) -> Iterator[Remedy]:
    """The least resistor in the collector with which the junction stays cool enough, by solving again."""
    points, design = review.operating_points, review.design
    current = float(np.nanmax(np.abs(points.current(ref, "C"))))
    heat = float(np.nanmax(points.dissipation(ref)))
    least = heat * (1 - allowed / rise) / current**2
    net = design.parts[ref].pins["C"]
    own = new_net(design, f"{net}_{ref}")
    for ohm in decade_values("E12", least, 4 * least):
        power = next((p for p in USUAL_POWERS if p >= ohm * current**2 / DERATED), None)
        if power is None:
            return
        table = {"kind": "resistor", "value": quantity(ohm, "ohm"), "tolerance": "5 %", "power": quantity(power, "W"),
                 "tempco": "200 ppm/K", "pins": [net, own]}  # fmt: skip
        edits: list[Edit] = [move(ref, "C", own), add_part(design, "R", table)]
        after = review.edited(edits)
        if not _is_too_hot(after, after.design.parts[ref]):
            yield Remedy(f"put {quantity(ohm, 'ohm')} of {quantity(power, 'W')} in the collector of {ref}", edits)
            return
