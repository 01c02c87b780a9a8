"""Spreads against what a requirement allows: the verdict on its error budget, and tolerances that would do."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
import numpy.typing as npt

from rulecheck.api import (
    Budget,
    Edit,
    Evidence,
    Finding,
    Part,
    Remedy,
    Review,
    RulecheckError,
    Set,
    Severity,
    format_quantity,
    join_key,
    split_key,
)

from ._models import other_models
from ._protection import quietest_diode
from ._words import percent

Array = npt.NDArray[np.floating[Any]]
Mask = npt.NDArray[np.bool_]
TOLERANCES = (0.2, 0.1, 0.05, 0.02, 0.01, 5e-3, 2.5e-3, 1e-3, 5e-4, 2e-4, 1e-4)
TEMPCOS = (500e-6, 200e-6, 100e-6, 50e-6, 25e-6, 15e-6, 10e-6, 5e-6, 2e-6)
AIM = 0.95
"""Of what is allowed, that a remedy aims at."""
MOST_NAMED = 3
MOST_CHANGES = 8
LEAST_STEP = 0.1
"""Of a spread: what is left of it by one change at least."""


def over_budget(review: Review, budget: Budget, at_work: Mask) -> Iterator[Finding]:
    """Nominal error with its spread over what is allowed: by their squares a fault, only at worst a lesser one.

    Parameters
    ----------
    review : Review
    budget : Budget
        Of a requirement with an accuracy.
    at_work : ndarray of bool
        Conditions at which no amplifier is at its limit.
    """
    requirement = budget.requirement
    totals = {"root-sum-square": budget.rss, "worst case": budget.worst_case}
    for name, spread in totals.items():
        ratio = _ratio(budget, spread, at_work)
        if not np.isfinite(ratio).any() or np.nanmax(ratio) <= 1:
            continue
        at = int(np.nanargmax(ratio))
        allowed, law, total = (float(v[at]) for v in (budget.allowed, budget.law, np.abs(budget.error) + spread))
        reading = f", {percent(total / law)} of reading" if law else ""
        spent = budget.shown(at)[:MOST_NAMED]
        words = [f"{c.parameter} {format_quantity(abs(float(c.value[at])), 'V', 3)}" for c in spent]
        yield Finding(
            f"requirement {requirement.name}: nominal error and {name} of the spreads of {requirement.output} are "
            f"{format_quantity(total, 'V', 3)}{reading}, allowed {format_quantity(allowed, 'V', 3)}",
            nets=[requirement.output], subject=f"{requirement.name} budget",
            severity=Severity.MAJOR if name == "root-sum-square" else Severity.MINOR,
            conditions=budget.conditions.at(at), at=join_key(("requirements", requirement.name)),
            consequence=f"boards within the tolerances of their parts miss the requirement; most is spent by "
                        f"{', '.join(words)}{_sampled(review, requirement.name)}",
            evidence=[Evidence(f"error and {name}", total, "V", allowed, "<=", np.abs(budget.error) + spread, "limit"),
                      Evidence("nominal error", abs(float(budget.error[at])), "V"),
                      Evidence("root-sum-square", float(budget.rss[at]), "V", basis="limit"),
                      Evidence("worst case", float(budget.worst_case[at]), "V", basis="limit")],
            remedies=tightened(review, budget, at_work) if review.seeks_remedies else [],
        )  # fmt: skip
        return
    yield from _outside(review, budget, at_work)


def _outside(review: Review, budget: Budget, at_work: Mask) -> Iterator[Finding]:
    """Samples outside the accuracy, where the slopes at the nominal point say that there are none."""
    requirement, samples = budget.requirement, review.samples.get(budget.requirement.name)
    inside = None if samples is None else samples.inside[:, at_work[samples.rows] & budget.judged[samples.rows]]
    if inside is None or inside.all():
        return
    share = 1 - float(inside.all(axis=1).mean())
    yield Finding(
        f"requirement {requirement.name}: {percent(share)} of {len(inside)} samples are outside what is allowed, "
        "though the sum of their slopes is not",
        nets=[requirement.output], subject=f"{requirement.name} samples", severity=Severity.MINOR,
        consequence="the errors of the parts do not simply add: boards within their tolerances miss the requirement",
        evidence=[Evidence("samples outside", share, "1", 0.0, "<=", basis="limit")],
        remedies=[Remedy("tighten what spends most: " + ", ".join(c.parameter for c in budget.shown()[:MOST_NAMED]))],
        at=join_key(("requirements", requirement.name)),
    )  # fmt: skip


def _ratio(budget: Budget, spread: Array, at_work: Mask) -> Array:
    with np.errstate(all="ignore"):
        ratio = (np.abs(budget.error) + spread) / budget.allowed
    return np.where(budget.judged & at_work & np.isfinite(ratio), ratio, np.nan)


def _sampled(review: Review, name: str) -> str:
    """What samples say, where there are any."""
    samples = review.samples.get(name)
    if samples is None:
        return ""
    share = samples.fraction_of_units()
    return (
        f"; of {samples.count} samples {100 * float(share.value):.3g} % are inside everywhere "
        f"(95 % confidence: {100 * float(share.low):.3g} to {100 * float(share.high):.3g} %)"
    )


@dataclass(frozen=True)
class _Change:
    """A tighter part: edits, and how the remedy names it."""

    edits: tuple[Edit, ...]
    words: str


def tightened(review: Review, budget: Budget, at_work: Mask) -> list[Remedy]:
    """Tolerances and models that bring the worst case inside, largest spender first, computed anew after each."""
    changes: dict[str, _Change] = {}
    stuck: set[str] = set()
    here, now, mask = review, budget, at_work
    for _ in range(MOST_CHANGES):
        ratio = _ratio(now, now.worst_case, mask)
        if not np.isfinite(ratio).any() or np.nanmax(ratio) <= AIM:
            break
        at = int(np.nanargmax(ratio))
        excess = (float(ratio[at]) - AIM) * float(now.allowed[at])
        change = _first_change(here, now, at, excess, stuck)
        if change is None:
            break
        name, one = change
        changes[name] = one
        try:
            here = here.edited(one.edits)
        except RulecheckError:
            break
        now = here.budget[now.requirement.name]
        mask = mask if mask.shape == now.judged.shape else np.ones(now.judged.shape, bool)
    done = _ratio(now, now.worst_case, mask)
    spent = [c.parameter for c in budget.shown()[:MOST_NAMED]]
    if changes and np.isfinite(done).any() and np.nanmax(done) <= 1:
        return [Remedy("tighten what spends most: " + ", ".join(c.words for c in changes.values()),
                       _last_edits([e for c in changes.values() for e in c.edits]))]  # fmt: skip
    return [
        Remedy(f"no tolerance or model that was tried is enough for {', '.join(spent)}: trim the output, or allow more")
    ]


def _last_edits(edits: Sequence[Edit]) -> list[Edit]:
    """Of several edits of one key the last."""
    return list({edit.key: edit for edit in edits}.values())


def _first_change(
    review: Review, budget: Budget, at: int, excess: float, stuck: set[str]
) -> tuple[str, _Change] | None:
    """The largest contribution that can be made smaller, and the change that does."""
    for one in budget.shown(at):
        if one.parameter in stuck:
            continue
        size = abs(float(one.value[at]))
        left = max(1 - excess / size, LEAST_STEP)
        change = _tighter(review, one.parameter, left)
        if change is not None:
            return one.parameter, change
        stuck.add(one.parameter)
    return None


def _tighter(review: Review, parameter: str, left: float) -> _Change | None:
    """A change that leaves at most a share of a parameter's spread; None where there is none."""
    head, owner, *rest = split_key(parameter)
    if head == "parts" and rest:
        return _tighter_part(review, review.design.parts[owner], rest[0], left)
    if head == "packages" and rest[0] in ("value", "tempco"):
        return None if (part := _first_resistor(review, owner)) is None else _tighter_ratio(review, part, rest[0], left)
    if head == "nets" and rest[0] == "voltage":
        net = review.design.nets[owner]
        if net.role == "reference" and net.voltage is not None and net.voltage.typ:
            return _toleranced(("nets", owner, "tolerance"), net.voltage.half / abs(net.voltage.typ), left, owner)
    if head == "matching" and rest and rest[0] in review.design.parts:
        return _better_pair(review, owner, rest[0], left)
    return None


