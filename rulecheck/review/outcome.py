"""The outcome of the review of one design, with what it takes to show it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import TYPE_CHECKING

from rulecheck.findings import DesignReport

if TYPE_CHECKING:
    from rulecheck.design.model import Design


@dataclass(frozen=True, slots=True)
class ReviewedDesign(DesignReport):
    """Outcome of a design, with the units of its conditions, the number of rules that ran, and the file's text."""

    units: Mapping[str, str] = field(default_factory=dict)
    rules_run: int = 0
    text: str = field(default="", repr=False)


def condition_units(design: Design) -> dict[str, str]:
    """Unit to show each quantity of a condition in: ambient, inputs, supplies, references, potentiometers.

    Parameters
    ----------
    design : Design
    """
    units = {"ambient": "degC"}
    units |= {name: "V" if source.kind == "voltage" else "A" for name, source in design.inputs.items()}
    units |= {name: "V" for name, net in design.nets.items() if net.role in ("supply", "reference")}
    return units | {ref: "1" for ref, part in design.parts.items() if part.kind == "potentiometer"}
