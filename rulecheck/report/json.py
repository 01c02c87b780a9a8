"""The outcome of a review as JSON, as ``report_schema.json`` describes it."""

from __future__ import annotations

import datetime as dt
import json
import math
from collections.abc import Mapping
from typing import Any

from rulecheck import __version__
from rulecheck.errors import Problem
from rulecheck.findings import (
    Add,
    Concession,
    DesignReport,
    Edit,
    Evidence,
    Finding,
    Location,
    Move,
    Remedy,
    Remove,
    Report,
    Set,
    Severity,
)
from rulecheck.review.completion import severity_of

FORMAT = 1


def render(report: Report) -> str:
    """Text of a report as JSON.

    Parameters
    ----------
    report : Report
    """
    return dump(report_object(report))


def dump(value: Mapping[str, Any]) -> str:
    """Text of an object as JSON, with a line end; numbers that are not finite become null.

    Parameters
    ----------
    value : mapping
    """
    return json.dumps(plain(value), indent=2, ensure_ascii=False, allow_nan=False) + "\n"


def tool() -> dict[str, str]:
    """Name and version of the program, as every output states them."""
    return {"name": "rulecheck", "version": __version__}


def report_object(report: Report) -> dict[str, Any]:
    """A report as plain data.

    Parameters
    ----------
    report : Report
    """
    return {
        "format": FORMAT,
        "tool": tool(),
        "designs": [_design(design) for design in report.designs],
        "on": report.on.isoformat(),
        "summary": {
            **{severity.label: report.count(severity) for severity in sorted(Severity, reverse=True)},
            "conceded": report.conceded,
        },
    }


def plain(value: Any) -> Any:  # noqa: ANN401 - any value of TOML or numpy
    """A value in the types of JSON; what is not finite becomes None.

    Parameters
    ----------
    value : object
        Of TOML, of numpy, or made of such.
    """
    if isinstance(value, Mapping):
        return {str(key): plain(entry) for key, entry in value.items()}
    if isinstance(value, list | tuple):
        return [plain(entry) for entry in value]
    if isinstance(value, dt.date | dt.time):
        return value.isoformat()
    if hasattr(value, "tolist"):  # arrays and numbers of numpy
        return plain(value.tolist())
    if isinstance(value, float) and not math.isfinite(value):
        return None
    return value


def _design(design: DesignReport) -> dict[str, Any]:
    return {
        "file": design.file,
        "title": design.title,
        "revision": design.revision,
        "outcome": design.outcome,
        "errors": [problem_object(problem) for problem in design.errors],
        "failures": [{"rule": failure.rule, "message": failure.message} for failure in design.failures],
        "not_run": [{"rule": entry.rule, "because": entry.because} for entry in design.not_run],
        "findings": [finding_object(finding) for finding in design.findings],
    }


def problem_object(problem: Problem) -> dict[str, Any]:
    """A fault of an input file as plain data.

    Parameters
    ----------
    problem : Problem
    """
    return {
        "file": problem.file,
        "line": problem.line,
        "column": problem.column,
        "key": problem.key,
        "message": problem.message,
    }


def finding_object(finding: Finding) -> dict[str, Any]:
    """A finding as plain data.

    Parameters
    ----------
    finding : Finding
    """
    return {
        "id": finding.id,
        "rule": finding.rule,
        "severity": severity_of(finding).label,
        "message": finding.message,
        "consequence": finding.consequence,
        "parts": list(finding.parts),
        "nets": list(finding.nets),
        "at": None if finding.location is None else _location(finding.location),
        "conditions": None if finding.conditions is None else dict(finding.conditions),
        "scenario": finding.scenario,
        "evidence": [_evidence(evidence) for evidence in finding.evidence],
        "remedies": [_remedy(remedy) for remedy in finding.remedies],
        "concession": None if finding.concession is None else _concession(finding.concession),
    }


def _location(location: Location) -> dict[str, Any]:
    return {"file": location.file, "line": location.line, "column": location.column, "key": location.key}


def _evidence(evidence: Evidence) -> dict[str, Any]:
    return {
        "quantity": evidence.quantity,
        "value": evidence.value,
        "unit": evidence.unit,
        "limit": evidence.limit,
        "relation": evidence.relation,
    }


def _remedy(remedy: Remedy) -> dict[str, Any]:
    return {
        "id": remedy.id,
        "title": remedy.title,
        "proven": bool(remedy.proven),
        "edits": [edit_object(edit) for edit in remedy.edits],
    }


def edit_object(edit: Edit) -> dict[str, Any]:
    """An edit as plain data.

    Parameters
    ----------
    edit : Set, Add, Remove or Move
    """
    match edit:
        case Set(key, to):
            return {"set": key, "to": to}
        case Add(key, table):
            return {"add": key, "table": dict(table)}
        case Remove(key):
            return {"remove": key}
        case Move(key, to):
            return {"move": key, "to": to}


def _concession(concession: Concession) -> dict[str, Any]:
    return {
        "reason": concession.reason,
        "approved_by": concession.approved_by or None,
        "expires": concession.expires,
    }
