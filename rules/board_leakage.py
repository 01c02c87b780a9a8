"""Leakage over the board into summing nodes."""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from typing import Annotated

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    BaseModel,
    Cost,
    Evidence,
    Finding,
    Remedy,
    Review,
    Rule,
    Severity,
    Unit,
    carriers,
    format_quantity,
)

from ._carried import MARGIN
from ._currents import narrowed, scaled
from ._edits import add_resistor
from ._leakage import carried_signal
from ._pairs import cost_words
from ._saturation import asked_everywhere
from ._words import percent

Array = npt.NDArray[np.float64]


class BoardLeakage(Rule):
    """Leakage from the worst rail into a summing node, against the least signal current there.

    Judged where the design states the insulation of a node to its worst rail, at the least that it may be; a board
    that is not said to leak is not judged. A moist or dirty board has 1 Gohm where a clean one has 1 Tohm: 15 nA
    from a rail of 15 V.
    """

    name = "board-leakage"
    title = "Leakage over the board that a signal current does not drown"
    source = "leakage and guards of low-current inputs: common practice, no source"
    default_severity = Severity.MINOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits."""

        share_of_signal: Annotated[float, Unit("%")] = 0.01

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge each summing node by the rail that drives most into it."""
        insulation = review.design.board_insulation
        if insulation is None:
            return
        for net, amplifier in _nodes(review).items():
            rail, ratio = _over_signal(review, net, amplifier, float(insulation.min))
            if np.nanmax(ratio, initial=0.0) > settings.share_of_signal:
                yield _finding(review, settings, net, rail, ratio)


def _nodes(review: Review) -> dict[str, str]:
    """Summing nodes, with their amplifiers, that no amplifier's output stands on."""
    driven = {p.pins["OUT"] for p in review.design.parts.values() if p.kind == "op-amp"}
    return {n.net: n.amplifier for n in review.structure.summing_nodes if n.net not in driven}


def _over_signal(review: Review, net: str, amplifier: str, ohm: float) -> tuple[str, Array]:
    """The rail whose leakage is the largest part of the signal at a node, and that part at each condition."""
    points, nets = review.operating_points, review.design.nets
    judged = asked_everywhere(review) & points.linear(amplifier)
    rails = [name for name, entry in nets.items() if entry.role in ("supply", "ground")]
    if not judged.any() or not rails:
        return net, np.full(judged.shape, np.nan)
    signal = carried_signal(review, amplifier, judged)
    if net not in {c.node for c in carriers(review)}:
        signal = np.full(signal.shape, signal[judged].max())  # a voltage's, which may be zero
    signal = np.where(judged & (signal > 0), signal, np.nan)
    ratios = {rail: np.abs(points.voltage(rail) - points.voltage(net)) / ohm / signal for rail in rails}
    worst = max(ratios, key=lambda rail: float(np.nanmax(ratios[rail], initial=0.0)))
    return worst, ratios[worst]


def _finding(review: Review, settings: BoardLeakage.Settings, net: str, rail: str, ratio: Array) -> Finding:
    points, insulation, limit = review.operating_points, review.design.board_insulation, settings.share_of_signal
    assert insulation is not None
    worst, ohm = points.worst(ratio), float(insulation.min)
    leakage = float(np.abs(points.voltage(rail) - points.voltage(net))[worst.index]) / ohm
    parts = [c.part for c in carriers(review) if c.node == net]
    cost = _cost(review, net, rail, ohm)
    return Finding(
        f"{net}: {format_quantity(leakage, 'A', 3)} leaks from {rail} over {format_quantity(ohm, 'ohm')} of board, "
        f"{percent(worst.value)} of a signal of {format_quantity(leakage / worst.value, 'A', 3)}, "
        f"limit {percent(limit)}",
        parts=parts, nets=[net], conditions=worst.conditions,
        consequence=_consequence(review, cost) or f"the signal read is off by {percent(worst.value)} there",
        evidence=[Evidence("leakage over signal current", worst.value, "1", limit, "<=", over=ratio, basis="limit")],
        remedies=list(_remedies(review, net, worst.index, worst.value / limit, ohm)),
    )  # fmt: skip


def _cost(review: Review, net: str, rail: str, ohm: float) -> Cost | None:
    """What a resistor of the board's insulation does to the outputs."""
    leaking = review.edited([add_resistor(review.design, ohm, (rail, net))])
    return next(iter(review.cost(leaking.operating_points)), None)


def _consequence(review: Review, cost: Cost | None) -> str:
    if cost is None:
        return ""
    at = cost.worst.index
    return cost_words(cost.output, float(cost.error[at]), float(review.operating_points.voltage(cost.output)[at]))


def _remedies(review: Review, net: str, at: int, excess: float, ohm: float) -> Iterator[Remedy]:
    """A larger current, a range that ends sooner, a guard."""
    carrier = next((c for c in carriers(review) if c.node == net), None)
    if carrier is not None:
        yield from scaled(review, carrier, MARGIN * excess)
        if carrier.is_log and len(carrier.sources.inputs) == 1:
            x = abs(float(review.conditions.values[carrier.sources.inputs[0]][at]))
            yield from narrowed(review, carrier, least=MARGIN * excess * x)
    level = review.structure.level_of(net)
    yield Remedy(
        f"guard {net} with a ring at the level of {level} and keep the board clean, so that board_insulation is "
        f"{format_quantity(ohm * excess, 'ohm', 2)} or more; no edit of the design does that"
    )
