"""Help for testing rules: small designs from text, and what a rule finds in them."""

from __future__ import annotations

import datetime as dt
import shutil
import tempfile
import weakref
from collections.abc import Collection, Mapping, Sequence
from dataclasses import replace
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rulecheck.findings import Finding, Remedy

if TYPE_CHECKING:
    from rulecheck.api import Conditions, Design, Rule
    from rulecheck.review.registry import Registry
    from rulecheck.review.runner import DesignReview

#: Day of reviews in tests, the same on every day.
ON = dt.date(2026, 1, 1)


def design_from(text: str, catalogue_text: str | None = None) -> Design:
    """Load a design from text.

    Parameters
    ----------
    text : str
        As in a design file.
    catalogue_text : str, optional
        Text of the catalogue that the design names in `catalogues`.

    Raises
    ------
    DesignError
        With all faults of the text.
    """
    from rulecheck.design.load import load_text

    folder = Path(tempfile.mkdtemp(prefix="rulecheck-"))
    try:
        if catalogue_text is not None:
            for name in _catalogues(text):
                (folder / name).parent.mkdir(parents=True, exist_ok=True)
                (folder / name).write_text(catalogue_text, encoding="utf-8")
        design = load_text(text, folder / "design.toml")
    except BaseException:
        shutil.rmtree(folder)
        raise
    # The catalogue is read again when remedies are tried, so it stays as long as the design does.
    weakref.finalize(design, shutil.rmtree, folder, ignore_errors=True)
    return design


def _catalogues(text: str) -> list[str]:
    import tomli

    names = tomli.loads(text).get("catalogues", [])
    if not names:
        raise ValueError("a catalogue is given, but the design names none in catalogues")
    return list(names)


def findings_of(
    design: Design | str, rule: type[Rule] | str | None = None, *, try_remedies: bool = False
) -> list[Finding]:
    """Findings of a design, complete and in order.

    Parameters
    ----------
    design : Design or str
        Or its text.
    rule : type of Rule or str, optional
        The only rule to run, by class or by the name of an installed one; else all that are installed.
    try_remedies : bool
        Whether remedies are tried and marked.

    Raises
    ------
    AssertionError
        A rule or an analysis failed.
    """
    if isinstance(design, str):
        design = design_from(design)
    review = _review(design, rule)
    report = review.report(try_remedies=try_remedies)
    failed = [f"{failure.rule} failed: {failure.message}" for failure in report.failures]
    assert not failed, "\n".join(failed)
    return list(report.findings)


def _review(design: Design, rule: type[Rule] | str | None) -> DesignReview:
    from rulecheck.review.runner import DesignReview, Options

    registry, only = _registry(rule)
    return DesignReview(design, registry, Options(on=ON, only=only))


def _registry(rule: type[Rule] | str | None) -> tuple[Registry, tuple[str, ...]]:
    from rulecheck.review.registry import installed_registry, registry_of

    if rule is None:
        return installed_registry(), ()
    if isinstance(rule, str):
        registry = installed_registry()
        registry.check_names([rule])
        return registry, (rule,)
    return registry_of([rule]), (rule.name,)


def assert_finds(rule: type[Rule] | str, design: Design | str, parts: Collection[str] | None = None) -> Finding:
    """Assert that a rule finds something, and give the first of it.

    Parameters
    ----------
    rule : type of Rule or str
    design : Design or str
    parts : collection of str, optional
        The parts it must name, all of them and no others, in any order.
    """
    found = findings_of(design, rule)
    fitting = [finding for finding in found if parts is None or set(finding.parts) == set(parts)]
    assert fitting, f"nothing found at {sorted(parts or ())}; found is {_words(found)}"
    return fitting[0]


def assert_clean(rule: type[Rule] | str, design: Design | str) -> None:
    """Assert that a rule finds nothing.

    Parameters
    ----------
    rule : type of Rule or str
    design : Design or str
    """
    found = findings_of(design, rule)
    assert not found, f"found is {_words(found)}"


def mended(design: Design, remedy: Remedy) -> Design:
    """The design with the edits of a remedy made.

    Parameters
    ----------
    design : Design
    remedy : Remedy

    Raises
    ------
    RulecheckError
        The edits do not fit, or what they make is no design.
    """
    from rulecheck.design.load import load_text
    from rulecheck.review.remedies import edited

    changed = load_text(edited(design.text, remedy), design.path)
    # The changed design reads its catalogue beside the first one, which must live as long.
    weakref.finalize(changed, _keep, design)
    return changed


def _keep(design: Design) -> None:
    """Hold on to a design."""


def figures_of(text: str, points: Sequence[Mapping[str, float]], catalogue_text: str | None = None) -> dict[str, Any]:
    """The numbers of a design, as ``rulecheck figures --as json`` gives them for one.

    Parameters
    ----------
    text : str
        As in a design file.
    points : sequence of mapping of str to float
        Conditions, in SI; what one does not name is at its typ.
    catalogue_text : str, optional
        Text of the catalogue that the design names.
    """
    from rulecheck.analysis.review import Review
    from rulecheck.report.figures_json import design_figures

    design = design_from(text, catalogue_text)
    return design_figures(Review(design, conditions=_conditions(design, points)))


def fault_figures_of(
    text: str, points: Sequence[Mapping[str, float]], catalogue_text: str | None = None
) -> dict[str, Any]:
    """Operating points as in fault scenarios: input clamps and drive limits in place.

    Parameters
    ----------
    text : str
        As in a design file.
    points : sequence of mapping of str to float
        Conditions, in SI; a supply or reference at 0 is absent, and what hangs on it is off.
    catalogue_text : str, optional
        Text of the catalogue that the design names.

    Returns
    -------
    dict
        ``nets``, ``parts`` and ``converged`` as in `figures_of`, and ``clamps``: currents by name [A],
        ``U1.IN-.hi`` being that of the diode from IN- to V+.
    """
    from rulecheck.analysis.review import Review
    from rulecheck.report.figures_json import point_figures
    from rulecheck.report.json import plain

    design = design_from(text, catalogue_text)
    conditions = _conditions(design, points)
    powers = [n for n, net in design.nets.items() if net.role in ("supply", "reference")]
    off = {n: conditions.values[n] == 0 for n in powers}
    absent = {n: off[n] | off.get(design.nets[n].source or "", False) for n in powers}
    solved = Review(design).solve(replace(conditions, absent=absent), with_clamps=True)
    figures: dict[str, Any] = plain({**point_figures(solved), "clamps": solved.clamp_currents()})
    return figures


def _conditions(design: Design, points: Sequence[Mapping[str, float]]) -> Conditions:
    import numpy as np

    from rulecheck.analysis.conditions import from_points, typical_row

    typical = typical_row(design)
    names = dict.fromkeys(name for point in points for name in point)
    columns = {name: np.array([point.get(name, typical.get(name, np.nan)) for point in points]) for name in names}
    return from_points(design, columns)


def _words(findings: Sequence[Finding]) -> str:
    return "; ".join(f"{finding.rule} {list(finding.parts)}: {finding.message}" for finding in findings) or "nothing"
