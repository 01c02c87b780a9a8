"""A small design on the screen of a terminal that is not there, with two rules of its own."""

from __future__ import annotations

import asyncio
import datetime as dt
from typing import ClassVar

import pytest

from rulecheck.api import Evidence, Finding, Remedy, Rule, Set, Severity
from rulecheck.review.registry import registry_of
from rulecheck.tui.app import Browser

DIVIDER = """\
format = 1

[design]
title = "Divider"

[nets]
GND = { role = "ground" }
VIN = { role = "input", drive = "voltage", range = ["10 mV", "10 V"] }
VOUT = { role = "output" }

[parts.R1]
kind = "resistor"
value = "3 kohm"   # from the drawer
pins = ["VIN", "VOUT"]

[parts.R2]
kind = "resistor"
value = "1 kohm"
pins = ["VOUT", "GND"]

[requirements.half]
output = "VOUT"
law = "VIN / 4"
accuracy = { reading = "1 %", absolute = "1 mV" }
"""


class Ratio(Rule):
    """A divider that leaves less than half."""

    name = "divider-ratio"
    title = "Ratio of a divider"
    source = "common practice, no source"
    default_severity = Severity.MAJOR
    needs: ClassVar = ()

    def check(self, review, settings):
        """Compare R1 with R2, the output over every condition as evidence."""
        upper, lower = (review.design.parts[ref].value.typ for ref in ("R1", "R2"))
        output = review.operating_points.voltage("VOUT")
        worst = review.operating_points.worst(output)
        if lower / (lower + upper) < 0.5:
            yield Finding(
                "R1 and R2 leave too little of VIN", parts=["R1", "R2"], nets=["VOUT"],
                consequence="noise grows", conditions=worst.conditions,
                evidence=[Evidence("output", worst.value, "V", 2.0, "<=", over=output),
                          Evidence("share", lower / (lower + upper), "1", 0.5, ">=")],
                remedies=[Remedy("Make R1 a little smaller", [Set("parts.R1.value", "2.9 kohm")]),
                          Remedy("Make R1 as large as R2", [Set("parts.R1.value", "1 kohm")])],
            )  # fmt: skip


class Round(Rule):
    """A resistor of a round value, to have two findings."""

    name = "round-value"
    title = "Round value"
    source = "common practice, no source"
    default_severity = Severity.OBSERVATION
    needs: ClassVar = ()

    def check(self, review, settings):
        """Find R2."""
        if review.design.parts["R2"].value.typ == 1000.0:
            yield Finding("R2 is 1 kohm", parts=["R2"])


@pytest.fixture
def path(tmp_path):
    """The file of the design."""
    file = tmp_path / "divider.toml"
    file.write_text(DIVIDER)
    return file


@pytest.fixture
def browse(path):
    """Runs a coroutine function on the pilot of an application whose first review is done."""

    def run(steps, *more, size=(80, 24), watch=0.05):
        async def go():
            app = Browser([path, *more], registry_of([Ratio, Round]), dt.date(2026, 1, 2), watch)
            async with app.run_test(size=size) as pilot:
                await settle(pilot)
                await steps(pilot)

        asyncio.run(go())

    return run


async def settle(pilot):
    """Wait until all work is done and shown."""
    for _ in range(2):
        await pilot.pause()
        await pilot.app.workers.wait_for_complete()
        await pilot.pause()


async def until(pilot, holds):
    """Wait until something holds, three seconds at most."""
    for _ in range(60):
        if holds():
            return
        await pilot.pause(0.05)
    raise AssertionError("it did not come about")


def text(pilot, selector):
    """What a widget of the screen says."""
    return str(pilot.app.screen.query_one(selector).render()).replace("\u00a0", " ")
