"""Values that no maker has on the shelf."""

from __future__ import annotations

import math
from collections.abc import Iterable
from typing import Annotated

from rulecheck.api import (
    BaseModel,
    Finding,
    Part,
    Remedy,
    Review,
    Rule,
    Severity,
    Unit,
    format_quantity,
    in_series,
    join_key,
    nearest,
    series_for_tolerance,
)

from ._edits import quantity, set_parameter

UNITS = {"resistor": "ohm", "capacitor": "F"}
ALWAYS = "E24"
"""Series that parts of every tolerance are made in."""
FINEST = "E192"
COARSER = (ALWAYS, "E48", "E96")


class PreferredValue(Rule):
    """Resistors and capacitors that are neither in E24 nor in the series of their tolerance.

    Such a value is made to order, or two parts. The series belong to tolerances: E24 to 5 %, E96 to 1 %, E192 to
    0.5 % and less; makers offer E24 at closer tolerances too. A part that states no tolerance may be of any
    series. Resistors that compensate temperature are made to order anyway, and exempt.
    """

    name = "preferred-value"
    title = "Value outside the preferred series"
    source = "IEC 60063"
    default_severity = Severity.OBSERVATION
    needs = ()

    class Settings(BaseModel):
        """Temperature coefficient from which a resistor is one that compensates."""

        compensating: Annotated[float, Unit("1/K")] = 1000e-6

    def check(self, review: Review, settings: Settings) -> Iterable[Finding]:
        """Look up every value but that of links."""
        for part in review.design.parts.values():
            if part.kind not in UNITS or part.value.typ <= 0:
                continue
            if part.kind == "resistor" and abs(part.tempco.typ) >= settings.compensating:
                continue
            own = FINEST if part.tolerance is None else series_for_tolerance(part.tolerance)
            if not in_series(part.value.typ, ALWAYS) and not in_series(part.value.typ, own):
                yield _finding(part, own)


def _finding(part: Part, own: str) -> Finding:
    value, unit = part.value.typ, UNITS[part.kind]
    best = min((nearest(value, series) for series in (ALWAYS, own)), key=lambda v: abs(math.log(v / value)))
    text = quantity(best, unit)
    series = next(series for series in (*COARSER, own) if in_series(best, series))
    where = f"not in {ALWAYS}" if own == ALWAYS else f"neither in {ALWAYS} nor in {own}"
    why = "" if part.tolerance is None else f", the series for {format_quantity(part.tolerance, '%')}"
    return Finding(
        f"{part.ref}: {format_quantity(value, unit)} is {where}{why}",
        parts=[part.ref], at=join_key(("parts", part.ref, "value")),
        consequence=f"made to order, or two parts; {text} differs by {best / value - 1:+.2%}",
        remedies=[Remedy(f"take {text} of {series}", [set_parameter(part.ref, "value", text)])],
    )  # fmt: skip
