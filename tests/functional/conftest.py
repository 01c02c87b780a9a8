"""The program run in this process, in a folder of its own, with the team's plugin installed."""

from __future__ import annotations

import os
import sys
from pathlib import Path

import pytest

HERE = Path(__file__).parent

DIVIDER = """\
format = 1

[design]
title = "Divider"
revision = "A"

[nets]
GND = { role = "ground" }
VIN = { role = "input", drive = "voltage", range = ["1 V", "10 V"] }
VOUT = { role = "output" }

[parts.R1]
kind = "resistor"
value = "3 kohm"   # from the drawer
pins = ["VIN", "VOUT"]

[parts.R2]
kind = "resistor"
value = "1 kohm"
pins = ["VOUT", "GND"]
"""


@pytest.fixture
def team(tmp_path_factory, monkeypatch):
    """The folder in which the team's plugin is installed, on the path of this process and of those it starts."""
    site = tmp_path_factory.mktemp("site")
    (site / "team_rules.py").write_text((HERE / "team_rules.py").read_text())
    (site / "collector_strays.py").write_text((HERE / "collector_strays.txt").read_text())
    info = site / "team-3.0.dist-info"
    info.mkdir()
    (info / "METADATA").write_text("Metadata-Version: 2.1\nName: team\nVersion: 3.0\n")
    points = "[rulecheck.plugins]\nteam = team_rules\nstrays = collector_strays\n"
    (info / "entry_points.txt").write_text(points)
    monkeypatch.syspath_prepend(site)
    monkeypatch.setenv("PYTHONPATH", os.pathsep.join([str(site), os.environ.get("PYTHONPATH", "")]))
    for name in ("team_rules", "collector_strays"):
        monkeypatch.delitem(sys.modules, name, raising=False)
    return site


@pytest.fixture
def folder(tmp_path, monkeypatch, team):
    """The working folder, with the divider in it as ``divider.toml``."""
    monkeypatch.chdir(tmp_path)
    (tmp_path / "divider.toml").write_text(DIVIDER)
    return tmp_path


@pytest.fixture
def run(folder, capfd):
    """Runs the program; gives exit status, stdout and stderr."""
    from rulecheck.cli.main import main

    def run_main(*arguments):
        status = main([str(argument) for argument in arguments])
        out, err = capfd.readouterr()
        return status, out, err

    return run_main
