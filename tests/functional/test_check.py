"""``rulecheck check``: what it prints, where, and with which exit status."""

import datetime as dt
import json
import os
import pty
import re
import signal
import subprocess
import sys
from textwrap import dedent

import pytest

from rulecheck.findings import finding_id

from .conftest import DIVIDER
from .schemas import valid_report

ONLY = ("--only", "divider-ratio", "--on", "2026-03-01")
ID = finding_id("divider-ratio", ["R1", "R2"], ["VOUT"], "")
SOUND = DIVIDER.replace("3 kohm", "910 ohm")
PROGRAM = [sys.executable, "-c", "import sys; from rulecheck.cli.main import main; sys.exit(main())"]


def titled(title):
    """The divider with another title, on which the team's rules act."""
    return DIVIDER.replace('"Divider"', f'"{title}"')


def test_the_text_says_what_where_how_bad_and_how_to_mend(run):
    """The whole text at 80 columns, as it stands in a pipe."""
    status, out, err = run("check", "divider.toml", *ONLY)
    assert status == 1
    assert err == ""
    assert out == dedent(f"""\
        divider.toml · Divider · revision A

        major       divider-ratio  R1, R2
                    R1 and R2 leave 25% of VIN
          figure    ratio 25 % (typical); sound is at least 50 %
          figure    output 250 mV (at limits)
          figure    unknown no figure (typical)
          when      supply absent
          worst at  VIN 1 V, ambient 25 degC
          effect    the noise of what follows grows as the signal falls
          mend a    Make R1 as large as R2 [proven]
          mend b    Make R1 a little smaller [tried, not proven]
          mend c    Ask for a larger signal [by hand]
                    divider.toml:12:1                             {ID}

        1 design: 1 major, 0 minor, 0 observations. As of 2026-03-01.

        A design aid, not an approval: figures rest on the catalogue data; bench-verify.
        Circuits that can hurt someone need independent review under their standards;
        mains-derived and stored-energy ones, licensed people under local codes.
        """)


def test_the_json_has_the_shape_of_the_schema_and_the_same_finding(run):
    """Every field of a finding, against the shipped schema."""
    status, out, _ = run("check", "divider.toml", *ONLY, "--as", "json")
    assert status == 1
    report = valid_report(out)
    assert report["on"] == "2026-03-01"
    assert report["summary"] == {"major": 1, "minor": 0, "observation": 0, "conceded": 0}
    (design,) = report["designs"]
    assert (design["file"], design["title"], design["revision"]) == ("divider.toml", "Divider", "A")
    assert design["outcome"] == "findings"
    assert design["findings"] == [
        {
            "id": ID,
            "rule": "divider-ratio",
            "severity": "major",
            "message": "R1 and R2 leave 25% of VIN",
            "consequence": "the noise of what follows grows as the signal falls",
            "parts": ["R1", "R2"],
            "nets": ["VOUT"],
            "at": {"file": "divider.toml", "line": 12, "column": 1, "key": "parts.R1"},
            "conditions": {"VIN": 1.0, "ambient": 298.15},
            "scenario": "supply absent",
            "evidence": [
                {"quantity": "ratio", "value": 0.25, "unit": "%", "limit": 0.5, "relation": ">="},
                {"quantity": "output", "value": 0.25, "unit": "V", "limit": None, "relation": "<="},
                {"quantity": "unknown", "value": None, "unit": "V", "limit": None, "relation": "<="},
            ],
            "remedies": [
                {
                    "id": "a",
                    "title": "Make R1 as large as R2",
                    "proven": True,
                    "edits": [{"set": "parts.R1.value", "to": "1 kohm"}],
                },
                {
                    "id": "b",
                    "title": "Make R1 a little smaller",
                    "proven": False,
                    "edits": [{"set": "parts.R1.value", "to": "2.9 kohm"}],
                },
                {"id": "c", "title": "Ask for a larger signal", "proven": False, "edits": []},
            ],
            "concession": None,
        }
    ]


