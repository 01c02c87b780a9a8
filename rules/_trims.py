"""Trims whose travel does not null the error of their requirement at the extremes of spread."""

from __future__ import annotations

from collections.abc import Iterator

from rulecheck.api import (
    Edit,
    Evidence,
    Finding,
    Remedy,
    Review,
    RulecheckError,
    Severity,
    Travel,
    format_quantity,
    nearest,
    travel,
)

from ._edits import quantity, set_parameter

TRACKS = (10.0, 20.0, 50.0)
"""Values of potentiometers in a decade, and what they begin with: 1, 2, 5."""
MOST_TRIED = 5


def short_trims(review: Review, requirement: str) -> Iterator[Finding]:
    """Findings of the trims of a requirement that lack travel.

    Parameters
    ----------
    review : Review
    requirement : str
        Its name.
    """
    for trim in travel(review, requirement):
        if _suffices(trim):
            continue
        output = review.design.requirements[requirement].output
        at_end = trim.position in (trim.low, trim.high)
        asks = "nominally it would have to turn beyond it" if at_end else f"the spreads ask for ±{trim.needed:.2f}"
        yield Finding(
            f"{trim.part} has not the travel to null {requirement}: set at {trim.position:.2f} of "
            f"{trim.low:g}..{trim.high:g}, {asks}",
            parts=[trim.part], nets=[output], subject=requirement, severity=Severity.MAJOR,
            consequence=f"where it is trimmed, {output} may keep {format_quantity(trim.error, 'V', 3)} of error"
                        + ("" if trim.needed else " with all parts at their nominal values"),
            evidence=[Evidence("travel left at the extremes", trim.left, "1", 0.0, ">", basis="limit")],
            remedies=list(_longer(review, requirement, trim)) if review.seeks_remedies else [],
        )  # fmt: skip


def _suffices(trim: Travel) -> bool:
    return trim.low < trim.position < trim.high and trim.left >= 0


def _longer(review: Review, requirement: str, trim: Travel) -> Iterator[Remedy]:
    """A larger potentiometer, the resistor beside it made smaller by as much, or that resistor alone, tried."""
    design = review.design
    part = design.parts[trim.part]
    beside = [
        ref for ref, other in design.parts.items()
        if other.kind == "resistor" and set(other.pins.values()) & set(part.pins.values())
    ]  # fmt: skip
    found = False
    for ref in beside:
        for track in _tracks(part.value.typ):
            for share in (0.5, 1 - trim.position):
                ohm = design.parts[ref].value.typ + part.value.typ * (1 - share) - track / 2
                edits = _edits(review, trim.part, track, ref, ohm)
                if edits and _cures(review, edits, requirement):
                    found = True
                    words = " and ".join(f"{e.key.split('.')[1]} {e.to}" for e in edits if hasattr(e, "to"))
                    yield Remedy(f"make {words}", edits)
                    break
            if found:
                return
    if not found:
        yield Remedy(f"give {trim.part} more to turn, or tighten the tolerances that it takes up: no value that was "
                     "tried suffices")  # fmt: skip


def _tracks(present: float) -> list[float]:
    """The present value of a potentiometer and the next usual ones above."""
    decade = 10.0 ** len(str(int(present))) / 100
    usual = [first * decade * power for power in (0.1, 1.0, 10.0, 100.0) for first in TRACKS]
    return [present, *[value for value in usual if value > present * 1.01][:MOST_TRIED]]


def _edits(review: Review, trim: str, track: float, ref: str, ohm: float) -> list[Edit]:
    """Edits that are edits, none where the resistor would vanish."""
    parts = review.design.parts
    if ohm <= 0:
        return []
    edits: list[Edit] = []
    if track != parts[trim].value.typ:
        edits.append(set_parameter(trim, "value", quantity(track, "ohm")))
    other = nearest(ohm, "E96")
    if other != parts[ref].value.typ:
        edits.append(set_parameter(ref, "value", format_quantity(other, "ohm", 5)))
    return edits


def _cures(review: Review, edits: list[Edit], requirement: str) -> bool:
    try:
        after = review.edited(edits)
        return all(_suffices(trim) for trim in travel(after, requirement))
    except RulecheckError:
        return False
