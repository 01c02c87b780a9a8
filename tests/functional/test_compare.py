"""``rulecheck compare``: the file, findings and figures of two revisions."""

import re
from pathlib import Path

import pytest

from .conftest import DIVIDER
from .schemas import schema, valid_comparison

EXAMPLES = Path(__file__).parents[2] / "example_designs"
SOUND = EXAMPLES / "sound" / "nozzle_flow.toml"
TIGHT = EXAMPLES / "faulty" / "tight_swing.toml"


@pytest.fixture
def compare(run, folder):
    """Compares two texts; gives the object, which must come with status 0."""

    def compared(old, new):
        (folder / "old.toml").write_text(old)
        (folder / "new.toml").write_text(new)
        status, out, err = run("compare", "old.toml", "new.toml", "--as", "json")
        assert (status, err) == (0, "")
        return valid_comparison(out)

    return compared


def test_a_design_is_the_same_as_itself(run):
    """Nothing changed, came, went or moved."""
    status, out, _ = run("compare", SOUND, SOUND, "--as", "json")
    found = valid_comparison(out)
    assert status == 0
    assert (found["changes"], found["figures"]) == ([], [])
    assert found["findings"] == {"gone": [], "come": [], "changed": []}


def test_values_that_changed_are_named_with_old_and_new(compare):
    """As they are written; a part that came or went is one change."""
    new = DIVIDER.replace('revision = "A"', 'revision = "B"').replace('"1 kohm"', '"2 kohm"')
    new = new.replace(
        "[parts.R1]", '[parts.R3]\nkind = "resistor"\nvalue = "5 kohm"\npins = ["VIN", "GND"]\n[parts.R1]'
    )
    old = DIVIDER + '[parts.R9]\nkind = "resistor"\nvalue = "9 kohm"\npins = ["VOUT", "GND"]\n'
    changes = {c["key"]: (c["old"], c["new"]) for c in compare(old, new)["changes"]}
    part = {"kind": "resistor", "value": "5 kohm", "pins": ["VIN", "GND"]}
    assert changes["design.revision"] == ("A", "B")
    assert changes["parts.R2.value"] == ("1 kohm", "2 kohm")
    assert changes["parts.R3"] == (None, part)
    assert changes["parts.R9"][1] is None
    assert len(changes) == 4


def test_comments_and_order_are_no_change(compare):
    """They say nothing to the circuit."""
    assert compare(DIVIDER, DIVIDER.replace("# from the drawer", "# bought") + "\n")["changes"] == []


def test_a_model_that_changed_in_its_catalogue_is_named(run, folder):
    """The design file is the same, and yet the circuit is not."""
    diode = "[parts.D1]\nkind = 'diode'\nmodel = 'knob'\npins = { A = 'VOUT', K = 'GND' }\n[parts.R1]"
    text = 'catalogues = ["NAME"]\n' + DIVIDER.replace("[parts.R1]", diode)
    model = 'format = 1\n[models.knob]\nkind = "diode"\nsaturation_current = "{} fA"\n'
    for name, amount in (("one", 1), ("two", 2)):
        (folder / f"{name}.cat.toml").write_text(model.format(amount))
        (folder / f"{name}.toml").write_text(text.replace("NAME", f"{name}.cat.toml"))
    status, out, err = run("compare", "one.toml", "two.toml", "--as", "json")
    assert status == 0, err
    changes = {c["key"]: (c["old"], c["new"]) for c in valid_comparison(out)["changes"]}
    old, new = changes["models.knob.saturation_current"]
    assert (old["typ"], new["typ"]) == (1e-15, 2e-15)


def test_findings_and_figures_follow_a_lower_supply(run):
    """3 V less at each rail, and no less than 2.6 V of room at its tightest: a finding comes, and goes on the way back."""
    status, out, _ = run("compare", SOUND, TIGHT, "--as", "json")
    there = valid_comparison(out)
    assert status == 0
    assert [finding["rule"] for finding in there["findings"]["come"]] == ["output-swing"]
    assert there["findings"]["gone"] == []
    room = next(f for f in there["figures"] if (f["figure"], f["of"]) == ("least room of output", "U2B"))
    # The rails' least are 14.25 V and 11.64 V, by their values and tolerances.
    assert room["old"] - room["new"] == pytest.approx(14.25 - 11.64, abs=0.01)
    back = valid_comparison(run("compare", TIGHT, SOUND, "--as", "json")[1])
    assert [f["id"] for f in back["findings"]["gone"]] == [f["id"] for f in there["findings"]["come"]]
    assert back["findings"]["come"] == []


def test_a_finding_that_got_worse_is_changed(run, folder):
    """Its id is the same, its figure another."""
    (folder / "worse.toml").write_text(TIGHT.read_text().replace("12 V", "11.98 V"))
    (folder / "house_parts.toml").write_text((EXAMPLES / "faulty" / "house_parts.toml").read_text())
    status, out, err = run("compare", TIGHT, "worse.toml")
    assert status == 0, err
    assert re.search(r"^changed +output-swing:[0-9a-f]{8}  minor$", out, re.MULTILINE)
    assert re.search(r"distance from the limit: [\d.]+ mV → [\d.]+ mV", out)
    assert "nets.V15P.voltage: " in out
    assert "figures that moved" in out


def test_a_broken_circuit_has_findings_and_no_figures(compare):
    """There is nothing to compute."""
    found = compare(DIVIDER, DIVIDER.replace('pins = ["VOUT", "GND"]', 'pins = ["VOUT", "NOWHERE"]'))
    assert "connectivity" in {finding["rule"] for finding in found["findings"]["come"]}


def test_a_file_that_cannot_be_used_gives_status_two(run, folder):
    """Whichever of the two it is."""
    (folder / "bad.toml").write_text("format = 1\n")
    for pair in (("divider.toml", "bad.toml"), ("bad.toml", "divider.toml"), ("divider.toml", "none.toml")):
        status, out, err = run("compare", *pair)
        assert (status, out) == (2, "")
        assert ("bad.toml" in err) or ("none.toml" in err)


def test_findings_are_described_as_in_a_report():
    """One shape of a finding in all outputs."""
    ours, theirs = schema("comparison_schema.json")["$defs"], schema("report_schema.json")["$defs"]
    shared = set(ours) & set(theirs)
    assert {"finding", "evidence", "remedy", "edit"} <= shared
    assert all(ours[name] == theirs[name] for name in shared)
