"""Exit statuses of the program."""

from __future__ import annotations

import enum

from rulecheck.findings import DesignReport, Report, Severity


class Status(enum.IntEnum):
    """What the program says on leaving; where several hold, the first of 130, 2, 3, 1."""

    CLEAN = 0
    """Nothing at or above the severity that fails."""
    FINDINGS = 1
    """Findings at or above it."""
    UNUSABLE = 2
    """The command or an input file cannot be used."""
    FAILED = 3
    """A rule, a plugin or an analysis failed; findings are missing."""
    INTERRUPTED = 130
    """Stopped by the user."""


def status_of(report: Report, fail_on: Severity) -> Status:
    """Exit status of a report.

    Parameters
    ----------
    report : Report
    fail_on : Severity
        The least severity that fails.
    """
    designs = report.designs
    if any(design.errors for design in designs):
        return Status.UNUSABLE
    if any(design.failures for design in designs):
        return Status.FAILED
    return Status.FINDINGS if any(_fails(design, fail_on) for design in designs) else Status.CLEAN


def _fails(design: DesignReport, fail_on: Severity) -> bool:
    return any(f.concession is None and f.severity is not None and f.severity >= fail_on for f in design.findings)
