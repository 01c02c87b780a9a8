"""Base currents in the resistance of what drives the bases. The boards, and the sound examples, are invented."""

from pathlib import Path

import pytest
from rulecheck_rules._source_resistance import drive_of_base
from rulecheck_rules.base_loading import BaseLoading

from rulecheck.analysis.review import Review
from rulecheck.api import BOLTZMANN, ELEMENTARY_CHARGE, Severity
from rulecheck.design.load import load_text
from rulecheck.testing import assert_clean, assert_finds, findings_of, mended

SOUND = Path(__file__).parents[2] / "example_designs" / "sound"
DIVIDERS = {
    "expander": [("R3", "100 ohm", 100), ("R4", "15.8 kohm", 15.8e3), ("R5", "1 kohm", 1e3)],
    "nozzle_flow": [("R4", "200 ohm", 200), ("R5", "200 ohm", 200)],
}
NARROW = ('range = ["0.1 V", "10 V"]', 'range = ["0.95 V", "1.05 V"]')
RESISTOR = (
    'R9{} = {{ kind = "resistor", value = "100 kohm", tempco = "0 ppm/K", tolerance = "1 %", pins = ["{}", "{}"] }}'
)
SECOND = 'pins = { C = "S2", B = "GND", E = "T1" }'
FIRST = 'pins = { C = "S1", B = "L", E = "T1" }'


def example(name, factor=1.0):
    """A sound example with the divider before a base multiplied."""
    path = SOUND / f"{name}.toml"
    text = path.read_text("utf-8")
    for ref, old, ohm in DIVIDERS.get(name, ()):
        starts = (f'{ref} = {{ kind = "resistor", value = ', f'[parts.{ref}]\nkind = "resistor"\nvalue = ')
        (start,) = (s for s in starts if f'{s}"{old}"' in text)
        text = text.replace(f'{start}"{old}"', f'{start}"{ohm * factor:g} ohm"')
    return load_text(text, path)


def loaded(board, *changes, both=False):
    """The log stage with 100 kohm before the base of Q2, or of both."""
    parts = RESISTOR.format(0, "GND", "B2") + "\n" + (RESISTOR.format(1, "L", "B1") + "\n" if both else "")
    bases = [(SECOND, SECOND.replace("GND", "B2"))] + ([(FIRST, FIRST.replace('"L"', '"B1"'))] if both else [])
    return board("log_ratio", ("[parts]\n", f"[parts]\n{parts}"), *bases, *changes)


@pytest.mark.parametrize("name", ["expander", "nozzle_flow", "ion_gauge", "light_meter"])
def test_sound_dividers(name):
    """Dividers of a kilohm and less before bases are clean."""
    assert_clean(BaseLoading, example(name))


@pytest.mark.parametrize("name", ["log_ratio", "root", "light_ratio", "strip"])
def test_bases_that_are_held(board, name):
    """Bases on ground, on amplifiers' outputs, or tied to their collectors load nothing."""
    assert_clean(BaseLoading, board(name))


@pytest.mark.parametrize(("name", "part"), [("expander", "Q2"), ("nozzle_flow", "Q4")])
def test_high_dividers(name, part):
    """Ten times the resistance costs more than a share."""
    finding = assert_finds(BaseLoading, example(name, 10), {part})
    assert finding.severity is Severity.MINOR
    assert "of reading" in finding.consequence


def test_serious():
    """Forty times the resistance costs more than all that is allowed."""
    assert assert_finds(BaseLoading, example("expander", 40), {"Q2"}).severity is Severity.MAJOR


def test_cost_by_hand():
    """Base current times divider over kT/q is the share of reading, of a quarter of what is allowed (2 %, 5 mV)."""
    design = example("expander", 10)
    finding, review = assert_finds(BaseLoading, design, {"Q2"}), Review(design)
    points, ambient = review.operating_points, finding.conditions["ambient"]
    names = ("ambient", "VIN", "V15P", "V15N")
    at = next(i for i in range(review.conditions.size)
              if all(review.conditions.at(i)[n] == finding.conditions[n] for n in names))  # fmt: skip
    lower = 10e3 * (1 + 3560e-6 * (points.temperature("R5")[at] - 298.15))
    ohm = 1 / (1 / lower + 1 / 159e3)
    drop = points.current("Q2", "B")[at] * ohm
    share = 0.25 * (0.02 + 5e-3 / 10)
    expected = drop / (BOLTZMANN * ambient / ELEMENTARY_CHARGE) / share
    assert finding.evidence[0].value == pytest.approx(expected, rel=0.03)


def test_resistance_that_drives_a_base():
    """A divider drives with its two sides in parallel, links of the chain included."""
    drive = drive_of_base(Review(example("expander")), "Q2")
    assert drive.ohm == pytest.approx(1 / (1 / 1e3 + 1 / 15.9e3))
    assert drive.resistors == ("R3", "R4", "R5")
    assert drive_of_base(Review(example("expander")), "Q1").ohm == 0


@pytest.mark.parametrize("name", list(DIVIDERS))
def test_remedies_cure(cures, name):
    """A tenth of the resistance, and a follower, each bring nothing new, by all rules."""
    left = cures(example(name, 10), BaseLoading)
    for words in ("lower resistance", "a follower"):
        assert [after for title, after in left.items() if title.startswith(words)] == [[]]


def test_the_other_base_cancels(board):
    """At equal currents the same resistance before both bases costs nothing that counts."""
    finding = assert_finds(BaseLoading, loaded(board, NARROW), {"Q2"})
    assert finding.severity is Severity.MAJOR  # 30 nA in 100 kohm, 3 mV of 59 mV a decade
    assert_clean(BaseLoading, loaded(board, NARROW, both=True))


def test_equal_resistances_cure(board):
    """They are proposed where they cancel, and cure; over two decades of current they are not."""
    design = loaded(board, NARROW)
    (remedy,) = (r for r in assert_finds(BaseLoading, design).remedies if r.title.startswith("equal"))
    assert_clean(BaseLoading, mended(design, remedy))
    wide = findings_of(loaded(board), BaseLoading)[0]
    assert not [r for r in wide.remedies if r.title.startswith("equal")]
