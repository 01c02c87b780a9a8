"""``rulecheck check --as sarif``: valid, complete, and its fixes mend the design."""

import codecs
import os
from pathlib import Path
from textwrap import dedent

import pytest

from rulecheck.cli.main import main
from rulecheck.findings import finding_id

from .conftest import DIVIDER
from .sarif_log import fixed, valid_run

ONLY = ("--only", "divider-ratio", "--on", "2026-03-01", "--as", "sarif")
ID = finding_id("divider-ratio", ["R1", "R2"], ["VOUT"], "")
EXAMPLES = Path(__file__).parents[2] / "example_designs" / "faulty"


def test_a_finding_has_rule_level_place_fingerprint_and_figures(run):
    """The place is line and column of the part; the figures are those of the text."""
    status, out, err = run("check", "divider.toml", *ONLY)
    assert (status, err) == (1, "")
    log = valid_run(out)
    (result,) = log["results"]
    rule = log["tool"]["driver"]["rules"][result["ruleIndex"]]
    assert (result["ruleId"], rule["id"], result["level"]) == ("divider-ratio", "divider-ratio", "error")
    (place,) = result["locations"]
    assert place["physicalLocation"] == {
        "artifactLocation": {"uri": "divider.toml", "uriBaseId": "%SRCROOT%"},
        "region": {"startLine": 12, "startColumn": 1},
    }
    assert place["logicalLocations"] == [{"fullyQualifiedName": "parts.R1"}]
    assert list(result["partialFingerprints"].values()) == [ID]
    assert result["message"]["text"] == dedent("""\
        R1 and R2 leave 25% of VIN
        figure: ratio 25 % (typical); sound is at least 50 %
        figure: output 250 mV (at limits)
        figure: unknown no figure (typical)
        when: supply absent
        worst at: VIN 1 V, ambient 25 degC
        effect: the noise of what follows grows as the signal falls""")
    assert result["suppressions"] == []
    assert [remedy["proven"] for remedy in result["properties"]["remedies"]] == [True, False, False]
    assert log["invocations"][0]["executionSuccessful"] is True


def test_every_rule_in_force_is_described(run):
    """With title, description, its whole page, source, and the level of its findings."""
    log = valid_run(run("check", "divider.toml", *ONLY)[1])
    rules = {rule["id"]: rule for rule in log["tool"]["driver"]["rules"]}
    rule = rules["divider-ratio"]
    assert {"matched-pair", "loop-stability", "concession"} <= rules.keys()
    assert rule["shortDescription"]["text"] == "Divider with too low a ratio"
    assert rule["fullDescription"]["text"].startswith("A divider that takes away more than it should.\n\nWhat it costs")
    assert rule["help"]["text"] == run("rules", "divider-ratio")[1]
    assert rule["defaultConfiguration"] == {"level": "error"}
    assert rule["properties"] == {"source": "common practice, no source", "plugin": "plugin team (team 3.0)"}


def test_only_proven_remedies_are_offered_as_fixes_and_change_no_more_than_they_must(run):
    """One figure of one value is replaced."""
    (result,) = valid_run(run("check", "divider.toml", *ONLY)[1])["results"]
    (fix,) = result["fixes"]
    assert fix["description"] == {"text": "Make R1 as large as R2 [proven]"}
    (change,) = fix["artifactChanges"]
    assert change["replacements"] == [
        {
            "deletedRegion": {"startLine": 14, "startColumn": 10, "endLine": 14, "endColumn": 11},
            "insertedContent": {"text": "1"},
        }
    ]


@pytest.mark.parametrize("mark", [b"", codecs.BOM_UTF8])
@pytest.mark.parametrize("end", ["\n", "\r\n"])
def test_the_fix_of_the_file_makes_the_design_clean(run, folder, mark, end):
    """Whatever the line ends, with signs beyond the basic plane before the value, and the rest untouched."""
    inline = 'R1 = { kind = "resistor", package = "µ😀", value = "3 kohm", pins = ["VIN", "VOUT"] } # 😀'
    text = DIVIDER[: DIVIDER.index("[parts.R1]")] + f"[parts]\n{inline}\n" + DIVIDER[DIVIDER.index("[parts.R2]") :]
    text = text.replace("\n", end)
    file = folder / "divider.toml"
    file.write_bytes(mark + text.encode())
    (result,) = valid_run(run("check", file.name, *ONLY)[1])["results"]
    mended = fixed(text, result["fixes"][0])
    assert mended == text.replace("3 kohm", "1 kohm")
    file.write_bytes(mark + mended.encode())
    status, out, _ = run("check", file.name, *ONLY)
    assert (status, valid_run(out)["results"]) == (0, [])


