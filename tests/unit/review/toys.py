"""Small rules and designs to run the review with."""

from __future__ import annotations

import datetime as dt
from typing import Annotated

from rulecheck.api import BaseModel, Evidence, Finding, Remedy, Rule, Set, Severity, Unit
from rulecheck.review.registry import registry_of
from rulecheck.review.runner import DesignReview, Options
from rulecheck.testing import design_from

DAY = dt.date(2026, 3, 1)

DIVIDER = """\
format = 1

[design]
title = "Divider"
revision = "A"

[nets]
GND = { role = "ground" }
VIN = { role = "input", drive = "voltage", range = ["1 V", "10 V"] }
VOUT = { role = "output" }

[parts.R1]
kind = "resistor"
value = "100 ohm"   # too low
pins = ["VIN", "VOUT"]

[parts.R2]
kind = "resistor"
value = "4.7 kohm"
pins = ["VOUT", "GND"]
"""


class LowResistor(Rule):
    """A resistor so low that it loads what drives it."""

    name = "low-resistor"
    title = "Resistor of too low a value"
    source = "common practice, no source"
    default_severity = Severity.MAJOR
    needs = ()

    class Settings(BaseModel):
        """The least value."""

        limit: Annotated[float, Unit("ohm")] = 1e3

    def check(self, review, settings):
        """Compare every resistor with the limit."""
        for ref, part in review.design.parts.items():
            if part.kind == "resistor" and part.value.typ < settings.limit:
                yield Finding(
                    f"{ref} has {part.value.typ:.0f} ohm",
                    parts=[ref],
                    evidence=[Evidence("resistance", part.value.typ, "ohm", settings.limit, ">=")],
                    remedies=[
                        Remedy("Raise it a little", [Set(f"parts.{ref}.value", "200 ohm")]),
                        Remedy("Raise it to the limit", [Set(f"parts.{ref}.value", "1 kohm")]),
                        Remedy("Buffer what drives it"),
                    ],
                )


def rule(name, found=(), *, severity=Severity.MINOR, needs=(), blocks=False, title="Toy", source="none"):
    """A rule class that gives `found`, or what it gives when called with the review."""

    def check(self, review, settings):
        return found(review) if callable(found) else found

    members = {
        "name": name, "title": title, "source": source, "default_severity": severity, "needs": needs,
        "blocks_analysis": blocks, "check": check, "__doc__": "A rule for the purpose.",
    }  # fmt: skip
    return type(name.title().replace("-", ""), (Rule,), members)


def review(rules, text=DIVIDER, **options):
    """The review of a design by the rules given."""
    return DesignReview(design_from(text), registry_of(rules), Options(on=options.pop("on", DAY), **options))


def raising(error):
    """What a rule gives that raises."""

    def check(_review):
        raise error

    return check
