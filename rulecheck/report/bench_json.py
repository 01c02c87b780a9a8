"""A bench sheet as JSON, as ``bench_schema.json`` describes it."""

from __future__ import annotations

from typing import TYPE_CHECKING, Any

from rulecheck.report.json import FORMAT, dump, tool

if TYPE_CHECKING:
    from rulecheck.analysis.bench import BenchSheet, Measured
    from rulecheck.design.model import Design


def render(design: Design, sheet: BenchSheet, measured: Measured | None = None) -> str:
    """Text of a bench sheet as JSON.

    Parameters
    ----------
    design : Design
    sheet : BenchSheet
    measured : Measured, optional
    """
    found = {
        "file": str(design.path),
        "title": design.title,
        "points": dict(sheet.conditions.values),
        "readings": [
            {"reading": r.name, "unit": "V", "expected": r.expected, "worst_case": r.worst_case, "rss": r.rss}
            for r in sheet.readings.values()
        ],
    }
    if measured is not None:
        found |= {"measured": _measured(measured), "explanations": _explanations(measured)}
    return dump({"format": FORMAT, "tool": tool(), "designs": [found]})


def _measured(measured: Measured) -> list[dict[str, Any]]:
    rows = zip(
        measured.readings, measured.at, measured.volts, measured.off, measured.limit, measured.inside, strict=True
    )
    return [
        {"reading": name, "point": at, "measured": volts, "off": off, "limit": limit, "inside": inside}
        for name, at, volts, off, limit, inside in rows
    ]


def _explanations(measured: Measured) -> list[dict[str, Any]]:
    return [
        {
            "parameter": e.parameter,
            "deviation": e.deviation,
            "half_spreads": e.half_spreads,
            "explains": e.explains,
            "contradicts": e.contradicts,
        }
        for e in measured.explanations()
    ]
