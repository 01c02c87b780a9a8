"""Matching of the junctions whose voltages are compared.

A mismatch of 60 µV between two base-emitter voltages is 0.23 % of current at 25 °C, and unselected transistors
differ by tens of millivolts.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass
from typing import Any

import numpy as np

from rulecheck.api import (
    Add,
    BaseModel,
    Cost,
    Design,
    Edit,
    Evidence,
    Finding,
    Model,
    Remedy,
    Remove,
    Review,
    Rule,
    Set,
    Severity,
    format_quantity,
    join_key,
    junction_offset,
    worst_cost,
)  # fmt: skip

from ._pairs import Pair, chosen_pairs, cost_evidence, cost_words, fault_of, group_of, link, mismatch_key, one_package

NOMINAL = 298.15  # K: where mismatch is stated, and its drift is zero
TRIAL = 1e-3  # V
REASONS = {
    "polarity": "are of different kinds ({0}, {1}), whose junctions do not match",
    "models": "are of different models",
    "packages": "are in different packages ({2}, {3}), where the matching of a die does not hold",
    "unmatched": "are compared, but in no matching group and on no common die",
}


class MatchedPair(Rule):
    """Junctions that stand against each other in a loop, but are not a matched pair, or not matched well enough.

    Every junction loop is judged as a loop: it is sound where some pairing of its clockwise with its anticlockwise
    junctions has both of each pair in one package, of one model, and in one matching group or on one die. The
    mismatch of a sound pair is then added to one junction and the circuit solved again: it may cost each output a
    quarter of what the requirement allows.
    """

    name = "matched-pair"
    title = "Compared junctions that are not matched, or not well enough"
    source = "matched pairs: Sheingold (ed.), Nonlinear Circuits Handbook, 1974 (from memory); limit: common practice"
    default_severity = Severity.MAJOR
    needs = ("operating_points",)

    class Settings(BaseModel):
        """Limits."""

        shares: float = 1.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge the pairs of the best pairing of every loop, each pair and each group member once."""
        pairs = dict.fromkeys(pair for loop in review.structure.junction_loops for pair in chosen_pairs(review, loop))
        for pair in pairs:
            fault = fault_of(review.design, pair)
            if fault == "unknown":
                yield _unknown(review, pair)
            elif fault is not None:
                yield _unsound(review, pair, REASONS[fault], curable=fault != "polarity")
        sound = [pair for pair in pairs if fault_of(review.design, pair) is None]
        for member in dict.fromkeys(m for pair in sound for m in _members(review.design, pair)):
            yield from _mismatch(review, member, settings.shares)


@dataclass(frozen=True)
class _Member:
    """A part with its mismatch to the first of its group."""

    first: str
    part: str
    group: str | None


def _members(design: Design, pair: Pair) -> Iterator[_Member]:
    group = group_of(design, pair)
    first = design.matching[group].parts[0] if group is not None else pair[0]
    for ref in pair:
        if ref != first and "vbe_offset" not in design.parts[ref].given:
            yield _Member(first, ref, group)


def _unknown(review: Review, pair: Pair) -> Finding:
    part, group = review.design.parts[pair[1]], group_of(review.design, pair)
    key = ("matching", group, "vbe_mismatch") if group else ("parts", part.ref, (part.model and "model") or "kind")
    where = f"group {group}" if group else f"model {part.model}"
    return Finding(
        f"{pair[0]} and {pair[1]}: no vbe_mismatch is known, so what it costs cannot be judged",
        parts=pair, severity=Severity.OBSERVATION, subject="unknown mismatch", at=join_key(tuple(map(str, key))),
        remedies=[Remedy(f"state vbe_mismatch in {where}")],
    )  # fmt: skip


def _unsound(review: Review, pair: Pair, reason: str, *, curable: bool) -> Finding:
    parts = [review.design.parts[ref] for ref in pair]
    spread = getattr(parts[1], "vbe_spread", None)
    limit = 0.03 if spread is None else spread.max
    cost = _cost(review, pair[1], limit)
    words = reason.format(*(p.kind for p in parts), *(p.package for p in parts))
    evidence = [Evidence("base-emitter spread of unmatched parts", limit, "V", basis="limit")]
    return Finding(
        f"{pair[0]} and {pair[1]} {words}: their voltages may differ by ±{format_quantity(limit, 'V')}",
        parts=pair, consequence=_words(review, cost), conditions=cost.worst.conditions if cost else None,
        evidence=evidence + ([cost_evidence(cost.worst.value, cost.ratio, "limit")] if cost else []),
        at=join_key(("parts", pair[1], "package")) if "packages" in reason else None,
        remedies=list(_unions(review, pair)) if curable else [
            Remedy("compare junctions of one kind: rearrange the loop so that each stands against one like it")
        ],
    )  # fmt: skip


def _mismatch(review: Review, member: _Member, shares: float) -> Iterator[Finding]:
    design = review.design
    limit, drift = _limits(design, member)
    heat = np.abs(np.nan_to_num(review.operating_points.temperature(member.part), nan=NOMINAL) - NOMINAL)
    cost = _cost(review, member.part, limit + drift * heat)
    if cost is None or cost.worst.value <= shares:
        return
    worst = cost.worst
    mismatch = limit + drift * float(heat[worst.index])
    enough = limit * shares / worst.value
    yield Finding(
        f"{member.part} may differ from {member.first} by ±{format_quantity(mismatch, 'V', 3)}, which costs "
        f"{worst.value:.3g} times its share at {cost.output}; ±{format_quantity(enough, 'V', 2)} would do",
        parts=[member.first, member.part], severity=Severity.MINOR, subject="mismatch", conditions=worst.conditions,
        consequence=_words(review, cost), at=mismatch_key(design, (member.first, member.part)),
        evidence=[Evidence("base-emitter mismatch", mismatch, "V", enough, "<=", basis="limit"),
                  cost_evidence(worst.value, cost.ratio, "limit")],
        remedies=list(_tighter(review, member, enough)),
    )  # fmt: skip