def _first_resistor(review: Review, package: str) -> Part | None:
    refs = review.design.packages[package].parts
    return next((review.design.parts[r] for r in refs if review.design.parts[r].kind == "resistor"), None)


def _tighter_part(review: Review, part: Part, key: str, left: float) -> _Change | None:
    if part.kind in ("resistor", "potentiometer", "voltage-source", "current-source") and key in ("value", "tempco"):
        package = review.design.packages[part.package]
        if (package.ratio_tolerance if key == "value" else package.ratio_tempco) is not None:
            return _tighter_ratio(review, part, key, left)
        path = ("parts", part.ref, "tolerance" if key == "value" else "tempco_tolerance")
        if key == "value":
            return _toleranced(path, part.value_spread.half / abs(part.value.typ), left, part.ref)
        return _tempco(path, part.tempco.half, left, part.ref)
    if part.kind == "op-amp":
        return _better_amplifier(review, part, key, left)
    quiet = quietest_diode(review) if part.kind == "diode" else None
    if quiet is not None and quiet != part.model and key in ("reverse_leakage", "leakage_doubling"):
        return _Change((Set(join_key(("parts", part.ref, "model")), quiet),), f"{quiet} for {part.ref} (leakage)")
    return None


def _tighter_ratio(review: Review, part: Part, key: str, left: float) -> _Change | None:
    package = review.design.packages[part.package]
    if key == "value" and package.ratio_tolerance is not None:
        return _toleranced(("packages", package.name, "ratio_tolerance"), package.ratio_tolerance, left, package.name)
    if key == "tempco" and package.ratio_tempco is not None:
        return _tempco(("packages", package.name, "ratio_tempco"), package.ratio_tempco, left, package.name)
    return None


