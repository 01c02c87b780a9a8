"""Two revisions of a design side by side: what was changed in the file, what the rules say now, what moved."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

from rulecheck.design.keypath import join_key
from rulecheck.errors import AnalysisError
from rulecheck.findings import Failure
from rulecheck.review.completion import severity_of
from rulecheck.review.figures import Figure, key_figures

if TYPE_CHECKING:
    from rulecheck.design.model import Design
    from rulecheck.findings import DesignReport, Evidence, Finding
    from rulecheck.review.registry import Registry
    from rulecheck.review.runner import Options

MOVED = 1e-3
"""Share of a figure by which it must change to count as moved: less does not show in three digits."""


@dataclass(frozen=True, slots=True)
class Change:
    """A key of the design file whose value changed; None on the side that does not have it.

    A whole part, net or other table that came or went is one change, its value the table.
    """

    key: str
    old: Any
    new: Any


@dataclass(frozen=True, slots=True)
class FindingChange:
    """A finding that came (no `old`), went (no `new`) or changed in severity, concession or its figures."""

    old: Finding | None
    new: Finding | None

    @property
    def kind(self) -> str:
        """``come``, ``gone`` or ``changed``."""
        return "come" if self.old is None else "gone" if self.new is None else "changed"

    @property
    def latest(self) -> Finding:
        """The finding as it is, or as it last was."""
        found = self.new or self.old
        assert found is not None, "a change has at least one side"
        return found


@dataclass(frozen=True, slots=True)
class MovedFigure:
    """A figure on both sides; None where it has no value there."""

    name: str
    of: str
    unit: str
    old: float | None
    new: float | None


@dataclass(frozen=True, slots=True)
class Comparison:
    """All that changed between two revisions, with the outcome of each."""

    old: DesignReport
    new: DesignReport
    changes: tuple[Change, ...]
    findings: tuple[FindingChange, ...]
    figures: tuple[MovedFigure, ...]


def compare_designs(old: Design, new: Design, registry: Registry, options: Options) -> Comparison:
    """Review two designs and set them side by side.

    Parameters
    ----------
    old, new : Design
    registry : Registry
    options : Options
        Of both reviews. Remedies are not tried.
    """
    cache: dict[Any, Any] = {}
    (before, figures_before), (after, figures_after) = (
        _reviewed(design, registry, options, cache) for design in (old, new)
    )
    return Comparison(
        before, after, tuple(changes(old, new)), tuple(_findings(before, after)),
        tuple(_moved(figures_before, figures_after)),
    )  # fmt: skip


def _reviewed(
    design: Design, registry: Registry, options: Options, cache: dict[Any, Any]
) -> tuple[DesignReport, list[Figure]]:
    """Outcome and key figures; a circuit that is broken has no figures."""
    from rulecheck.analysis.review import Review
    from rulecheck.review.runner import DesignReview

    report = DesignReview(design, registry, options, cache).report(try_remedies=False)
    if report.not_run:
        return report, []
    try:
        return report, key_figures(Review(design, cache=cache))
    except AnalysisError as error:
        return replace(report, failures=(*report.failures, Failure("figures", str(error)))), []


def changes(old: Design, new: Design) -> Iterator[Change]:
    """What changed in the file, and in the models of a catalogue that parts of both use, in the order of the file.

    Parameters
    ----------
    old, new : Design
    """
    yield from _table_changes(old.data, new.data, ())
    used = {part.model for part in (*old.parts.values(), *new.parts.values()) if part.model is not None}
    for name in sorted(used & old.models.keys() & new.models.keys()):
        before, after = old.models[name], new.models[name]
        for key in sorted(before.given | after.given):
            was, now = (getattr(model.parameters, key, None) for model in (before, after))
            if was != now:
                yield Change(join_key(("models", name, key)), _plain(was), _plain(now))


def _table_changes(old: Mapping[str, Any], new: Mapping[str, Any], path: tuple[str, ...]) -> Iterator[Change]:
    for key in dict.fromkeys((*old, *new)):
        was, now = old.get(key), new.get(key)
        here = (*path, key)
        if was == now and type(was) is type(now):
            continue
        tables = _as_table(was), _as_table(now)
        if tables[0] is not None and tables[1] is not None:
            yield from _table_changes(tables[0], tables[1], here)
        elif not path and (was is None or now is None):  # a whole chapter: each of its entries came or went
            yield from _table_changes(tables[0] or {}, tables[1] or {}, here)
        else:
            yield Change(join_key(here), was, now)


def _as_table(value: Any) -> Mapping[str, Any] | None:  # noqa: ANN401 - any value of TOML
    """A table, or an array of tables by index; None for a value."""
    if isinstance(value, Mapping):
        return value
    if isinstance(value, list) and value and all(isinstance(entry, Mapping) for entry in value):
        return {str(index): entry for index, entry in enumerate(value)}
    return None


def _plain(value: Any) -> Any:  # noqa: ANN401 - any parameter
    """A parameter of a model as plain data, its spread by name."""
    if value is None or isinstance(value, str | bool | int | float):
        return value
    if isinstance(value, list | tuple):
        return [_plain(entry) for entry in value]
    if {"min", "typ", "max"} <= set(dir(value)):
        return {side: getattr(value, side) for side in ("min", "typ", "max")}
    return {name: _plain(entry) for name, entry in value}  # fields of a validated table


def _findings(old: DesignReport, new: DesignReport) -> Iterator[FindingChange]:
    """Findings that went, then those that came, then those that changed."""
    before, after = ({finding.id: finding for finding in report.findings} for report in (old, new))
    yield from (FindingChange(finding, None) for key, finding in before.items() if key not in after)
    yield from (FindingChange(None, finding) for key, finding in after.items() if key not in before)
    for key, finding in after.items():
        if key in before and _differ(before[key], finding):
            yield FindingChange(before[key], finding)


def _differ(old: Finding, new: Finding) -> bool:
    if severity_of(old) is not severity_of(new) or (old.concession is None) is not (new.concession is None):
        return True
    before, after = ({e.quantity: e for e in finding.evidence} for finding in (old, new))
    return before.keys() != after.keys() or any(_evidence_differs(before[name], after[name]) for name in after)


def _evidence_differs(old: Evidence, new: Evidence) -> bool:
    return has_moved(old.value, new.value) or has_moved(old.limit, new.limit)


def has_moved(old: float | None, new: float | None) -> bool:
    """Whether a figure came, went, or changed by more than `MOVED` of itself.

    Parameters
    ----------
    old, new : float or None
    """
    if old is None or new is None or old == new:
        return old is not new and old != new
    if not (math.isfinite(old) and math.isfinite(new)):
        return True
    return abs(new - old) > MOVED * max(abs(old), abs(new))


def _moved(old: list[Figure], new: list[Figure]) -> Iterator[MovedFigure]:
    before, after = ({(f.name, f.of): f for f in figures} for figures in (old, new))
    for key in dict.fromkeys((*before, *after)):
        was, now = before.get(key), after.get(key)
        values = was.value if was else None, now.value if now else None
        if has_moved(*values):
            unit = next(figure.unit for figure in (now, was) if figure)
            yield MovedFigure(*key, unit, *values)