def _limits(design: Design, member: _Member) -> tuple[float, float]:
    """Mismatch and its drift: of the group, else of the part."""
    sources: list[Any] = [design.parts[member.part]]
    if member.group is not None:
        sources.insert(0, design.matching[member.group])
    found = [next((v for v in (getattr(s, name) for s in sources) if v is not None), None)
             for name in ("vbe_mismatch", "vbe_mismatch_drift")]  # fmt: skip
    return tuple(0.0 if spread is None else spread.half for spread in found)  # type: ignore[return-value]  # two


def _cost(review: Review, ref: str, volts: Any) -> Cost | None:  # noqa: ANN401  # float or array
    return worst_cost(review, values=junction_offset(review, ref, volts))


def _words(review: Review, cost: Cost | None) -> str:
    if cost is None:
        return "the mismatch goes straight into the ratio of the currents compared"
    at = cost.worst.index
    reading = float(review.operating_points.voltage(cost.output)[at])
    return cost_words(cost.output, float(cost.error[at]), reading)


def _unions(review: Review, pair: Pair) -> Iterator[Remedy]:
    """Ways to make a matched pair: one package; a monolithic model; selection of the parts as they are."""
    design = review.design
    one, other = (design.parts[ref] for ref in pair)
    trial = _cost(review, pair[1], TRIAL)
    enough = TRIAL / trial.worst.value if trial and trial.worst.value > 0 else TRIAL / 10
    packages = one_package(design, pair)
    alike, known = one.model == other.model, other.parameters.get("vbe_mismatch") is not None
    if packages and alike and known and (other.monolithic or group_of(design, pair)):
        yield Remedy(f"move {pair[0]} and {pair[1]} into one package", packages)
    for model in _monolithic(design, one.kind, enough)[:1]:
        if not (alike and other.monolithic and known):
            yield Remedy(f"use a monolithic pair {model.name} for {pair[0]} and {pair[1]}",
                         [*_with_model(design, pair, model), *packages, *_grouped(design, pair, None)])  # fmt: skip
    if alike:
        edits = _grouped(design, pair, _rounded(0.9 * enough))
        if packages:
            edits.append(link([one.package, other.package]))
        yield Remedy(f"select {pair[0]} and {pair[1]} to within ±{_rounded(0.9 * enough)}", edits)


def _tighter(review: Review, member: _Member, enough: float) -> Iterator[Remedy]:
    """A model with a tighter limit for the whole group; where the group states its own, closer selection."""
    design = review.design
    refs = design.matching[member.group].parts if member.group else (member.first, member.part)
    stated = member.group is not None and design.matching[member.group].vbe_mismatch is not None
    key = join_key(("matching", member.group or "", "vbe_mismatch"))
    for model in _monolithic(design, design.parts[member.part].kind, enough)[:1]:
        if model.parameters.vbe_mismatch.half <= enough:
            edits: list[Edit] = [Remove(key)] if stated else []
            yield Remedy(f"use {model.name}, matched to ±{format_quantity(model.parameters.vbe_mismatch.half, 'V')}",
                         [*edits, *_with_model(design, refs, model)])  # fmt: skip
    if stated:
        yield Remedy(f"select {member.part} to within ±{_rounded(0.9 * enough)}", [Set(key, _rounded(0.9 * enough))])
    else:
        yield Remedy(f"find a pair matched to ±{format_quantity(enough, 'V', 2)}, or trim the output")


def _monolithic(design: Design, kind: str, enough: float) -> list[Model]:
    """Monolithic models of a kind: the widest mismatch that does first, those that do not last, the best first."""
    models = [m for m in design.models.values()
              if m.kind == kind and m.parameters.monolithic and m.parameters.vbe_mismatch is not None]  # fmt: skip

    def order(model: Model) -> tuple[bool, float]:
        half = model.parameters.vbe_mismatch.half
        return (True, half) if half > enough else (False, -half)

    return sorted(models, key=order)


def _with_model(design: Design, refs: Iterable[str], model: Model) -> list[Edit]:
    return [Set(join_key(("parts", ref, "model")), model.name) for ref in refs if design.parts[ref].model != model.name]


def _grouped(design: Design, pair: Pair, mismatch: str | None) -> list[Edit]:
    """Edits that put a pair into a group of its own, or state the mismatch of the one it is in."""
    group = group_of(design, pair)
    if group is not None:
        return [Set(join_key(("matching", group, "vbe_mismatch")), mismatch)] if mismatch else []
    names = (f"{pair[0]}-{pair[1]}{suffix}" for suffix in ("", "-b", "-c"))
    name = next(n for n in names if n not in design.matching)
    table: dict[str, object] = {"parts": list(pair)}
    return [Add(join_key(("matching", name)), table | ({"vbe_mismatch": mismatch} if mismatch else {}))]


def _rounded(volts: float) -> str:
    return format_quantity(volts, "V", 2)
