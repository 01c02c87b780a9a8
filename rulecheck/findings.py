"""What a review yields: findings with evidence and remedies, as frozen data.

Rules build these; only the packages under ``report`` render them.
"""

from __future__ import annotations

import datetime as dt
import enum
import hashlib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any


class Severity(enum.IntEnum):
    """Severity of a finding, after audit practice (ISO 9000 calls the first two nonconformities)."""

    OBSERVATION = 1
    MINOR = 2
    MAJOR = 3

    @property
    def label(self) -> str:
        """Lower-case word used in files and reports."""
        return self.name.lower()

    @classmethod
    def parse(cls, word: str) -> Severity:
        """Severity of a lower-case word; ValueError where there is none of that name."""
        try:
            return cls[word.upper()]
        except KeyError:
            raise ValueError(f"no severity {word!r}; there are major, minor, observation") from None


@dataclass(frozen=True, slots=True)
class Evidence:
    """One computed figure against its limit.

    Parameters
    ----------
    quantity : str
        Name of the figure in words.
    value : float
        In SI, in `unit`.
    unit : str
        SI unit, ``"1"`` for a pure number.
    limit : float, optional
        In the same unit.
    relation : str
        What a sound design satisfies: ``value relation limit``, one of ``<= < >= > ==``.
    over : array, optional
        The figure over all conditions, shape (conditions,), for plots; not in the JSON.
    basis : str
        ``"typ"`` or ``"limit"``: what kind of datum the figure rests on.
    """

    quantity: str
    value: float
    unit: str = "1"
    limit: float | None = None
    relation: str = "<="
    over: Any = field(default=None, compare=False, repr=False)
    basis: str = "typ"


@dataclass(frozen=True, slots=True)
class Set:
    """Edit: give the key `key` (dotted path) the value `to`; the key may be new in its table."""

    key: str
    to: Any


@dataclass(frozen=True, slots=True)
class Add:
    """Edit: add the table `table` at the dotted path `key`, which does not exist yet."""

    key: str
    table: Mapping[str, Any]


@dataclass(frozen=True, slots=True)
class Remove:
    """Edit: remove the key or table at the dotted path `key`."""

    key: str


@dataclass(frozen=True, slots=True)
class Move:
    """Edit: connect the pin at ``parts.REF.pins.PIN`` to the net `to`."""

    key: str
    to: str


Edit = Set | Add | Remove | Move


@dataclass(frozen=True, slots=True)
class Remedy:
    """A way to mend a finding: a title in the imperative and the edits that make it.

    No edits: the cure is not one that the file can express, and the remedy is never proven.
    `id` and `proven` are filled in by the runner; `proven` is None while untried.
    """

    title: str
    edits: Sequence[Edit] = ()
    id: str = ""
    proven: bool | None = None


@dataclass(frozen=True, slots=True)
class Location:
    """A place in a file; line and column from 1."""

    file: str
    line: int
    column: int
    key: str


@dataclass(frozen=True, slots=True)
class Concession:
    """Agreed permission to release something that does not conform (ISO 9000, 3.12.5).

    An `expires` before the day of review makes it void.
    """

    rule: str
    reason: str
    parts: tuple[str, ...] = ()
    nets: tuple[str, ...] = ()
    finding: str = ""
    approved_by: str = ""
    expires: dt.date | None = None


@dataclass(frozen=True, slots=True)
class Finding:
    """Something a rule found.

    Parameters
    ----------
    message : str
        What is wrong, with the computed value and the limit.
    parts, nets : sequence of str
        Where; they make up the identity of the finding with rule and subject.
    severity : Severity, optional
        None: the rule's default.
    subject : str
        Tells findings of one rule on the same parts and nets apart.
    consequence : str
        What it does, in the units of the output where there is one.
    conditions : mapping of str to float, optional
        Where it is worst: ambient in K, inputs and supplies in SI.
    scenario : str, optional
        The fault scenario in words.
    evidence : sequence of Evidence
    remedies : sequence of Remedy
    at : str, optional
        Key path in the design; the runner takes the first part or net where None.
    rule, id, location, concession
        Filled in by the runner.
    """

    message: str
    parts: Sequence[str] = ()
    nets: Sequence[str] = ()
    severity: Severity | None = None
    subject: str = ""
    consequence: str = ""
    conditions: Mapping[str, float] | None = None
    scenario: str | None = None
    evidence: Sequence[Evidence] = ()
    remedies: Sequence[Remedy] = ()
    at: str | None = None
    rule: str = ""
    id: str = ""
    location: Location | None = None
    concession: Concession | None = None


def finding_id(rule: str, parts: Sequence[str], nets: Sequence[str], subject: str) -> str:
    """Stable id ``rule:8hex`` from rule, parts, nets and subject alone; the order of parts and nets is free."""
    text = "\x1f".join([rule, "\x1e".join(sorted(parts)), "\x1e".join(sorted(nets)), subject])
    return f"{rule}:{hashlib.sha256(text.encode()).hexdigest()[:8]}"


@dataclass(frozen=True, slots=True)
class Failure:
    """A rule or an analysis that failed; its findings are missing."""

    rule: str
    message: str


@dataclass(frozen=True, slots=True)
class NotRun:
    """A rule not run because the circuit is broken; `because` is the id of the finding that says so."""

    rule: str
    because: str


@dataclass(frozen=True, slots=True)
class DesignReport:
    """The outcome of one design."""

    file: str
    title: str = ""
    revision: str = ""
    findings: tuple[Finding, ...] = ()
    errors: tuple[Any, ...] = ()
    failures: tuple[Failure, ...] = ()
    not_run: tuple[NotRun, ...] = ()

    @property
    def outcome(self) -> str:
        """``unreadable``, ``incomplete``, ``findings`` or ``clean``: the first that holds."""
        if self.errors:
            return "unreadable"
        if self.failures:
            return "incomplete"
        return "findings" if self.findings else "clean"


@dataclass(frozen=True, slots=True)
class Report:
    """The outcome of a review of one or more designs on one day."""

    designs: tuple[DesignReport, ...]
    on: dt.date

    def count(self, severity: Severity) -> int:
        """Findings of `severity` that no concession covers."""
        return sum(f.severity is severity and f.concession is None for d in self.designs for f in d.findings)

    @property
    def conceded(self) -> int:
        """Findings covered by a valid concession."""
        return sum(f.concession is not None for d in self.designs for f in d.findings)
