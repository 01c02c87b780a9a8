"""Two revisions of a design side by side as JSON, as ``comparison_schema.json`` describes it."""

from __future__ import annotations

import datetime as dt
from typing import TYPE_CHECKING, Any

from rulecheck.report.json import FORMAT, dump, finding_object, tool

if TYPE_CHECKING:
    from rulecheck.findings import DesignReport
    from rulecheck.review.comparing import Comparison


def render(comparison: Comparison, on: dt.date) -> str:
    """Text of a comparison as JSON.

    Parameters
    ----------
    comparison : Comparison
    on : date
        Day of the reviews.
    """
    found: dict[str, list[Any]] = {"gone": [], "come": [], "changed": []}
    for change in comparison.findings:
        if change.old is not None and change.new is not None:
            found["changed"].append({"old": finding_object(change.old), "new": finding_object(change.new)})
        else:
            found[change.kind].append(finding_object(change.latest))
    return dump({
        "format": FORMAT,
        "tool": tool(),
        "on": on,
        "old": _side(comparison.old),
        "new": _side(comparison.new),
        "changes": [{"key": c.key, "old": c.old, "new": c.new} for c in comparison.changes],
        "findings": found,
        "figures": [
            {"figure": f.name, "of": f.of, "unit": f.unit, "old": f.old, "new": f.new} for f in comparison.figures
        ],
    })  # fmt: skip


def _side(design: DesignReport) -> dict[str, Any]:
    return {
        "file": design.file,
        "title": design.title,
        "revision": design.revision,
        "outcome": design.outcome,
        "failures": [{"rule": failure.rule, "message": failure.message} for failure in design.failures],
        "not_run": [{"rule": entry.rule, "because": entry.because} for entry in design.not_run],
    }