def _toleranced(path: Sequence[str], present: float, left: float, who: str) -> _Change | None:
    value = _step(TOLERANCES, present, left)
    words = "" if value is None else f"{100 * value:.3g} %"
    return None if value is None else _Change((Set(join_key(path), words),), f"{who} to {words}")


def _tempco(path: Sequence[str], present: float, left: float, who: str) -> _Change | None:
    value = _step(TEMPCOS, present, left)
    words = "" if value is None else f"{value * 1e6:.3g} ppm/K"
    return None if value is None else _Change((Set(join_key(path), words),), f"tempco of {who} to ±{words}")


def _step(steps: Sequence[float], present: float, left: float) -> float | None:
    """The widest usual limit that leaves no more than asked, else the tightest, if it is tighter than the present."""
    tighter = [step for step in steps if step < 0.999 * present]
    return next((step for step in tighter if step <= present * left), tighter[-1] if tighter else None)


def _better_amplifier(review: Review, part: Part, key: str, left: float) -> _Change | None:
    """Another amplifier model whose spread of a parameter is so much smaller."""
    present = getattr(part, key, None)
    if present is None or key not in ("offset_voltage", "offset_drift", "bias_current", "offset_current"):
        return None

    def fits(model: object) -> bool:
        spread = getattr(model, key, None)
        return spread is not None and spread.half <= max(left, 0.5) * present.half

    for remedy in other_models(review, [part.ref], fits, (key,), f"smaller {key}"):
        edit = next((e for e in remedy.edits if isinstance(e, Set)), None)
        if edit is not None:
            return _Change(tuple(remedy.edits), f"{edit.to} for {part.ref} ({key.replace('_', ' ')})")
    return None


def _better_pair(review: Review, group: str, ref: str, left: float) -> _Change | None:
    """A monolithic model with a smaller mismatch for a matched group that states none of its own."""
    design = review.design
    part, members = design.parts[ref], design.matching[group].parts
    present = part.vbe_mismatch
    if design.matching[group].vbe_mismatch is not None or present is None:
        return None
    fitting = [
        model for model in design.models.values()
        if model.kind == part.kind and model.parameters.monolithic and model.name != part.model
        and model.parameters.vbe_mismatch is not None
        and model.parameters.vbe_mismatch.half <= max(left, 0.5) * present.half
    ]  # fmt: skip
    if not fitting:
        return None
    model = max(fitting, key=lambda m: m.parameters.vbe_mismatch.half)
    edits = tuple(Set(join_key(("parts", member, "model")), model.name) for member in members)
    return _Change(edits, f"{model.name} for {', '.join(members)} (mismatch)")
