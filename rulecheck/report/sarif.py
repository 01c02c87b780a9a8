"""The outcome of a review in the Static Analysis Results Interchange Format, SARIF 2.1.0 (OASIS)."""

from __future__ import annotations

import os
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import TYPE_CHECKING, Any
from urllib.parse import quote

from rulecheck.errors import EditError, Problem
from rulecheck.findings import Concession, DesignReport, Failure, Finding, Location, NotRun, Remedy, Report
from rulecheck.report.json import dump, finding_object, tool
from rulecheck.report.layout import let_go
from rulecheck.report.remedies_text import mark
from rulecheck.report.sarif_rules import LEVELS, NOTIFICATIONS, rule_descriptors
from rulecheck.report.wording import CAUTIONS, details, units_of
from rulecheck.review.completion import severity_of
from rulecheck.review.outcome import ReviewedDesign

if TYPE_CHECKING:
    from rulecheck.review.registry import Registry

VERSION = "2.1.0"
SCHEMA = "https://docs.oasis-open.org/sarif/sarif/v2.1.0/errata01/os/schemas/sarif-schema-2.1.0.json"
BASE = "%SRCROOT%"
FINGERPRINT = "findingId/v1"
#: What the properties of a result repeat of a finding; the rest has places of its own in the format.
PROPERTIES = ("parts", "nets", "consequence", "conditions", "scenario", "evidence", "remedies")

Object = dict[str, Any]


def render(report: Report, registry: Registry) -> str:
    """Text of a report as SARIF.

    Parameters
    ----------
    report : Report
    registry : Registry
        The rules that were in force.
    """
    rules = rule_descriptors(registry)
    indices = {rule["id"]: index for index, rule in enumerate(rules)}
    run = {
        "tool": {"driver": {**tool(), "semanticVersion": tool()["version"], **_descriptors(rules)}},
        "columnKind": "unicodeCodePoints",
        "originalUriBaseIds": {BASE: {"description": {"text": "the folder in which the check ran"}}},
        "invocations": [_invocation(report, indices)],
        "artifacts": [_artifact(design) for design in report.designs],
        "results": [_result(f, design, indices) for design in report.designs for f in design.findings],
        "properties": {"on": report.on, "cautions": CAUTIONS},
    }
    return dump({"$schema": SCHEMA, "version": VERSION, "runs": [run]})


def _descriptors(rules: list[Object]) -> Object:
    notifications = [{"id": name, "shortDescription": {"text": text}} for name, text in NOTIFICATIONS.items()]
    return {"rules": rules, "notifications": notifications}


def _invocation(report: Report, indices: Mapping[str, int]) -> Object:
    """Whether all was judged, and what was not."""
    faults = [problem for design in report.designs for problem in design.errors]
    failures = [(design, failure) for design in report.designs for failure in design.failures]
    silenced = [(design, entry) for design in report.designs for entry in design.not_run]
    return {
        "executionSuccessful": not faults and not failures,
        "toolConfigurationNotifications": [_unreadable(problem) for problem in faults],
        "toolExecutionNotifications": [
            *(_failed(failure, design, indices) for design, failure in failures),
            *(_not_run(entry, design, indices) for design, entry in silenced),
        ],
    }


def _unreadable(problem: Problem) -> Object:
    text = f"{problem.key}: {problem.message}" if problem.key else problem.message
    place = {"startLine": problem.line, "startColumn": problem.column}
    region = {name: number for name, number in place.items() if number is not None}
    return _notification("unreadable", text, "error", _physical(problem.file, region))


def _failed(failure: Failure, design: DesignReport, indices: Mapping[str, int]) -> Object:
    notification = _notification("failed", f"{failure.rule}: {failure.message}", "error", _physical(design.file))
    return notification | _associated(failure.rule, indices)


def _not_run(entry: NotRun, design: DesignReport, indices: Mapping[str, int]) -> Object:
    text = f"{entry.rule}: the circuit is broken, see {entry.because}"
    return _notification("not-run", text, "warning", _physical(design.file)) | _associated(entry.rule, indices)


def _notification(kind: str, text: str, level: str, place: Object) -> Object:
    descriptor = {"id": kind, "index": list(NOTIFICATIONS).index(kind)}
    return {"descriptor": descriptor, "level": level, "message": _words(text), "locations": [place]}


