"""The example of a team's rule, word for word, installed as a plugin and run on log stages."""

import pytest

from rulecheck.errors import DesignError
from rulecheck.findings import Remedy, Set, Severity
from rulecheck.testing import assert_clean, assert_finds, design_from, findings_of, mended

# A log transistor whose base stands at BIAS while its collector is held at ground.
LOG_STAGE = """\
format = 1

[design]
title = "Log stage"

[nets]
GND = {{ role = "ground" }}
V15P = {{ role = "supply", voltage = "15 V" }}
V15N = {{ role = "supply", voltage = "-15 V" }}
BIAS = {{ role = "reference", voltage = "{bias}" }}
VIN = {{ role = "input", drive = "voltage", range = ["10 mV", "10 V"] }}

[parts]
R1 = {{ kind = "resistor", value = "100 kohm", pins = ["VIN", "SUM"] }}
Q1 = {{ kind = "npn", model = "monolithic-pair-npn", pins = {{ C = "SUM", B = "BIAS", E = "LOG" }} }}

[parts.U1]
kind = "op-amp"
model = "bifet-precision"
pins = {{ "IN+" = "GND", "IN-" = "SUM", OUT = "LOG", "V+" = "V15P", "V-" = "V15N" }}
"""
FAULTY, SOUND = LOG_STAGE.format(bias="-0.12 V"), LOG_STAGE.format(bias="-20 mV")


@pytest.fixture
def example(team):
    """The rule of the example."""
    import collector_strays

    return collector_strays.CollectorStrays


def test_the_example_finds_a_collector_away_from_its_base(example):
    """0.12 V between base and the collector at the virtual ground, against 50 mV."""
    finding = assert_finds(example, FAULTY, parts=["Q1"])
    assert finding.message == "Q1: collector 120 mV from its base"
    assert finding.severity is Severity.MINOR
    assert finding.nets == ("SUM",)
    assert finding.evidence[0].value == pytest.approx(0.12, abs=1e-3)
    assert finding.evidence[0].limit == 0.05
    assert finding.evidence[0].over.shape == (len(finding.evidence[0].over),)
    assert set(finding.conditions) == {"ambient", "VIN", "V15P", "V15N", "BIAS"}
    assert finding.location.key == "parts.Q1"


def test_the_example_finds_nothing_where_collector_and_base_are_near(example):
    """20 mV is within the limit."""
    assert_clean(example, SOUND)


@pytest.mark.parametrize("limit", ['"10 mV"', "0.01"])
def test_its_limit_can_be_set_by_the_design(example, limit):
    """As a quantity or in SI."""
    assert_finds(example, f"{SOUND}[rules.collector-strays]\nlimit = {limit}\n")


def test_a_limit_of_the_wrong_dimension_is_refused(example):
    """Settings are checked by their unit."""
    with pytest.raises(DesignError, match="voltage"):
        findings_of(f'{SOUND}[rules.collector-strays]\nlimit = "10 kohm"\n', example)


def test_installed_as_a_plugin_it_runs_like_the_standard_rules(run, folder):
    """The entry point names its module, and no more is to be done."""
    (folder / "log.toml").write_text(FAULTY)
    status, out, _ = run("check", "log.toml", "--only", "collector-strays")
    assert status == 1
    assert "Q1: collector 120 mV from its base" in out
    assert "collector-base voltage 120 mV (typical); sound is at most 50 mV" in out


def test_a_rule_can_be_named_instead_of_given(team):
    """Tests of a design name the rules that are installed."""
    assert [finding.rule for finding in findings_of(FAULTY, "collector-strays")] == ["collector-strays"]


def test_helpers_say_what_was_found_instead(example):
    """A failing check of a rule shows why."""
    with pytest.raises(AssertionError, match=r"found is collector-strays \['Q1'\]: Q1: collector 120 mV"):
        assert_clean(example, FAULTY)
    with pytest.raises(AssertionError, match=r"nothing found at \['Q2'\]; found is collector-strays \['Q1'\]"):
        assert_finds(example, FAULTY, parts=["Q2"])
    with pytest.raises(AssertionError, match="found is nothing"):
        assert_finds(example, SOUND)


def test_helpers_refuse_a_rule_that_fails(team):
    """A rule that raises has not found the design clean."""
    import team_rules

    with pytest.raises(AssertionError, match="crashing failed: ZeroDivisionError"):
        assert_clean(team_rules.Crashing, SOUND.replace("Log stage", "crash"))


def test_a_remedy_can_be_applied_to_a_design_with_its_catalogue():
    """The changed design reads the same catalogue, however long the first one is kept."""
    text = SOUND.replace("format = 1\n", 'format = 1\ncatalogues = ["own.toml"]\n')
    design = design_from(text, '[models.own-diode]\nkind = "diode"\nsaturation_current = "1 fA"\n')
    changed = mended(design, Remedy("Raise it", [Set("parts.R1.value", "220 kohm")]))
    del design
    assert changed.parts["R1"].value.typ == 220e3
    assert "own-diode" in mended(changed, Remedy("Rename", [Set("design.title", "x")])).models


def test_a_catalogue_can_be_given_as_text():
    """It stands where the design looks for it, as long as the design is in use."""
    text = SOUND.replace("format = 1\n", 'format = 1\ncatalogues = ["deep/own.toml"]\n').replace(
        '"bifet-precision"', '"own"'
    )
    catalogue = (
        '[models.own]\nkind = "op-amp"\nopen_loop_gain = 1e6\ngain_bandwidth = "1 MHz"\n'
        'input_headroom = { low = "1 V", high = "1 V" }\noutput_headroom = { low = "1 V", high = "1 V" }\n'
    )
    design = design_from(text, catalogue)
    folder = design.path.parent
    assert design.parts["U1"].gain_bandwidth.typ == 1e6
    assert (folder / "deep" / "own.toml").is_file()
    del design
    assert not folder.exists()
