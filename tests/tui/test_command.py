"""The command that opens the screen."""

import datetime as dt

from rulecheck import tui
from rulecheck.cli.main import main

from .conftest import DIVIDER


def test_the_command_shows_the_designs_of_a_folder_on_a_day(tmp_path, monkeypatch):
    """Catalogues beside them are passed over."""
    for name in ("a.toml", "b.toml"):
        (tmp_path / name).write_text(DIVIDER)
    (tmp_path / "parts.toml").write_text("format = 1\n[models]\n")
    called = []
    monkeypatch.setattr(tui, "browse", lambda paths, on: called.append((list(paths), on)))
    assert main(["browse", str(tmp_path), "--on", "2026-01-02"]) == 0
    assert called == [([tmp_path / "a.toml", tmp_path / "b.toml"], dt.date(2026, 1, 2))]


def test_a_folder_without_designs_is_refused(tmp_path, capsys):
    """Before the screen opens."""
    assert main(["browse", str(tmp_path)]) == 2
    assert "there is no design file" in capsys.readouterr().err
