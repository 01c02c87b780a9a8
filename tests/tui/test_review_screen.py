"""The review screen: what each of its keys does."""

import asyncio
import contextlib
import datetime as dt
import time

import pytest
from textual.widgets import Input
from textual.worker import get_current_worker

from rulecheck.review.registry import registry_of
from rulecheck.tui.app import Browser
from rulecheck.tui.dialogs import Dialog
from rulecheck.tui.finding_list import FindingList
from rulecheck.tui.keys import PAGES, REVIEW_KEYS
from rulecheck.tui.numbers_screen import NumbersScreen

from .conftest import DIVIDER, Ratio, settle, text, until

FIXED = DIVIDER.replace('"3 kohm"', '"1 kohm"')


def rows(pilot):
    """The lines of the list of findings."""
    return [str(option.prompt) for option in pilot.app.screen.query_one(FindingList).options]


def page(pilot, name):
    """The text of a page."""
    return text(pilot, f"#{name} .text")


def test_the_worst_finding_is_shown_first_with_all_that_is_known_of_it(browse):
    """Message, consequence, evidence against its limit and conditions stand on the first page."""

    async def steps(pilot):
        shown = page(pilot, "finding")
        for words in ("▲ major", "leave too little", "noise grows", "≤ 2 V", "✖", "VIN 10 V", "2 remedies, 1 proven"):
            assert words in shown
        assert "▲ 1 major, ○ 1 observation" in text(pilot, "#head")

    browse(steps)


def test_one_key_cycles_the_groups(browse):
    """By severity, by part (under each part), by rule, and by severity again."""

    async def steps(pilot):
        seen = []
        for _ in range(4):
            seen.append([row for row in rows(pilot) if not row.startswith(" ")])
            await pilot.press("g")
            await pilot.pause()
        assert seen == [
            ["major  1", "observation  1"],
            ["R1  1", "R2  2"],
            ["divider-ratio  1", "round-value  1"],
            ["major  1", "observation  1"],
        ]

    browse(steps)


def test_the_finding_chosen_stays_so_when_the_grouping_changes(browse):
    """What the reader looks at is not taken away."""

    async def steps(pilot):
        await pilot.press("down")
        assert pilot.app.screen.finding.rule == "round-value"
        await pilot.press("g")
        assert pilot.app.screen.finding.rule == "round-value"

    browse(steps)


def test_typing_keeps_what_holds_the_words_and_escape_shows_all_again(browse):
    """The words may be of the message or the rule, in any case."""

    async def steps(pilot):
        await pilot.press("slash", *"ROUND", "enter")
        await pilot.pause()
        assert [row for row in rows(pilot) if row.startswith(" ")] == [" ○ R2 round-value"]
        assert "R2 is 1 kohm" in page(pilot, "finding")
        await pilot.press("escape")
        await pilot.pause()
        assert len([row for row in rows(pilot) if row.startswith(" ")]) == 2
        assert not pilot.app.screen.query_one("#search", Input).display

    browse(steps)


@pytest.mark.parametrize(("key", "name"), list(enumerate(PAGES, 1)))
def test_a_number_shows_its_page_alone_on_a_small_screen(browse, key, name):
    """At 80 columns there is room for one."""

    async def steps(pilot):
        await pilot.press(str(key))
        await pilot.pause()
        assert [child.id for child in pilot.app.screen.query_one("#pages").children if child.display] == [name]

    browse(steps)


def test_a_wide_screen_shows_every_page_and_one_alone_in_full_width(browse):
    """At 160 columns there is room for all."""

    async def steps(pilot):
        pages = pilot.app.screen.query_one("#pages").children
        assert all(child.display for child in pages)
        await pilot.press("5", "f")
        await pilot.pause()
        assert [child.id for child in pages if child.display] == ["circuit"]
        assert not pilot.app.screen.query_one("#side").display

    browse(steps, size=(160, 50))


def test_the_plot_draws_the_evidence_with_its_limit_and_the_worst_point(browse):
    """Over the input, on a logarithmic axis as it spans decades."""

    async def steps(pilot):
        await pilot.press("2")
        await pilot.pause()
        assert "limit <= 2 V" in text(pilot, "#plot-head")
        drawn = text(pilot, "#plot-body")
        assert drawn.count("✖") == 1
        ticks = drawn.splitlines()[-1].split()
        assert ticks == ["10", "mV", "100", "mV", "1", "V", "10", "V"]
        assert "over VIN" in text(pilot, "#plot-foot")
        assert "✖ 2.5 V at 10 V" in text(pilot, "#plot-foot")
        await pilot.press("x")
        await pilot.pause()
        assert "over ambient" in text(pilot, "#plot-foot")

    browse(steps)


def test_the_file_is_shown_at_the_line_of_the_finding(browse):
    """The line is marked by a sign and in sight."""

    async def steps(pilot):
        await pilot.press("4")
        await settle(pilot)
        marked = [line for line in page(pilot, "file").splitlines() if line.startswith("▶")]
        assert marked == ["▶11 [parts.R1]"]
        assert pilot.app.screen.query_one("#file").scroll_y > 0

    browse(steps)


