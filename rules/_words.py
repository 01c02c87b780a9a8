"""Wording that rules share."""

from __future__ import annotations

import math
from collections.abc import Iterable

from rulecheck.api import Evidence


def figures(evidence: Iterable[Evidence]) -> list[Evidence]:
    """Evidence without the entries that have no figure."""
    return [e for e in evidence if math.isfinite(e.value)]