def test_the_same_file_and_day_give_the_same_bytes(run):
    """Answers are reproducible."""
    first, second = (run("check", "divider.toml", *ONLY, "--as", "json") for _ in range(2))
    assert first == second


def test_a_sound_design_is_clean(run, folder):
    """Nothing found: exit status 0, and the text says how much was tried."""
    (folder / "divider.toml").write_text(SOUND)
    status, out, _ = run("check", "divider.toml", *ONLY)
    assert status == 0
    assert re.search(r"clean +nothing found by \d+ rule", out)
    _, out, _ = run("check", "divider.toml", *ONLY, "--as", "json")
    assert valid_report(out)["designs"][0]["outcome"] == "clean"


@pytest.mark.parametrize(
    ("title", "rule", "fail_on", "status"),
    [
        ("Divider", "divider-ratio", "major", 1),
        ("curious", "crashing", "major", 0),
        ("curious", "crashing", "minor", 0),
        ("curious", "crashing", "observation", 1),
    ],
)
def test_the_severity_that_fails_can_be_chosen(run, folder, title, rule, fail_on, status):
    """Milder findings are reported and leave the status at 0."""
    (folder / "divider.toml").write_text(titled(title))
    found, out, _ = run("check", "divider.toml", "--only", rule, "--fail-on", fail_on)
    assert found == status
    assert rule in out


def test_a_concession_is_shown_and_leaves_the_status_at_zero(run, folder):
    """By whom, until when and why; counted apart; open again when it has expired."""
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
    assert status == 0
    assert "  agreed    A. Reviewer, until 2026-06-30, the source is strong" in out
    assert "0 observations, 1 conceded" in out
    _, out, _ = run("check", "divider.toml", *ONLY, "--as", "json")
    (finding,) = valid_report(out)["designs"][0]["findings"]
    assert finding["concession"] == {
        "reason": "the source is strong", "approved_by": "A. Reviewer", "expires": "2026-06-30",
    }  # fmt: skip
    status, out, _ = run("check", "divider.toml", "--only", "divider-ratio", "--on", "2026-07-01")
    assert status == 1
    assert "expired on 2026-06-30" in out


def test_without_a_day_it_is_today(run):
    """The output records it."""
    _, out, _ = run("check", "divider.toml", "--only", "divider-ratio", "--as", "json")
    assert valid_report(out)["on"] == dt.date.today().isoformat()


def test_a_rule_that_fails_gives_status_three_and_the_report_says_which(run, folder):
    """The other rules' findings are there."""
    (folder / "divider.toml").write_text(titled("crash"))
    arguments = ("check", "divider.toml", *ONLY, "--only", "crashing")
    status, out, _ = run(*arguments)
    assert status == 3
    assert re.search(r"failed +crashing: ZeroDivisionError: no such luck \(team_rules\.py, line \d+\)", out)
    assert "divider-ratio" in out
    assert "1 incomplete, findings are missing" in out
    _, out, _ = run(*arguments, "--as", "json")
    (design,) = valid_report(out)["designs"]
    assert design["outcome"] == "incomplete"
    assert design["failures"][0]["rule"] == "crashing"


def test_a_plugin_that_cannot_be_imported_gives_status_three(run, team):
    """Its rules' findings are missing."""
    (team / "team_rules.py").write_text("import no_such_thing\n")
    status, out, _ = run("check", "divider.toml")
    assert status == 3
    assert "no_such_thing" in out


def test_a_design_that_cannot_be_read_gives_status_two_and_all_its_errors(run, folder):
    """File, line, column, key and what is expected, for each; other designs are reviewed."""
    (folder / "other.toml").write_text(DIVIDER.replace("3 kohm", "3 kHz").replace('"resistor"', '"resitor"', 1))
    arguments = ("check", "other.toml", "divider.toml", *ONLY)
    status, out, _ = run(*arguments)
    assert status == 2
    assert "error       other.toml:13:8  parts.R1.kind" in out
    assert ID in out
    _, out, _ = run(*arguments, "--as", "json")
    unreadable, reviewed = valid_report(out)["designs"]
    assert unreadable["outcome"] == "unreadable"
    assert unreadable["errors"][0]["line"] == 13
    assert reviewed["outcome"] == "findings"