def test_remedies_say_which_is_proven_and_show_their_diff(browse):
    """The proven one is chosen first; r goes to the next."""

    async def steps(pilot):
        shown = page(pilot, "remedies")
        assert "  a  ✘ not proven" in shown
        assert "▶ b  ✔ proven" in shown
        assert '-value = "3 kohm"   # from the drawer\n+value = "1 kohm"   # from the drawer' in shown
        await pilot.press("r")
        assert "▶ a  ✘ not proven" in page(pilot, "remedies")
        assert '+value = "2.9 kohm"' in page(pilot, "remedies")

    browse(steps)


def test_applying_writes_the_file_and_shows_what_went(browse, path):
    """The comment in the line stays; the finding is gone from the list."""

    async def steps(pilot):
        await pilot.press("a")
        await settle(pilot)
        assert path.read_text() == FIXED
        assert isinstance(pilot.app.screen, Dialog)
        assert "gone: 1" in str(pilot.app.screen.content)
        assert "divider-ratio" in str(pilot.app.screen.content)
        await pilot.press("escape")
        assert [row for row in rows(pilot) if row.startswith(" ")] == [" ○ R2 round-value"]

    browse(steps)


def test_undo_gives_the_file_back_as_it_was_and_redo_makes_the_change_again(browse, path):
    """To the byte."""

    async def steps(pilot):
        await pilot.press("a")
        await settle(pilot)
        await pilot.press("escape", "u")
        await settle(pilot)
        assert path.read_text() == DIVIDER
        assert "come: 1" in str(pilot.app.screen.content)
        await pilot.press("escape", "U")
        await settle(pilot)
        assert path.read_text() == FIXED

    browse(steps)


def test_a_remedy_that_is_not_proven_is_not_applied(browse, path):
    """The file stays as it is."""

    async def steps(pilot):
        await pilot.press("r", "a")
        await settle(pilot)
        assert path.read_text() == DIVIDER

    browse(steps)


def test_a_file_changed_by_someone_else_is_not_written_over(browse, path):
    """The change of the other stays, and why nothing was done is said."""
    other = DIVIDER + "\n# mine\n"

    async def steps(pilot):
        path.write_text(other)
        await pilot.press("a")
        await settle(pilot)
        assert path.read_text() == other
        assert "changed by someone else" in text(pilot, "#state")

    browse(steps, watch=1000)


def test_a_file_that_changes_on_disk_is_reviewed_again(browse, path):
    """Without a key."""

    async def steps(pilot):
        path.write_text(FIXED)
        await until(pilot, lambda: "○ 1 observation" in text(pilot, "#head") and "major" not in text(pilot, "#head"))

    browse(steps)


def test_a_broken_file_shows_its_errors_and_recovers(browse, path):
    """Errors with their place; saved right, the findings are there again."""

    async def steps(pilot):
        path.write_text(DIVIDER.replace("3 kohm", "3 V"))
        await until(pilot, lambda: "cannot be used" in text(pilot, "#head"))
        assert "divider.toml:13" in page(pilot, "finding")
        assert rows(pilot) == []
        await pilot.press("a", "n", "y")
        path.write_text(DIVIDER)
        await until(pilot, lambda: "1 major" in text(pilot, "#head"))
        assert "leave too little" in page(pilot, "finding")

    browse(steps)


def test_a_file_that_is_gone_is_said_to_be(browse, path):
    """And the screen stays."""

    async def steps(pilot):
        path.unlink()
        await until(pilot, lambda: "cannot be used" in text(pilot, "#head"))
        assert "no such file" in page(pilot, "finding")

    browse(steps)


def test_the_id_is_copied(browse):
    """To the clipboard of the terminal."""

    async def steps(pilot):
        await pilot.press("y")
        assert pilot.app.clipboard == pilot.app.screen.finding.id

    browse(steps)


def test_the_editor_is_opened_at_the_line(browse, path, monkeypatch, tmp_path):
    """As $EDITOR says, with its own arguments."""
    note = tmp_path / "called"
    script = tmp_path / "editor.sh"
    script.write_text(f'#!/bin/sh\necho "$@" > {note}\n')
    script.chmod(0o755)
    monkeypatch.delenv("VISUAL", raising=False)
    monkeypatch.setenv("EDITOR", f"{script} -w")

    async def steps(pilot):
        monkeypatch.setattr(pilot.app, "suspend", contextlib.nullcontext)
        await pilot.press("e")
        assert note.read_text().split() == ["-w", "+11", str(path)]

    browse(steps)


def test_help_lists_every_key_with_what_it_does(browse):
    """None is left out."""

    async def steps(pilot):
        await pilot.press("question_mark")
        shown = str(pilot.app.screen.content)
        assert all(binding.tooltip in shown for binding in REVIEW_KEYS)
        await pilot.press("escape")
        assert not isinstance(pilot.app.screen, Dialog)

    browse(steps)


