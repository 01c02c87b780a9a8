"""A team's plugin for the checks of the program."""

from __future__ import annotations

import time
from typing import Annotated

from rulecheck.api import BaseModel, Evidence, Field, Finding, Remedy, Rule, Set, Severity, Unit


class DividerRatio(Rule):
    """A divider that takes away more than it should.

    What it costs is lost again as noise:

    - of the amplifier behind it,
    - of the divider itself.
    """

    name = "divider-ratio"
    title = "Divider with too low a ratio"
    source = "common practice, no source"
    default_severity = Severity.MAJOR
    needs = ()

    class Settings(BaseModel):
        """Limits."""

        ratio: Annotated[float, Unit("%")] = Field(0.5, description="Least share of the input that is left.")
        least: Annotated[float, Unit("ohm")] = 10.0

    def check(self, review, settings):
        """Compare R2 with both."""
        upper, lower = (review.design.parts[ref].value.typ for ref in ("R1", "R2"))
        ratio = lower / (lower + upper)
        if ratio < settings.ratio:
            yield Finding(
                f"R1 and R2 leave {ratio:.0%} of VIN",
                parts=["R1", "R2"],
                nets=["VOUT"],
                conditions={"VIN": 1.0, "ambient": 298.15},
                scenario="supply absent",
                consequence="the noise of what follows grows as the signal falls",
                evidence=[
                    Evidence("ratio", ratio, "%", settings.ratio, ">="),
                    Evidence("output", ratio * 1.0, "V", basis="limit"),
                    Evidence("unknown", float("nan"), "V"),
                ],
                remedies=[
                    Remedy("Make R1 as large as R2", [Set("parts.R1.value", "1 kohm")]),
                    Remedy("Make R1 a little smaller", [Set("parts.R1.value", "2.9 kohm")]),
                    Remedy("Ask for a larger signal"),
                ],
            )


class Crashing(Rule):
    """A rule that fails on designs that say so."""

    name = "crashing"
    title = "Rule that fails"
    source = "common practice, no source"
    default_severity = Severity.OBSERVATION
    needs = ()

    def check(self, review, settings):
        """Fail where the title asks for it; wait where it asks for that."""
        if "crash" in review.design.title:
            raise ZeroDivisionError("no such luck")
        if "wait" in review.design.title:
            print("waiting", flush=True)  # noqa: T201 - tells the check that the rule is at work
            time.sleep(60)
        if "curious" in review.design.title:
            yield Finding("worth knowing", parts=["R1"])


class SolvingDivider(Rule):
    """A rule that asks for operating points."""

    name = "solving-divider"
    title = "Rule that solves the circuit"
    source = "common practice, no source"

    def check(self, review, settings):
        """Find the output where it is largest, whatever it is."""
        points = review.operating_points
        worst = points.worst(points.voltage("VOUT"))
        yield Finding("largest output", nets=["VOUT"], conditions=worst.conditions, severity=Severity.OBSERVATION)
