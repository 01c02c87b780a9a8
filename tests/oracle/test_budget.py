"""The error budget of the program against differences between solutions of the oracle."""

from __future__ import annotations

import copy
import functools
import math
from pathlib import Path

import pytest

from rulecheck.testing import figures_of

from .equations import solve_design
from .reading import nominal, number, read

CASES = Path(__file__).parents[1] / "published" / "cases"
CATALOGUE = (CASES / "case_parts.toml").read_text("utf-8")
LAW = """
[requirements.root]
output = "Y"
law = "scale * (X / one) ** 0.3"
constants = { scale = "1.2 V", one = "1 V" }
accuracy = { reading = "5 %" }
"""
CASE = (CASES / "cube_root.toml").read_text("utf-8")
# the case lets its potentiometer go anywhere; here it is set to a part in four hundred
TEXT = CASE.replace("{ min = 0.1, typ = 0.4, max = 0.9 }", "{ min = 0.399, typ = 0.4, max = 0.401 }") + LAW
POINTS = ({"X": 0.5, "ambient": 298.15}, {"X": 0.05, "ambient": 343.15}, {"X": 5.0, "ambient": 263.15})
# parameter of the budget -> part, key of the oracle, half-spread as the design and its catalogue state it
SHARES = {
    **{f"R{k}.value": (f"R{k}", "value", None) for k in (1, 2, 3, 7, 8, 9)},
    "RV1.position": ("RV1", "position", 0.001),
    **{f"U{k}.offset_voltage": (f"U{k}", "offset", 0.2e-3) for k in range(1, 6)},
    **{f"U{k}.bias_current": (f"U{k}", "bias_current", 80e-12) for k in range(1, 6)},
    **{f"U{k}.offset_current": (f"U{k}", "bias_difference", 20e-12) for k in range(1, 6)},
    "matching.a.Q2": ("Q2", "vbe_offset", 80e-6),
    "matching.b.Q4": ("Q4", "vbe_offset", 80e-6),
}


@functools.cache
def requirement():
    """Figures of the requirement at all points."""
    return figures_of(TEXT, list(POINTS), CATALOGUE)["requirements"]["root"]


def contributions():
    """Contributions by parameter, the same name for parts with and without their table."""
    return {entry["parameter"].removeprefix("parts."): entry["contribution"] for entry in requirement()["budget"]}


@functools.cache
def nominal_solution(k):
    """The oracle's solution at one of the points, from which changed ones start."""
    return solve_design(read(TEXT, CATALOGUE), POINTS[k])


def output(k, changes=(), **point):
    """Output of the oracle at one of the points, with numbers of parts and of the point changed."""
    design = copy.deepcopy(read(TEXT, CATALOGUE))
    for ref, key, value in changes:
        design["parts"][ref][key] = value
    return solve_design(design, {**POINTS[k], **point}, start=nominal_solution(k).x).voltage("Y")


@pytest.mark.parametrize("parameter", SHARES)
def test_contribution(parameter):
    """A contribution is the slope of the output over the parameter times its half-spread."""
    ref, key, half = SHARES[parameter]
    part = read(TEXT, CATALOGUE)["parts"][ref]
    centre = nominal(part.get(key, 0.0))
    half = half or centre * number(part["tolerance"])
    step = 0.02 * half
    found = contributions().get(parameter, [0.0] * len(POINTS))  # what is negligible may be left out
    for k in range(len(POINTS)):
        high, low = (output(k, [(ref, key, centre + sign * step)]) for sign in (1, -1))
        wanted = abs(high - low) / (2 * step) * half
        assert abs(found[k]) == pytest.approx(wanted, rel=2e-3, abs=1e-6 * requirement()["worst_case"][k])


def test_totals():
    """Worst case is the sum of the magnitudes, root-sum-square the root of the sum of their squares."""
    for k in range(len(POINTS)):
        shares = [abs(values[k]) for values in contributions().values()]
        assert requirement()["worst_case"][k] == pytest.approx(sum(shares), rel=1e-4)
        assert requirement()["rss"][k] == pytest.approx(math.hypot(*shares), rel=1e-4)


def test_error_against_the_law():
    """The error is the output less the law, with the nominal values of all parts."""
    for k, point in enumerate(POINTS):
        law = 1.2 * point["X"] ** 0.3
        assert requirement()["law"][k] == pytest.approx(law, rel=1e-12)
        error = nominal_solution(k).voltage("Y") - law
        assert requirement()["error"][k] == pytest.approx(error, abs=2e-6 * law)


def test_local_exponent():
    """The local exponent is the slope of the output over the input, both in logarithms."""
    step = 1e-3
    for k, point in enumerate(POINTS):
        high, low = (output(k, X=point["X"] * math.exp(s)) for s in (step, -step))
        wanted = math.log(high / low) / (2 * step)
        assert requirement()["exponent"]["X"][k] == pytest.approx(wanted, rel=1e-4)