def _associated(rule: str, indices: Mapping[str, int]) -> Object:
    """The rule that a notification is about; an analysis or a plugin is none."""
    return {"associatedRule": {"id": rule, "index": indices[rule]}} if rule in indices else {}


def _artifact(design: DesignReport) -> Object:
    artifact: Object = {"location": artifact_location(design.file), "roles": ["analysisTarget"]}
    if design.title:
        artifact["description"] = {"text": design.title}
    if design.revision:
        artifact["properties"] = {"revision": design.revision}
    return artifact


def artifact_location(file: str) -> Object:
    """A file as SARIF names it: below the folder in which the check ran, else by its whole path.

    Parameters
    ----------
    file : str
    """
    path = Path(os.path.normpath(file))
    if path.is_absolute() or path.parts[:1] == ("..",):
        return {"uri": path.absolute().resolve().as_uri()}
    return {"uri": quote(os.fsencode(path.as_posix())), "uriBaseId": BASE}


def _physical(file: str, region: Object | None = None) -> Object:
    place: Object = {"artifactLocation": artifact_location(file)}
    return {"physicalLocation": place | ({"region": region} if region else {})}


def _result(finding: Finding, design: DesignReport, indices: Mapping[str, int]) -> Object:
    repeated = finding_object(finding)
    result: Object = {
        "ruleId": finding.rule,
        "ruleIndex": indices.get(finding.rule, -1),
        "level": LEVELS[severity_of(finding)],
        "message": _message(finding, design),
        "locations": [_location(finding.location) if finding.location else _physical(design.file)],
        "partialFingerprints": {FINGERPRINT: finding.id},
        # a run that suppresses anything says of every result whether it is
        "suppressions": [_suppression(finding.concession)] if finding.concession else [],
        "properties": {"severity": severity_of(finding).label} | {name: repeated[name] for name in PROPERTIES},
    }
    fixes = list(_fixes(finding, design))
    return result | ({"fixes": fixes} if fixes else {})


def _message(finding: Finding, design: DesignReport) -> Object:
    lines = [finding.message, *(f"{label}: {words}" for label, words in details(finding, units_of(design)))]
    return _words(let_go("\n".join(lines)))


def _words(text: str) -> Object:
    """A message: braces, which stand for arguments, doubled; and no name in it taken for a link."""
    return {"text": text.replace("{", "{{").replace("}", "}}").replace("](", "\\](")}


def _location(location: Location) -> Object:
    region = {"startLine": location.line, "startColumn": location.column}
    return _physical(location.file, region) | {"logicalLocations": [{"fullyQualifiedName": location.key}]}


def _suppression(concession: Concession) -> Object:
    agreed = {"approved_by": concession.approved_by, "expires": concession.expires}
    properties = {name: value for name, value in agreed.items() if value}
    suppression: Object = {"kind": "inSource", "status": "accepted", "justification": concession.reason}
    return suppression | ({"properties": properties} if properties else {})


def _fixes(finding: Finding, design: DesignReport) -> Iterator[Object]:
    """The proven remedies; others are among the properties, and not offered to be made unseen."""
    for remedy in finding.remedies:
        if remedy.proven and isinstance(design, ReviewedDesign):
            changes = _changes(remedy, design)
            if changes:
                title = f"{remedy.title} [{mark(remedy)}]"
                change = {"artifactLocation": artifact_location(design.file), "replacements": changes}
                yield {"description": _words(title), "artifactChanges": [change]}


def _changes(remedy: Remedy, design: ReviewedDesign) -> list[Object]:
    """What the edits of a remedy replace in the text of its design."""
    from rulecheck.design.locate import BYTE_ORDER_MARK
    from rulecheck.design.replacements import Lines, replacements
    from rulecheck.review.remedies import edited

    old = design.text.removeprefix(BYTE_ORDER_MARK)
    try:
        new = edited(old, remedy)
    except EditError:
        return []
    lines = Lines(old)
    changes = []
    for part in replacements(old, new):
        (start_line, start_column), (end_line, end_column) = lines.position(part.start), lines.position(part.end)
        region = {
            "startLine": start_line, "startColumn": start_column, "endLine": end_line, "endColumn": end_column,
        }  # fmt: skip
        changes.append({"deletedRegion": region} | ({"insertedContent": {"text": part.text}} if part.text else {}))
    return changes