def test_settings_that_will_not_do_give_status_two(run, folder):
    """A misspelt setting is an error of the file."""
    (folder / "divider.toml").write_text(DIVIDER + '[rules.divider-ratio]\nrato = "60 %"\n')
    status, out, _ = run("check", "divider.toml", *ONLY)
    assert status == 2
    assert "did you mean 'ratio'" in out


@pytest.mark.parametrize("option", ["--only", "--without"])
def test_an_unknown_rule_gives_status_two_with_the_nearest(run, option):
    """Before anything is reviewed."""
    status, out, err = run("check", "divider.toml", option, "divider-rato")
    assert (status, out) == (2, "")
    assert "did you mean 'divider-ratio'" in err


def test_a_rule_can_be_left_out(run):
    """Its findings are not there, and those of the others are."""
    _, out, _ = run("check", "divider.toml", "--without", "divider-ratio", "--as", "json")
    rules = {finding["rule"] for finding in valid_report(out)["designs"][0]["findings"]}
    assert "divider-ratio" not in rules
    assert "solving-divider" in rules


def test_a_missing_file_gives_status_two(run):
    """It is an error in the report, so that the other files are reviewed."""
    status, out, _ = run("check", "nowhere.toml", "divider.toml", *ONLY)
    assert status == 2
    assert "nowhere.toml" in out
    assert ID in out


@pytest.mark.parametrize("day", ["2026-13-01", "tomorrow", "01.03.2026"])
def test_a_day_that_is_none_gives_status_two(run, day):
    """The message shows how a date is written."""
    status, _, err = run("check", "divider.toml", "--on", day)
    assert status == 2
    assert "2026-12-31" in err


@pytest.fixture
def tree(folder):
    """Designs in folders, among other TOML files."""
    for name in ("boards/b.toml", "boards/deep/a.toml", "boards/.hidden/c.toml"):
        (folder / name).parent.mkdir(parents=True, exist_ok=True)
        (folder / name).write_text(SOUND)
    (folder / "boards" / "parts.toml").write_text('[models.x]\nkind = "npn"\n')
    (folder / "boards" / "notes.txt").write_text("format = 1")
    return folder / "boards"


def files_of(out):
    """Files in the order of a JSON report."""
    return [design["file"] for design in valid_report(out)["designs"]]


def test_a_folder_is_searched_to_all_depths(run, tree):
    """Designs in order, hidden folders left out; other TOML files are passed over with a line on stderr."""
    status, out, err = run("check", "boards", *ONLY, "--as", "json")
    assert status == 0
    assert files_of(out) == ["boards/b.toml", "boards/deep/a.toml"]
    assert err == "boards/parts.toml: passed over, it is a catalogue of models\n"


def test_a_file_in_a_folder_and_by_name_is_reviewed_once(run, tree):
    """Where it was named first."""
    _, out, _ = run("check", "boards/deep/a.toml", "boards", *ONLY, "--as", "json")
    assert files_of(out) == ["boards/deep/a.toml", "boards/b.toml"]


@pytest.mark.parametrize("text", ['[design]\ntitle = "x"\n', "format = \n", "format = 2\n"])
def test_any_other_fault_of_a_file_in_a_folder_is_an_error(run, tree, text):
    """A half-written design, or what is no TOML, is not passed over."""
    (tree / "half.toml").write_text(text)
    status, out, err = run("check", "boards", *ONLY, "--as", "json")
    (half,) = [design for design in valid_report(out)["designs"] if design["file"] == "boards/half.toml"]
    assert status == 2
    assert half["outcome"] == "unreadable"
    assert "half.toml" not in err


