"""Junctions reversed, and parts over their ratings, in fault scenarios.

An input of the wrong sign opens the loop of a log amplifier: its output runs to a rail and takes the emitter
with it, and 13 V across an emitter-base junction that breaks down at 6 V spoils gain, noise and match for good.
A missing supply does the like. Reverse emitter current is the commonest field failure of matched transistors
(National LM194/LM394 data sheet, 1994).
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator
from dataclasses import dataclass
from typing import Annotated

import numpy as np

from rulecheck.api import (
    BaseModel,
    Evidence,
    Finding,
    OperatingPoints,
    Part,
    Remedy,
    Review,
    Rule,
    Severity,
    Unit,
    format_quantity,
    join_key,
)

from ._protection import against_current, against_reversal, rated, sturdier
from ._saturation import Floats

REVERSAL = "emitter-base reverse voltage"


class JunctionReverse(Rule):
    """All fault scenarios are judged: inputs at the ends of what they must survive, supplies absent.

    An absent supply is a net held at 0 V; that a rail can be fed through clamps and float up is not modelled.
    Small transistors break down at 5 to 7 V from emitter to base; where the model does not say, the least of
    these is taken. Junctions on one emitter net are one finding. Currents that are over their rating in normal
    operation too are other rules' matter.
    """

    name = "junction-reverse"
    title = "Junction reversed beyond its breakdown, or a rating exceeded, in a fault"
    source = "VEBO of small transistors 5 to 7 V (2N3904: 6 V, S9013: 5 V); damage: Renesas knowledge base (2007)"
    default_severity = Severity.MAJOR
    needs = ("operating_points", "faults")

    class Settings(BaseModel):
        """Limits."""

        share_of_breakdown: Annotated[float, Unit("%")] = 0.8
        assumed_breakdown: Annotated[float, Unit("V")] = 5.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """One finding for the junctions on one emitter net, one a part for other stresses."""
        groups: dict[tuple[str, str], list[_Stress]] = {}
        for part in review.design.parts.values():
            for stress in _stresses(part, review.faults, settings):
                if np.isfinite(stress.over).any() and np.nanmax(stress.over) > stress.limit:
                    groups.setdefault((stress.place, stress.quantity), []).append(stress)
        for stresses in groups.values():
            if stresses[0].unit == "V" or not _is_usual(review, settings, stresses[0]):
                yield _finding(review, stresses)
        yield from (_survival_unknown(name, name in review.design.nets)
                    for name, source in review.design.inputs.items() if source.survives is None)


@dataclass(frozen=True)
class _Stress:
    """A figure of a part over conditions against what the part stands; `place` joins those with one cause."""

    part: str
    place: str
    quantity: str
    rating: str
    over: Floats
    limit: float
    remark: str = ""

    @property
    def unit(self) -> str:
        return "A" if self.rating.endswith("current") else "V"


def _stresses(part: Part, points: OperatingPoints, settings: JunctionReverse.Settings) -> Iterator[_Stress]:
    if part.kind in ("npn", "pnp"):
        yield _reversal(part, points, settings)
    for kinds, name, rating, figure in _RATINGS:
        limit = rated(part, rating) if part.kind in kinds else None
        if limit is not None:
            yield _Stress(part.ref, part.ref, name, rating, figure(part, points), limit)


def _reversal(part: Part, points: OperatingPoints, settings: JunctionReverse.Settings) -> _Stress:
    breakdown = rated(part, "emitter_base_breakdown")
    limit = settings.share_of_breakdown * (settings.assumed_breakdown if breakdown is None else breakdown)
    remark = " (breakdown assumed, the model does not say)" if breakdown is None else ""
    reverse = -_polarity(part) * points.vbe(part.ref)
    return _Stress(part.ref, part.pins["E"], REVERSAL, "emitter_base_breakdown", reverse, limit, remark)


def _polarity(part: Part) -> int:
    return 1 if part.kind == "npn" else -1


_TRANSISTORS = ("npn", "pnp")
_Figure = Callable[[Part, OperatingPoints], Floats]
_RATINGS: tuple[tuple[tuple[str, ...], str, str, _Figure], ...] = (
    (_TRANSISTORS, "collector-emitter voltage", "collector_emitter_breakdown",
     lambda part, points: _polarity(part) * points.vce(part.ref)),
    (_TRANSISTORS, "collector current", "collector_current",
     lambda part, points: np.abs(points.current(part.ref, "C"))),
    (("diode", "photodiode"), "reverse voltage", "reverse_voltage",
     lambda part, points: points.voltage(part.pins["K"]) - points.voltage(part.pins["A"])),
    (("diode",), "forward current", "forward_current", lambda part, points: points.current(part.ref, "A")),
    (("op-amp",), "output current", "output_current", lambda part, points: np.abs(points.current(part.ref, "OUT"))),
)  # fmt: skip


def _is_usual(review: Review, settings: JunctionReverse.Settings, stress: _Stress) -> bool:
    """Whether the figure is over its limit in normal operation too."""
    part = review.design.parts[stress.part]
    same = (s for s in _stresses(part, review.operating_points, settings) if s.quantity == stress.quantity)
    return any(np.isfinite(s.over).any() and np.nanmax(s.over) > s.limit for s in same)


def _finding(review: Review, stresses: list[_Stress]) -> Finding:
    points = review.faults
    stress = max(stresses, key=lambda s: float(np.nanmax(s.over)) / s.limit)
    worst = points.worst(stress.over)
    parts = [s.part for s in stresses]
    scenario = points.conditions.scenario[worst.index] if points.conditions.scenario else None
    return Finding(
        f"{', '.join(parts)}: {stress.quantity} {format_quantity(worst.value, stress.unit, 3)}, allowed "
        f"{format_quantity(stress.limit, stress.unit, 3)}{stress.remark}",
        parts=parts, nets=[stress.place] if stress.place != stress.part else [], subject=stress.quantity,
        conditions=worst.conditions, scenario=scenario, consequence=_CONSEQUENCES[stress.rating],
        evidence=[Evidence(f"{s.quantity} of {s.part}", float(s.over[worst.index]), s.unit, s.limit, "<=", over=s.over,
                           basis="limit") for s in stresses],
        remedies=_remedies(review, stress, parts, worst.index),
    )  # fmt: skip


_CONSEQUENCES = {
    "emitter_base_breakdown": "the junction breaks down; gain, noise and match are spoilt for good",
    "collector_emitter_breakdown": "the transistor breaks down, and what the supply gives flows through it",
    "collector_current": "the transistor is overloaded and may be destroyed",
    "reverse_voltage": "the diode breaks down",
    "forward_current": "the diode is overloaded and may be destroyed",
    "output_current": "the output is overloaded; it heats, or limits its current",
}


def _remedies(review: Review, stress: _Stress, parts: list[str], index: int) -> list[Remedy]:
    if stress.quantity == REVERSAL:
        return against_reversal(review, parts, stress.place, index)
    if stress.unit == "A":
        return against_current(review, stress.part, stress.rating, stress.limit)
    return sturdier(review, stress.part, stress.rating, float(np.nanmax(stress.over)))


def _survival_unknown(name: str, is_net: bool) -> Finding:
    key = join_key(("nets" if is_net else "parts", name, "survives"))
    return Finding(
        f"{name}: what it must survive is not stated; the faults of its own range were judged",
        parts=[] if is_net else [name], nets=[name] if is_net else [], subject="survives",
        severity=Severity.OBSERVATION, consequence="a reversed or excessive input is not judged",
        remedies=[Remedy(f"state {key}, the least and the greatest that may come in a fault")],
    )  # fmt: skip
