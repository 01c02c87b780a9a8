"""Wording that rules share."""

from __future__ import annotations

import math
from collections.abc import Iterable

from rulecheck.api import Evidence


def figures(evidence: Iterable[Evidence]) -> list[Evidence]:
    """Evidence without the entries that have no figure."""
    return [e for e in evidence if math.isfinite(e.value)]


def percent(ratio: float) -> str:
    """A ratio in percent with two significant figures, whole above ten: "0.85 %", "270 %"."""
    value = 100 * abs(ratio)
    return f"{value:.0f} %" if value >= 10 else f"{value:.2g} %"