def test_a_folder_without_designs_gives_status_two(run, folder):
    """Most likely it is the wrong folder."""
    (folder / "empty").mkdir()
    status, _, err = run("check", "empty")
    assert status == 2
    assert "no design file in empty" in err


def test_a_result_written_to_a_file_has_the_same_bytes_as_on_stdout(run, folder):
    """Nothing goes to stdout, and what was in the file is gone."""
    _, expected, _ = run("check", "divider.toml", *ONLY)
    (folder / "out.txt").write_text("what was there before" * 100)
    (folder / "out.txt").chmod(0o640)
    status, out, _ = run("check", "divider.toml", *ONLY, "--write", "out.txt")
    assert (status, out) == (1, "")
    assert (folder / "out.txt").read_text() == expected
    assert (folder / "out.txt").stat().st_mode & 0o777 == 0o640
    assert sorted(path.name for path in folder.iterdir()) == ["divider.toml", "out.txt"]


def test_a_result_that_cannot_be_written_gives_status_two(run):
    """The message names the file."""
    status, _, err = run("check", "divider.toml", *ONLY, "--write", "no/such/folder/out.txt")
    assert status == 2
    assert "no/such/folder/out.txt" in err


def test_a_circuit_that_cannot_be_solved_at_a_point_is_incomplete(run, folder, monkeypatch):
    """The points are failures, of which the text shows the first and counts the others; status 3."""
    from rulecheck.analysis.operating_points import OperatingPoints

    lines = [f"no operating point at VIN = {i}; net VOUT moved last" for i in range(5)]
    monkeypatch.setattr(OperatingPoints, "failures", lambda self: lines)
    arguments = ("check", "divider.toml", "--only", "solving-divider")
    status, out, _ = run(*arguments)
    assert status == 3
    assert "failed      operating-points: no operating point at VIN = 0; net VOUT moved last" in out
    assert "failed      operating-points: 2 more like these" in out
    _, out, _ = run(*arguments, "--as", "json")
    assert [failure["message"] for failure in valid_report(out)["designs"][0]["failures"]] == lines


def test_the_program_runs_as_a_process(folder):
    """As installed: data on stdout, status to the caller."""
    done = subprocess.run(
        [*PROGRAM, "check", "divider.toml", *ONLY, "--as", "json"], capture_output=True, text=True, check=False
    )
    assert done.returncode == 1
    assert done.stderr == ""
    assert json.loads(done.stdout)["summary"]["major"] == 1


def on_terminal(arguments, columns, stream="stdout", **environment):
    """What the program writes to one of its streams that is a terminal of some columns."""
    leader, follower = pty.openpty()
    process = subprocess.Popen(
        [*PROGRAM, *arguments], stdin=subprocess.DEVNULL,
        **{"stdout": subprocess.DEVNULL, "stderr": subprocess.DEVNULL, stream: follower},
        env={**os.environ, "COLUMNS": str(columns), "TERM": "xterm", **environment},
    )  # fmt: skip
    os.close(follower)
    written = b""
    while True:
        try:
            chunk = os.read(leader, 65536)
        except OSError:  # the other end is closed
            break
        if not chunk:
            break
        written += chunk
    os.close(leader)
    process.wait()
    return written.decode().replace("\r\n", "\n")


def test_a_terminal_gets_its_width_and_colour(folder, monkeypatch):
    """Lines fill the terminal and do not pass its edge; severities stand out."""
    monkeypatch.delenv("NO_COLOR", raising=False)
    text = on_terminal(["check", "divider.toml", *ONLY], 60)
    assert "\x1b[1;31mmajor\x1b[0m" in text
    plain = re.sub(r"\x1b\[[0-9;]*m", "", text)
    assert 50 < max(map(len, plain.splitlines())) <= 60