def test_every_key_does_something_that_exists():
    """Each names an action of the screen or of the application."""
    from rulecheck.tui.app import Browser
    from rulecheck.tui.review_screen import ReviewScreen

    for binding in REVIEW_KEYS:
        holder, _, action = binding.action.partition("(")[0].rpartition(".")
        assert hasattr(Browser if holder == "app" else ReviewScreen, f"action_{action}"), binding


def test_several_designs_are_gone_through(browse, tmp_path):
    """The second is reviewed when it is first shown."""
    other = tmp_path / "other.toml"
    other.write_text(FIXED)

    async def steps(pilot):
        assert "(1 of 2)" in text(pilot, "#head")
        await pilot.press("d")
        await settle(pilot)
        assert "other.toml (2 of 2)" in text(pilot, "#head")
        assert "major" not in text(pilot, "#head")
        await pilot.press("D")
        await settle(pilot)
        assert "1 major" in text(pilot, "#head")

    browse(steps, other)


def test_the_theme_is_turned(browse):
    """From dark to light and back."""

    async def steps(pilot):
        assert pilot.app.current_theme.dark
        await pilot.press("t")
        assert not pilot.app.current_theme.dark
        await pilot.press("t")
        assert pilot.app.current_theme.dark

    browse(steps)


def test_numbers_are_reached_and_left(browse):
    """By one key each."""

    async def steps(pilot):
        await pilot.press("n")
        assert isinstance(pilot.app.screen, NumbersScreen)
        await settle(pilot)
        await pilot.press("escape")
        assert not isinstance(pilot.app.screen, NumbersScreen)

    browse(steps)


def test_f5_reviews_again(browse, path):
    """Also where the disk is not looked at."""

    async def steps(pilot):
        path.write_text(FIXED)
        await pilot.press("f5")
        await settle(pilot)
        assert "major" not in text(pilot, "#head")

    browse(steps, watch=1000)


def test_a_running_review_answers_keys_and_can_be_given_up(browse, monkeypatch):
    """Its progress is shown; once given up it changes nothing any more."""
    from rulecheck.tui.document import Document

    def endless(self, progress, shown):
        done = 0
        while True:
            progress(done, 100, "endless-rule")
            done = (done + 1) % 100
            time.sleep(0.1)

    async def steps(pilot):
        monkeypatch.setattr(Document, "read", endless)
        await pilot.press("f5")
        await until(pilot, lambda: "of 100  endless-rule" in text(pilot, "#state"))
        await pilot.press("3")
        assert pilot.app.screen.query_one("#remedies").display
        await pilot.press("c")
        await settle(pilot)
        assert "given up" in text(pilot, "#state")
        assert "1 major" in text(pilot, "#head")

    browse(steps, watch=1000)


def test_a_fault_of_the_program_does_not_close_the_screen(browse, monkeypatch):
    """It is told in words."""
    from rulecheck.tui.document import Document

    def broken(self, progress, shown):
        raise ZeroDivisionError("nothing to divide")

    async def steps(pilot):
        monkeypatch.setattr(Document, "read", broken)
        await pilot.press("f5")
        await settle(pilot)
        assert "fault of the program" in text(pilot, "#state")

    browse(steps, watch=1000)


def test_a_click_on_its_name_shows_a_page(browse):
    """The mouse does what the number does."""

    async def steps(pilot):
        await pilot.click("#tabs", offset=(13, 0))
        await pilot.pause()
        assert pilot.app.screen.query_one("#plot").display
        assert not pilot.app.screen.query_one("#finding").display

    browse(steps)


def test_the_screen_follows_the_size_of_the_terminal(browse):
    """From one page to all and back."""

    async def steps(pilot):
        pages = pilot.app.screen.query_one("#pages").children
        await pilot.resize_terminal(160, 50)
        await pilot.pause()
        assert sum(page.display for page in pages) == 5
        await pilot.resize_terminal(80, 24)
        await pilot.pause()
        assert sum(page.display for page in pages) == 1

    browse(steps, size=(80, 24))


@pytest.mark.parametrize("usable", [True, False])
@pytest.mark.parametrize("size", [(80, 24), (160, 50)])
def test_no_key_fails_while_there_is_nothing_to_show(path, monkeypatch, size, usable):
    """Before the first review is done, and where the file cannot be used."""
    from rulecheck.tui import editor
    from rulecheck.tui.document import Document

    def waiting(self, progress, shown):
        progress(0, 1, "first-rule")
        while not get_current_worker().is_cancelled:
            time.sleep(0.01)
        progress(0, 1, "first-rule")

    monkeypatch.setattr(editor, "open_at", lambda path, line: 0)
    keys = ["a", "u", "U", "r", "v", "x", "y", "g", "f", "f", "1", "2", "3", "4", "5", "n", "t", "d", "down", "e"]

    async def go():
        app = Browser([path], registry_of([Ratio]), dt.date(2026, 1, 2), 1000)
        monkeypatch.setattr(app, "suspend", contextlib.nullcontext)
        async with app.run_test(size=size) as pilot:
            await pilot.press(*keys)
            await pilot.press("c", "q")

    if usable:
        monkeypatch.setattr(Document, "read", waiting)
    else:
        path.write_text("format = 1\n[design")
    asyncio.run(go())
