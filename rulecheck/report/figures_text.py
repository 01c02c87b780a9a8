"""The numbers of a design as text: the span of each figure over the conditions, and where the worst are."""

from __future__ import annotations

from collections import Counter
from collections.abc import Iterator, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from rulecheck.report.figures_json import arrays
from rulecheck.report.layout import Layout, conditions_in_words, quantity, table
from rulecheck.review.outcome import condition_units

if TYPE_CHECKING:
    from rulecheck.analysis.review import Review
    from rulecheck.analysis.samples import Share

UNITS = {
    "ic": "A", "ib": "A", "vbe": "V", "vce": "V", "current": "A", "wiper_current": "A", "voltage": "V",
    "output": "V", "temperature": "degC", "phase_margin": "deg", "crossover": "Hz", "law": "V", "error": "V",
    "rss": "V", "worst_case": "V", "mean": "V", "std": "V", "p0.5": "V", "p99.5": "V", "inside": "%",
}  # fmt: skip
#: Units that carry no prefix and are shown as they stand.
PLAIN_UNITS = {"gain_margin": "dB", "rightmost": "1/s"}


def render(review: Review, width: int = 80, color: bool = False) -> str:
    """Text of the numbers.

    Parameters
    ----------
    review : Review
    width : int
        Of the lines, in characters.
    color : bool
        Whether to use colour.
    """
    layout = Layout(width, color)
    figures, units = arrays(review), condition_units(review.design)
    lines = layout.wrapped(" · ".join(words for words in (figures["file"], figures["title"]) if words))
    lines += layout.wrapped(_convergence(review))
    for line in review.operating_points.failures()[:3]:
        lines += layout.wrapped(line, 2)
    lines += _section("conditions", figures["points"], layout, units)
    lines += _section("nets", figures["nets"], layout, dict.fromkeys(figures["nets"], "V"))
    for title in ("parts", "loops", "requirements"):
        lines += _section(title, _flat(figures[title]), layout)
    lines += _section("natural frequencies", figures["natural_frequencies"], layout)
    lines += _worst(review, layout, units)
    lines += _budgets(review, layout, units)
    lines += _samples(review, layout, units)
    return "\n".join(lines) + "\n"


def _convergence(review: Review) -> str:
    converged = review.operating_points.converged
    count = f"{converged.size} condition{'s' if converged.size != 1 else ''}"
    return f"{count}, all solved" if converged.all() else f"{count}, {int((~converged).sum())} without a solution"


def _flat(figures: Mapping[str, Any], above: str = "") -> dict[str, Any]:
    """Figures of a nested table, named by words in a row."""
    flat: dict[str, Any] = {}
    for name, value in figures.items():
        words = f"{above} {name}".strip()
        if isinstance(value, Mapping):
            flat |= _flat(value, words)
        elif name != "budget":
            flat[words] = value
    return flat


def _section(
    title: str, figures: Mapping[str, Any], layout: Layout, units: Mapping[str, str] | None = None
) -> Iterator[str]:
    """A table of figures, their least and greatest values side by side."""
    if figures:
        rows = [_row(name, array, (units or {}).get(name)) for name, array in figures.items()]
        single = all(row[2] == "" for row in rows)
        head = (title, "value" if single else "least", "" if single else "greatest")
        first, *rest = table([head, *rows], indent=0)
        yield from ["", layout.styled(first, "bold"), *rest]


def _row(name: str, array: Any, unit: str | None) -> tuple[str, str, str]:  # noqa: ANN401 - an array of any kind
    if np.asarray(array).dtype.kind not in "fiu":
        counts = Counter(str(state) for state in array if state is not None)
        return name, ", ".join(f"{state} {count}" for state, count in counts.items()), ""
    known = array[np.isfinite(array)]
    if not known.size:
        return name, "no figure", ""
    least, greatest = (_shown(name, float(value), unit) for value in (known.min(), known.max()))
    return name, least, "" if least == greatest else greatest


def _shown(name: str, value: float, unit: str | None) -> str:
    kind = name.rpartition(" ")[2]
    if kind in PLAIN_UNITS:
        return f"{value:.4g} {PLAIN_UNITS[kind]}"
    return quantity(value, unit or UNITS.get(kind, "1"))


def _worst(review: Review, layout: Layout, units: Mapping[str, str]) -> Iterator[str]:
    """Where errors are largest against what is allowed, and where the circuit is least damped."""
    rows = [
        (f"{name}: error", np.where(transfer.judged, np.abs(transfer.error), np.nan), "V", np.nanargmax)
        for name, transfer in review.transfer.items()
    ]
    rows.append(("damping ratio", review.loops.least_damping, "1", np.nanargmin))
    for words, array, unit, pick in rows:
        if np.isfinite(array).any():
            index = int(pick(array))
            where = conditions_in_words(review.operating_points.conditions.at(index), units)
            yield ""
            yield from layout.wrapped(f"worst {words} {quantity(float(array[index]), unit)} at {where}")


MOST_CONTRIBUTIONS = 12


def _budgets(review: Review, layout: Layout, units: Mapping[str, str]) -> Iterator[str]:
    """Where each requirement's error comes from, at its worst condition, the largest contributions first."""
    for name, budget in review.budget.items():
        if budget.worst is None:
            continue
        at = budget.worst
        shown = budget.shown()
        rows = [
            (c.parameter, quantity(float(c.value[at]), "V"), quantity(float(budget.of_reading(c.value)[at]), "%"))
            for c in shown[:MOST_CONTRIBUTIONS]
        ]
        totals = (("worst case", budget.worst_case), ("root-sum-square", budget.rss), ("allowed", budget.allowed))
        rows += [(w, quantity(float(v[at]), "V"), quantity(float(budget.of_reading(v)[at]), "%")) for w, v in totals]
        head = (f"budget of {name}", "error", "of reading")
        first, *rest = table([head, *rows], indent=0)
        left = f", {len(shown) - MOST_CONTRIBUTIONS} smaller ones left out" if len(shown) > MOST_CONTRIBUTIONS else ""
        where = conditions_in_words(review.operating_points.conditions.at(at), units)
        yield from ["", layout.styled(first, "bold"), *rest]
        yield from layout.wrapped(f"at {where}{left}")


def _samples(review: Review, layout: Layout, units: Mapping[str, str]) -> Iterator[str]:
    """How many samples meet each requirement's accuracy, at the worst condition and everywhere, with confidence."""
    for name, samples in review.samples.items():
        words = f"samples of {name}: {samples.count} drawn with seed {samples.seed}"
        if samples.failed.any():
            words += f", at most {samples.failed.max()} of a condition without a solution"
        if samples.requirement.has_accuracy:
            inside = samples.fraction_inside()
            worst = int(np.argmin(inside.value))
            words += f"; {_share(samples.fraction_of_units())} inside everywhere"
            if inside.value[worst] < 1:
                where = conditions_in_words(samples.conditions.at(worst), units)
                words += f", {_share(inside, worst)} at {where}"
        yield ""
        yield from layout.wrapped(f"{words} (95 % confidence)" if samples.requirement.has_accuracy else words)


def _share(share: Share, index: int | tuple[()] = ()) -> str:
    value, low, high = (float(figure[index]) for figure in (share.value, share.low, share.high))
    return f"{quantity(value, '%')} ({quantity(low, '%')} to {quantity(high, '%')})"