def test_no_color_holds(folder):
    """Not even on a terminal."""
    assert "\x1b" not in on_terminal(["check", "divider.toml", *ONLY], 80, NO_COLOR="1")


def test_a_terminal_sees_progress_which_goes_when_it_is_done(folder):
    """A bar within the width of the terminal; the last that is written clears the line."""
    text = on_terminal(["check", "divider.toml", *ONLY], 80, stream="stderr")
    *bars, last = text.split("\r\x1b[K")
    assert last == ""
    assert any("1 of 3  remedy a of divider-ratio" in bar for bar in bars)
    assert max(map(len, bars)) < 80


def test_a_pipe_sees_no_progress(folder):
    """Neither on stdout nor on stderr."""
    done = subprocess.run([*PROGRAM, "check", "divider.toml", *ONLY], capture_output=True, check=False)
    assert done.stderr == b""
    assert b"remedy a of" not in done.stdout


def test_a_pipe_gets_the_bytes_of_a_file_whatever_the_locale(folder):
    """UTF-8 with plain line ends; a file name that is no text is written legibly."""
    odd = os.fsdecode(b"odd\xff.toml")
    (folder / odd).write_text(DIVIDER)
    environment = {**os.environ, "PYTHONIOENCODING": "ascii"}
    for name in ("divider.toml", odd):
        command = [*PROGRAM, "check", name, *ONLY, "--as", "json"]
        piped = subprocess.run(command, capture_output=True, check=False, env=environment)
        written = subprocess.run([*command, "--write", "out.json"], capture_output=True, check=False, env=environment)
        assert (piped.returncode, written.returncode) == (1, 1), piped.stderr
        assert piped.stdout == (folder / "out.json").read_bytes()
        assert valid_report(piped.stdout.decode())["designs"][0]["file"] == name


def test_a_reader_that_stops_early_sees_no_traceback(folder):
    """Such as one that wants the first line only."""
    (folder / "many").mkdir()
    for i in range(200):
        (folder / "many" / f"{i}.toml").write_text("format = 2\n" * 3)
    process = subprocess.Popen([*PROGRAM, "check", "many"], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stderr is not None
    process.stdout.close()
    assert "Traceback" not in process.stderr.read()
    process.wait(timeout=20)
    process.stderr.close()


def test_an_interrupt_gives_status_130(folder):
    """And a word on stderr, no traceback."""
    (folder / "divider.toml").write_text(titled("wait"))
    process = subprocess.Popen(
        [*PROGRAM, "check", "divider.toml", "--only", "crashing"], stdout=subprocess.PIPE, stderr=subprocess.PIPE,
        text=True,
    )  # fmt: skip
    assert process.stdout is not None
    assert process.stdout.readline() == "waiting\n"
    process.send_signal(signal.SIGINT)
    _, err = process.communicate(timeout=20)
    assert process.returncode == 130
    assert err.strip() == "interrupted"


def test_a_report_never_replaces_a_design(run, tree):
    """--write onto one of the designs is refused, and the design stays."""
    before = (tree / "b.toml").read_text()
    status, _, err = run("check", "boards/b.toml", *ONLY, "--write", "boards/b.toml")
    assert status == 2
    assert "one of the designs" in err
    assert (tree / "b.toml").read_text() == before


def test_a_pipe_in_a_folder_is_not_waited_for(run, tree):
    """What is no file is passed by."""
    os.mkfifo(tree / "pipe.toml")
    status, out, _ = run("check", "boards", *ONLY, "--as", "json")
    assert status == 0
    assert files_of(out) == ["boards/b.toml", "boards/deep/a.toml"]


def test_a_link_that_leads_to_itself_is_an_error(run, tree):
    """It says which file, without a traceback."""
    (tree / "loop.toml").symlink_to("loop.toml")
    status, out, err = run("check", "boards/loop.toml", *ONLY)
    assert status == 2
    assert "boards/loop.toml" in out
    assert "Traceback" not in out + err
