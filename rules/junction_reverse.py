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
from ._saturation import Floats, SignalFlow, causes_of, working

REVERSAL = "emitter_base_breakdown"
SLACK = 1e-3
"""Share by which a rating is not known more closely."""


class JunctionReverse(Rule):
    """All fault scenarios are judged: inputs at the ends of what they must survive, supplies absent.

    An absent supply is a net held at 0 V; that a rail can be fed through clamps and float up is not modelled.
    Small transistors break down at 5 to 7 V from emitter to base; where the model does not say, the least of
    these is taken. Junctions that the same saturated amplifiers reverse are
    one finding, with the ratings exceeded through that. Currents that are over their rating in normal
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
        """One finding for what the same amplifiers do to junctions, one a part for stresses without that."""
        flow = SignalFlow(review)
        found = [
            stress
            for part in working(review.design).values()
            for stress in _stresses(part, review.faults, settings)
            if stress.is_exceeded and (stress.unit == "V" or not _is_usual(review, settings, stress))
        ]
        reversals = [(_causes(review, flow, s), s) for s in found if s.rating == REVERSAL]
        groups = {causes: [s for own, s in reversals if own == causes] for causes, _ in reversals}
        alone: list[_Stress] = []
        for stress in (s for s in found if s.rating != REVERSAL):
            groups.get(_causes(review, flow, stress), alone).append(stress)
        for causes, stresses in groups.items():
            yield _finding(review, stresses, list(causes))
        for stress in alone:
            yield _finding(review, [stress], [])
        yield from (
            _survival_unknown(name, name in review.design.nets)
            for name, source in review.design.inputs.items()
            if source.survives is None
        )


@dataclass(frozen=True, eq=False)
class _Stress:
    """A figure of a part over conditions against what the part stands."""

    part: str
    quantity: str
    rating: str
    over: Floats
    limit: float
    remark: str = ""

    @property
    def unit(self) -> str:
        return "A" if self.rating.endswith("current") else "V"

    @property
    def worst(self) -> float:
        return float(np.nanmax(self.over)) if np.isfinite(self.over).any() else 0.0

    @property
    def is_exceeded(self) -> bool:
        return self.worst > self.limit * (1 + SLACK)


def _stresses(part: Part, points: OperatingPoints, settings: JunctionReverse.Settings) -> Iterator[_Stress]:
    if part.kind in ("npn", "pnp"):
        yield _reversal(part, points, settings)
    for kinds, name, rating, figure in _RATINGS:
        limit = rated(part, rating) if part.kind in kinds else None
        if limit is not None:
            yield _Stress(part.ref, name, rating, figure(part, points), limit)


def _reversal(part: Part, points: OperatingPoints, settings: JunctionReverse.Settings) -> _Stress:
    breakdown = rated(part, REVERSAL)
    limit = settings.share_of_breakdown * (settings.assumed_breakdown if breakdown is None else breakdown)
    remark = " (breakdown assumed, the model does not say)" if breakdown is None else ""
    reverse = -_polarity(part) * points.vbe(part.ref)
    return _Stress(part.ref, "emitter-base reverse voltage", REVERSAL, reverse, limit, remark)


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
    usual = _stresses(part, review.operating_points, settings)
    return any(s.is_exceeded for s in usual if s.rating == stress.rating)


def _causes(review: Review, flow: SignalFlow, stress: _Stress) -> tuple[str, ...]:
    """What joins stresses in one finding: the amplifiers at a limit that come first, else the part's emitter net."""
    pins = review.design.parts[stress.part].pins
    moved = {pins["B"], pins["E"]} if stress.rating == REVERSAL else set(pins.values())
    index = review.faults.worst(stress.over).index
    return tuple(causes_of(flow, review.faults, index, moved)) or (pins.get("E", stress.part),)


def _finding(review: Review, stresses: list[_Stress], causes: list[str]) -> Finding:
    """A finding of the first kind of stress; others that come with it are evidence."""
    points, design = review.faults, review.design
    main = [s for s in stresses if s.rating == stresses[0].rating]
    stress = max(main, key=lambda s: s.worst / s.limit)
    worst = points.worst(stress.over)
    parts = [s.part for s in main]
    reversal = stress.rating == REVERSAL
    beside = "".join(f"; {s.quantity} of {s.part} {format_quantity(s.worst, s.unit, 3)}, allowed "
                     f"{format_quantity(s.limit, s.unit, 3)}" for s in stresses if s not in main)  # fmt: skip
    return Finding(
        f"{', '.join(parts)}: {stress.quantity} {format_quantity(worst.value, stress.unit, 3)}, allowed "
        f"{format_quantity(stress.limit, stress.unit, 3)}{stress.remark}{beside}",
        parts=parts, nets=list(dict.fromkeys(design.parts[p].pins["E"] for p in parts)) if reversal else [],
        subject=stress.quantity, conditions=worst.conditions,
        scenario=points.conditions.scenario[worst.index] if points.conditions.scenario else None,
        consequence=_CONSEQUENCES[stress.rating],
        evidence=[Evidence(f"{s.quantity} of {s.part}", s.worst, s.unit, s.limit, "<=", over=s.over, basis="limit")
                  for s in stresses],
        remedies=against_reversal(review, parts, causes, worst.index) if reversal else _remedies(review, stress),
    )  # fmt: skip


_CONSEQUENCES = {
    REVERSAL: "the junction breaks down; gain, noise and match are spoilt for good",
    "collector_emitter_breakdown": "the transistor breaks down, and what the supply gives flows through it",
    "collector_current": "the transistor is overloaded and may be destroyed",
    "reverse_voltage": "the diode breaks down",
    "forward_current": "the diode is overloaded and may be destroyed",
    "output_current": "the output is overloaded; it heats, or limits its current",
}


def _remedies(review: Review, stress: _Stress) -> list[Remedy]:
    if not review.seeks_remedies:
        return []
    if stress.unit == "A":
        return against_current(review, stress.part, stress.rating, stress.limit)
    return sturdier(review, stress.part, stress.rating, stress.worst)


def _survival_unknown(name: str, is_net: bool) -> Finding:
    key = join_key(("nets" if is_net else "parts", name, "survives"))
    return Finding(
        f"{name}: what it must survive is not stated; the faults of its own range were judged",
        parts=[] if is_net else [name], nets=[name] if is_net else [], subject="survives",
        severity=Severity.OBSERVATION, consequence="a reversed or excessive input is not judged",
        remedies=[Remedy(f"state {key}, the least and the greatest that may come in a fault")],
    )  # fmt: skip
