"""Preferred values, letter codes and prefixes of the standards."""

from __future__ import annotations

import eseries
import pytest

from rulecheck.series import nearest, values
from rulecheck.units import parse_quantity

E24 = [10, 11, 12, 13, 15, 16, 18, 20, 22, 24, 27, 30, 33, 36, 39, 43, 47, 51, 56, 62, 68, 75, 82, 91]


def mantissas(series):
    """Values of a series within one decade, three digits as whole numbers."""
    return [round(100 * value) for value in values(series)]


@pytest.mark.parametrize(
    ("series", "published"),
    [("E6", [10, 15, 22, 33, 47, 68]), ("E12", E24[::2]), ("E24", E24)],
)
def test_coarse_series(series, published):
    """E6, E12 and E24 are the agreed lists of IEC 60063."""
    assert mantissas(series) == [10 * value for value in published]


def test_exceptions_of_e24():
    """Exactly eight values of E24 are not the rounded power of ten (IEC 60063, recomputed)."""
    rounded = [round(10 * 10 ** (k / 24)) for k in range(24)]
    different = [value for value, power in zip(E24, rounded, strict=True) if value != power]
    assert different == [27, 30, 33, 36, 39, 43, 47, 82]
    assert [value for value in mantissas("E24") if value // 10 not in rounded] == [10 * v for v in different]


@pytest.mark.parametrize(("series", "count"), [("E48", 48), ("E96", 96)])
def test_fine_series_follow_the_rule(series, count):
    """E48 and E96 are ``10^(i/N)`` to three digits without exception (IEC 60063)."""
    assert mantissas(series) == [round(100 * 10 ** (k / count)) for k in range(count)]


def test_the_exception_of_e192():
    """E192 has 9.20 where rounding gives 9.19, and no other exception (from memory, index 185)."""
    rounded = [round(100 * 10 ** (k / 192)) for k in range(192)]
    different = [k for k, value in enumerate(mantissas("E192")) if value != rounded[k]]
    assert (different, mantissas("E192")[185], rounded[185]) == ([185], 920, 919)


@pytest.mark.parametrize("series", ["E3", "E6", "E12", "E24", "E48", "E96", "E192"])
def test_series_against_a_library(series):
    """Every series is that of the eseries package."""
    assert mantissas(series) == [
        round(10 * value) if value < 100 else value
        for value in (v if v >= 100 else 10 * v for v in eseries.series(getattr(eseries, series)))
    ]


@pytest.mark.parametrize(("exact", "standard"), [(196.0, 196.0), (98.0, 97.6), (65.333, 64.9), (49.0, 48.7)])
def test_nearest_standard_resistor(exact, standard):
    """196 ohm/(m - 1) falls on 196, 97.6, 64.9 and 48.7 ohm of E96 (AD538 data sheet Rev. C, Fig. 15)."""
    assert nearest(exact, "E96") == pytest.approx(standard, rel=1e-9)


@pytest.mark.parametrize(
    ("code", "ohms"),
    [
        ("R47", 0.47), ("4R7", 4.7), ("470R", 470.0), ("4K7", 4.7e3), ("47K", 47e3), ("47K3", 47.3e3),
        ("470K", 470e3), ("4M7", 4.7e6),
    ],
)  # fmt: skip
def test_letter_codes_of_resistors(code, ohms):
    """The letter stands for the decimal point (IEC 60062)."""
    assert parse_quantity(code, "ohm", "R") == pytest.approx(ohms, rel=1e-12)


@pytest.mark.parametrize(
    ("code", "farads"),
    [
        ("2n2", 2.2e-9), ("p33", 0.33e-12), ("4p7", 4.7e-12), ("n47", 0.47e-9), ("4n7", 4.7e-9),
        ("4µ7", 4.7e-6), ("m47", 0.47e-3),
    ],
)  # fmt: skip
def test_letter_codes_of_capacitors(code, farads):
    """The letter stands for the decimal point (IEC 60062; 2n2 seen, the others from memory)."""
    assert parse_quantity(code, "F", "F") == pytest.approx(farads, rel=1e-12)


@pytest.mark.parametrize(
    ("prefix", "factor"),
    [
        ("f", 1e-15), ("p", 1e-12), ("n", 1e-9), ("u", 1e-6), ("µ", 1e-6), ("m", 1e-3), ("k", 1e3),
        ("M", 1e6), ("G", 1e9), ("T", 1e12),
    ],
)  # fmt: skip
def test_prefixes(prefix, factor):
    """SI prefixes scale by their power of ten (SI brochure, from memory)."""
    assert parse_quantity(f"2.5 {prefix}V", "V") == pytest.approx(2.5 * factor, rel=1e-12)