@pytest.mark.parametrize("name", ["bare_rails", "floating_divider", "strays_only", "two_packages"])
def test_the_fixes_of_the_file_mend_an_example(tmp_path, monkeypatch, name):
    """Made one after another, with a check by the standard rules after each, until nothing is left to mend."""
    monkeypatch.chdir(tmp_path)
    for source in (f"{name}.toml", "house_parts.toml"):
        (tmp_path / source).write_bytes((EXAMPLES / source).read_bytes())
    file, made = tmp_path / f"{name}.toml", 0
    while True:
        main(["check", file.name, "--as", "sarif", "--write", "out.sarif"])
        log = valid_run(Path("out.sarif").read_text(encoding="utf-8"))
        assert log["invocations"][0]["executionSuccessful"] is True
        open_ = [result for result in log["results"] if result["level"] != "note"]
        if not open_:
            break
        file.write_bytes(fixed(file.read_bytes().decode(), open_[0]["fixes"][0]).encode())
        made += 1
    assert 1 <= made <= 2


def test_a_concession_is_a_suppression_with_its_reason(run, folder):
    """It stands in the file itself; who agreed, and until when, is beside it."""
    agreed = dedent("""
        [[concessions]]
        rule = "divider-ratio"
        parts = ["R1", "R2"]
        reason = "the source is strong"
        approved_by = "A. Reviewer"
        expires = 2026-06-30
        """)
    (folder / "divider.toml").write_text(DIVIDER + agreed)
    status, out, _ = run("check", "divider.toml", *ONLY)
    (result,) = valid_run(out)["results"]
    assert status == 0
    assert result["suppressions"] == [
        {
            "kind": "inSource",
            "status": "accepted",
            "justification": "the source is strong",
            "properties": {"approved_by": "A. Reviewer", "expires": "2026-06-30"},
        }
    ]
    (folder / "divider.toml").write_text(DIVIDER + agreed.replace("2026-06", "2026-01"))
    log = valid_run(run("check", "divider.toml", "--on", "2026-03-01", "--as", "sarif", "--only", "divider-ratio")[1])
    assert [(result["ruleId"], result["suppressions"]) for result in log["results"]] == [
        ("divider-ratio", []),
        ("concession", []),
    ]
    assert log["tool"]["driver"]["rules"][log["results"][1]["ruleIndex"]]["id"] == "concession"


def test_a_rule_that_fails_makes_the_execution_unsuccessful(run, folder):
    """It is named; the findings of the others are there."""
    (folder / "divider.toml").write_text(DIVIDER.replace('"Divider"', '"crash"'))
    status, out, _ = run("check", "divider.toml", "--only", "crashing", *ONLY)
    log = valid_run(out)
    (invocation,) = log["invocations"]
    assert status == 3
    assert invocation["executionSuccessful"] is False
    (notification,) = invocation["toolExecutionNotifications"]
    assert notification["level"] == "error"
    assert notification["associatedRule"]["id"] == "crashing"
    assert "no such luck" in notification["message"]["text"]
    assert [result["ruleId"] for result in log["results"]] == ["divider-ratio"]


def test_errors_of_a_file_that_cannot_be_used_are_notifications(run, folder):
    """With line and column; the other design is judged."""
    (folder / "wrong.toml").write_text(DIVIDER.replace("1 kohm", "1 kV"))
    status, out, _ = run("check", "wrong.toml", "absent.toml", "divider.toml", *ONLY)
    log = valid_run(out)
    (invocation,) = log["invocations"]
    assert status == 2
    assert invocation["executionSuccessful"] is False
    wrong, absent = invocation["toolConfigurationNotifications"]
    assert wrong["message"]["text"].startswith("parts.R2.value: ")
    assert wrong["locations"][0]["physicalLocation"]["region"] == {"startLine": 19, "startColumn": 9}
    assert "region" not in absent["locations"][0]["physicalLocation"]
    assert [result["ruleId"] for result in log["results"]] == ["divider-ratio"]


def test_a_name_with_blanks_and_beyond_ascii_is_a_uri(run, folder):
    """Percent-encoded by RFC 3986; a file elsewhere has its whole path."""
    name = "kühl 50%/ß: 1.toml"
    (folder / "kühl 50%").mkdir()
    (folder / name).write_text(DIVIDER)
    (result,) = valid_run(run("check", name, *ONLY)[1])["results"]
    uri = "k%C3%BChl%2050%25/%C3%9F%3A%201.toml"
    assert result["locations"][0]["physicalLocation"]["artifactLocation"] == {"uri": uri, "uriBaseId": "%SRCROOT%"}
    os.chdir(folder / "kühl 50%")
    (result,) = valid_run(run("check", "../divider.toml", *ONLY)[1])["results"]
    place = result["locations"][0]["physicalLocation"]["artifactLocation"]
    assert place == {"uri": (folder / "divider.toml").resolve().as_uri()}


def test_the_same_file_and_day_give_the_same_bytes(run):
    """Answers are reproducible, and go whole into a file."""
    first, second = (run("check", "divider.toml", *ONLY) for _ in range(2))
    assert first == second
    run("check", "divider.toml", *ONLY, "--write", "out.sarif")
    assert Path("out.sarif").read_text(encoding="utf-8") == first[1]
