"""The computed transfer against the law of the requirement."""

from __future__ import annotations

from collections.abc import Iterable
from functools import partial
from typing import Annotated

import numpy as np

from rulecheck.api import (
    BaseModel,
    Evidence,
    Finding,
    OperatingPoints,
    Remedy,
    Requirement,
    Review,
    Rule,
    Severity,
    Transfer,
    Unit,
    dimension_fault,
    format_quantity,
    join_key,
)

from ._budget import over_budget
from ._scaling import scalings
from ._trims import short_trims
from ._words import percent


class TransferLaw(Rule):
    """The output against the law it is asked to follow, in units, over range and temperature.

    Dimensions first: a law that is not in the unit of the output means nothing. Then the nominal error at every
    condition of the requirement, then with the spreads of all parts: by their squares (a fault), and with all at their
    limits at once (a lesser one). The local exponent where the law is a power. Trims are set before anything is judged,
    and must have the travel to null their requirement at the extremes of spread.
    """

    name = "transfer-law"
    title = "Output that does not follow its law"
    source = "limits: the requirement's own accuracy; exponent: common practice, no source"
    default_severity = Severity.MAJOR
    needs = ("operating_points", "loops")

    class Settings(BaseModel):
        """Limits."""

        exponent: Annotated[float, Unit("%")] = 0.005
        above_absolute: float = 10.0

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Judge every requirement with a law; an error in dimensions stands alone."""
        for requirement in review.design.requirements.values():
            if requirement.law is None:
                continue
            fault = _dimensions(review, requirement)
            if fault is not None:
                yield fault
                continue
            transfer = review.transfer[requirement.name]
            if not requirement.has_accuracy or not transfer.judged.any():
                continue
            wrong = list(_nominal(review, transfer))
            yield from wrong or _exponents(review, settings, transfer)
            short = list(short_trims(review, requirement.name))
            yield from short
            if not wrong and not short:  # spreads about a wrong nominal, or that a trim does not reach, add nothing
                yield from over_budget(
                    review, review.budget[requirement.name], _at_work(review, review.operating_points)
                )


def _dimensions(review: Review, requirement: Requirement) -> Finding | None:
    fault = dimension_fault(review.design, requirement)
    if fault is None:
        return None
    return Finding(
        f"requirement {requirement.name}: {fault.message}",
        nets=[requirement.output],
        subject=requirement.name,
        consequence="the requirement cannot be met or missed: it compares unlike quantities",
        at=join_key(("requirements", requirement.name, "law")),
        remedies=[Remedy(fault.hint or "give the scale that is missing as a constant with its unit")],
    )


def _nominal(review: Review, transfer: Transfer) -> Iterable[Finding]:
    requirement, points = transfer.requirement, review.operating_points
    allowed = np.where(transfer.judged & _at_work(review, points), transfer.allowed, np.nan)
    with np.errstate(all="ignore"):
        ratio = np.abs(transfer.error) / allowed
    if not np.isfinite(ratio).any():
        return
    worst = points.worst(ratio)
    if worst.value <= 1:
        return
    at = worst.index
    error, limit, law = transfer.error[at], allowed[at], transfer.law[at]
    part = f" ({percent(error / law)} of reading)" if law else ""
    yield Finding(
        f"requirement {requirement.name}: {requirement.output} is off its law by {format_quantity(error, 'V', 3)}"
        f"{part}, allowed {format_quantity(limit, 'V', 3)}",
        nets=[requirement.output], subject=requirement.name, conditions=worst.conditions,
        consequence=f"{requirement.output} reads {format_quantity(transfer.output[at], 'V')} instead of "
                    f"{format_quantity(law, 'V')}",
        evidence=[Evidence("nominal error", float(abs(error)), "V", float(limit), "<=", over=np.abs(transfer.error))],
        remedies=scalings(review, partial(_shares, review, transfer)),
        at=join_key(("requirements", requirement.name)),
    )  # fmt: skip


def _shares(review: Review, transfer: Transfer, points: OperatingPoints) -> np.ndarray:
    """Output less law in parts of the allowed error, NaN where it is not judged."""
    judged = transfer.judged & _at_work(review, points) & (transfer.allowed > 0)
    error = points.voltage(transfer.requirement.output) - transfer.law
    return np.where(judged, error / np.where(judged, transfer.allowed, 1), np.nan)


def _at_work(review: Review, points: OperatingPoints) -> np.ndarray:
    """Conditions at which no amplifier has left its range or its sign of feedback: that is another rule's fault."""
    mask = np.ones(review.conditions.size, bool)
    for amplifier in review.loops.amplifiers:
        linear = points.linear(amplifier)
        mask &= (linear | ~linear.any()) & ~(review.loops.dc_return_ratio(amplifier) < 0)
    return mask


def _exponents(review: Review, settings: TransferLaw.Settings, transfer: Transfer) -> Iterable[Finding]:
    requirement, points = transfer.requirement, review.operating_points
    large = transfer.judged & _at_work(review, points)
    large &= np.abs(transfer.law) > settings.above_absolute * requirement.absolute
    for name, exponent in transfer.exponent.items():
        asked = np.where(large, transfer.law_exponent[name], np.nan)
        if not np.isfinite(asked).any() or np.nanmax(asked) - np.nanmin(asked) > 1e-6:
            continue  # the law is no power of this input
        power = float(np.nanmedian(asked))
        if abs(power) < 1e-6:
            continue
        off = np.abs(np.where(large, exponent, np.nan) / power - 1)
        if not np.isfinite(off).any() or np.nanmax(off) <= settings.exponent:
            continue
        worst = points.worst(off)
        tilted = partial(_tilted, review, transfer, large, name, most=settings.exponent * abs(power))
        yield Finding(
            f"requirement {requirement.name}: local exponent in {name} is {exponent[worst.index]:.4f}, "
            f"the law asks {power:.4g} (off by {percent(worst.value)}, limit {percent(settings.exponent)})",
            nets=[requirement.output], subject=f"{requirement.name} exponent {name}", severity=Severity.MINOR,
            conditions=worst.conditions, consequence=f"{requirement.output} bends away from its law with {name}",
            evidence=[Evidence("exponent error", worst.value, "1", settings.exponent, "<=", over=off)],
            remedies=scalings(review, tilted),
            at=join_key(("requirements", requirement.name)),
        )  # fmt: skip


def _tilted(
    review: Review, transfer: Transfer, judged: np.ndarray, name: str, points: OperatingPoints, *, most: float
) -> np.ndarray:
    """All errors, and the exponent error over the range of an input: the slope of ln(output/law) in its logarithm.

    The latter in parts of half of what an exponent may be off, since local bends come on top.
    """
    x = np.log(np.abs(transfer.conditions.values[name][judged]))
    error = np.log(np.abs(points.voltage(transfer.requirement.output)[judged] / transfer.law[judged]))
    x = x - x.mean()
    return np.append(_shares(review, transfer, points), x @ error / (x @ x) / (most / 2))
