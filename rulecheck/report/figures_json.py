"""The numbers of a design as JSON, as ``figures_schema.json`` describes them."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import TYPE_CHECKING, Any

import numpy as np

from rulecheck.report.json import FORMAT, dump, plain, tool

if TYPE_CHECKING:
    from rulecheck.analysis.loops import Loops
    from rulecheck.analysis.operating_points import OperatingPoints
    from rulecheck.analysis.review import Review
    from rulecheck.analysis.transfer import Transfer
    from rulecheck.design.model import Part

Figures = dict[str, Any]


def render(review: Review) -> str:
    """Text of the numbers of one design as JSON.

    Parameters
    ----------
    review : Review
    """
    return dump({"format": FORMAT, "tool": tool(), "designs": [design_figures(review)]})


def design_figures(review: Review) -> Figures:
    """The numbers of one design as plain data: lists over conditions, None where there is no figure.

    Parameters
    ----------
    review : Review
    """
    figures: Figures = plain(arrays(review))
    return figures


def arrays(review: Review) -> Figures:
    """The numbers of one design, arrays over conditions under their names; NaN or None where there is none.

    Parameters
    ----------
    review : Review
    """
    points, design = review.operating_points, review.design
    return {
        "file": str(design.path),
        "title": design.title,
        "points": dict(points.conditions.values),
        **point_figures(points),
        "loops": {ref: _loop(review.loops, ref) for ref, part in design.parts.items() if part.kind == "op-amp"},
        "natural_frequencies": {
            "rightmost": review.loops.rightmost,
            "least_damping": review.loops.least_damping,
        },
        "requirements": {name: _requirement(review, name, transfer) for name, transfer in review.transfer.items()},
    }


def point_figures(points: OperatingPoints) -> Figures:
    """What is known of operating points alone: nets and parts, arrays over conditions.

    Parameters
    ----------
    points : OperatingPoints
    """
    return {
        "converged": points.converged,
        "nets": {name: points.voltage(name) for name in points.design.nets},
        "parts": {ref: _part(points, part) for ref, part in points.design.parts.items()},
    }


def _part(points: OperatingPoints, part: Part) -> Figures:
    own = _FIGURES_OF_KIND.get(part.kind)
    return {**(own(points, part) if own else {}), "temperature": points.temperature(part.ref)}


def _transistor(points: OperatingPoints, part: Part) -> Figures:
    return {
        "ic": points.current(part.ref, "C"),
        "ib": points.current(part.ref, "B"),
        "vbe": points.vbe(part.ref),
        "vce": points.vce(part.ref),
    }


def _two_pins(points: OperatingPoints, part: Part) -> Figures:
    """Current and voltage from the first pin to the second: of a junction from A to K."""
    first, second = part.pins
    return {
        "current": points.current(part.ref, first),
        "voltage": points.voltage(part.pins[first]) - points.voltage(part.pins[second]),
    }


def _resistor(points: OperatingPoints, part: Part) -> Figures:
    return {"current": points.current(part.ref, next(iter(part.pins)))}


def _source(points: OperatingPoints, part: Part) -> Figures:
    """Current out of the first pin, as a source drives it, and voltage across it."""
    figures = _two_pins(points, part)
    return {**figures, "current": -figures["current"]}


def _potentiometer(points: OperatingPoints, part: Part) -> Figures:
    """Currents into one end and into the wiper."""
    return {"current": points.current(part.ref, "END1"), "wiper_current": points.current(part.ref, "WIPER")}


def _amplifier(points: OperatingPoints, part: Part) -> Figures:
    state = points.state(part.ref)
    return {
        # a spare one may have no net on its output
        "output": points.voltage(part.pins["OUT"]) if "OUT" in part.pins else np.full(state.shape, np.nan),
        "current": -points.current(part.ref, "OUT"),
        "state": [word if known else None for word, known in zip(state, points.converged, strict=True)],
    }


_FIGURES_OF_KIND: Mapping[str, Callable[[OperatingPoints, Part], Figures]] = {
    "npn": _transistor,
    "pnp": _transistor,
    "diode": _two_pins,
    "photodiode": _two_pins,
    "resistor": _resistor,
    "potentiometer": _potentiometer,
    "voltage-source": _source,
    "current-source": _source,
    "op-amp": _amplifier,
}


def _loop(loops: Loops, ref: str) -> Figures:
    return {
        "dc_return_ratio": loops.dc_return_ratio(ref),
        "phase_margin": loops.phase_margin(ref),
        "gain_margin": loops.gain_margin(ref),
        "crossover": loops.crossover(ref),
        "modulus_margin": loops.modulus_margin(ref),
    }


def _requirement(review: Review, name: str, transfer: Transfer) -> Figures:
    budget = review.budget[name]
    samples = {} if review.sampling is None else {"samples": _samples(review, name)}
    return {
        "law": transfer.law,
        "error": transfer.error,
        "exponent": dict(transfer.exponent),
        "worst_case": budget.worst_case,
        "rss": budget.rss,
        "budget": [{"parameter": c.parameter, "contribution": c.value} for c in budget.contributions],
        **samples,
    }


def _samples(review: Review, name: str) -> Figures:
    """Statistics of the error over the samples, NaN where nothing was sampled."""
    samples, blank = review.samples.get(name), np.full(review.conditions.size, np.nan)
    if samples is None:
        return dict.fromkeys(("mean", "std", "p0.5", "p99.5", "inside"), blank)
    judged = samples.requirement.has_accuracy
    figures = {
        "mean": samples.mean(),
        "std": samples.std(),
        "p0.5": samples.quantile(0.005),
        "p99.5": samples.quantile(0.995),
        "inside": samples.fraction_inside().value if judged else blank[samples.rows],
    }
    return {word: samples.over_review(values, review.conditions.size) for word, values in figures.items()}
