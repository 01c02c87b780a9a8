"""Two revisions of a design side by side as text."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

from rulecheck.design.edit import to_toml
from rulecheck.report.layout import Layout, quantity, table
from rulecheck.review.comparing import has_moved
from rulecheck.review.completion import severity_of

if TYPE_CHECKING:
    from rulecheck.findings import DesignReport, Finding
    from rulecheck.review.comparing import Change, Comparison, FindingChange

STYLES = {"gone": "green", "come": "red", "changed": "yellow"}


def render(comparison: Comparison, width: int = 80, color: bool = False) -> str:
    """Text of a comparison.

    Parameters
    ----------
    comparison : Comparison
    width : int
        Of the lines, in characters.
    color : bool
        Whether to use colour.
    """
    layout = Layout(width, color)
    lines = [layout.styled(line, "bold") for line in layout.wrapped(_heading(comparison))]
    lines += _changes(comparison, layout)
    lines += _findings(comparison, layout)
    lines += _figures(comparison, layout)
    lines += _failures(comparison, layout)
    return "\n".join(lines) + "\n"


def _heading(comparison: Comparison) -> str:
    def words(design: DesignReport) -> str:
        return f"{design.file} (revision {design.revision})" if design.revision else design.file

    return f"{words(comparison.old)} → {words(comparison.new)}"


def _section(title: str, body: list[str], nothing: str, layout: Layout) -> Iterator[str]:
    yield ""
    if body:
        yield layout.styled(title, "bold")
        yield from body
    else:
        yield nothing


def _changes(comparison: Comparison, layout: Layout) -> Iterator[str]:
    body = [line for change in comparison.changes for line in layout.wrapped(_change(change), 2)]
    yield from _section("in the file", body, "nothing changed in the file", layout)


def _change(change: Change) -> str:
    if change.old is None:
        return f"+ {change.key} = {_value(change.new)}"
    if change.new is None:
        return f"- {change.key} = {_value(change.old)}"
    return f"{change.key}: {_value(change.old)} → {_value(change.new)}"


def _value(value: Any) -> str:  # noqa: ANN401 - any value of TOML
    if isinstance(value, Mapping):
        return "{ " + ", ".join(f"{key} = {_value(entry)}" for key, entry in value.items()) + " }"
    return to_toml(value)


def _findings(comparison: Comparison, layout: Layout) -> Iterator[str]:
    body = [line for change in comparison.findings for line in _finding(change, layout)]
    yield from _section("findings", body, "findings are the same", layout)


def _finding(change: FindingChange, layout: Layout) -> Iterator[str]:
    finding = change.latest
    severity = severity_of(finding).label
    if change.old is not None and severity_of(change.old).label != severity:
        severity = f"{severity_of(change.old).label} → {severity}"
    conceded = ", conceded" if finding.concession else ""
    yield from layout.labelled(change.kind, f"{finding.id}  {severity}{conceded}", STYLES[change.kind])
    yield from layout.wrapped(finding.message, 12)
    if change.old is not None and change.new is not None:
        for words in _moved_evidence(change.old, change.new):
            yield from layout.wrapped(words, 12)


def _moved_evidence(old: Finding, new: Finding) -> Iterator[str]:
    before = {evidence.quantity: evidence for evidence in old.evidence}
    for evidence in new.evidence:
        was = before.get(evidence.quantity)
        if was is not None and has_moved(was.value, evidence.value):
            now = quantity(evidence.value, evidence.unit)
            yield f"{evidence.quantity}: {quantity(was.value, was.unit)} → {now}"


def _figures(comparison: Comparison, layout: Layout) -> Iterator[str]:
    rows = [
        (f"{f.of} {f.name}".strip(), *("none" if v is None else quantity(v, f.unit) for v in (f.old, f.new)))
        for f in comparison.figures
    ]
    body = table([("", "old", "new"), *rows]) if rows else []
    yield from _section("figures that moved", body, "no figure moved", layout)


def _failures(comparison: Comparison, layout: Layout) -> Iterator[str]:
    for design in (comparison.old, comparison.new):
        for failure in design.failures:
            yield ""
            yield from layout.labelled("failed", f"{design.file}: {failure.rule}: {failure.message}", "red")
        if design.not_run:
            yield ""
            words = f"{design.file}: the circuit is broken, see {design.not_run[0].because}; it has no figures"
            yield from layout.labelled("not run", words, "yellow")
