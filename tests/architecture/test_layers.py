"""What imports what: statically by the import contracts, and at run time in a fresh interpreter."""

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
DESIGN = """\
format = 1
[design]
title = "Divider"
[nets]
GND = { role = "ground" }
VIN = { role = "input", drive = "voltage", range = ["1 V", "10 V"] }
VOUT = { role = "output" }
[parts]
R1 = { kind = "resistor", value = "1 kohm", pins = ["VIN", "VOUT"] }
R2 = { kind = "resistor", value = "1 kohm", pins = ["VOUT", "GND"] }
"""


def loaded_by(code, *arguments):
    """Names of the modules that a fresh interpreter has loaded after running code."""
    report = "import sys; print(*sys.modules, sep='\\n', file=sys.stderr)"
    done = subprocess.run(
        [sys.executable, "-c", f"{code}\n{report}", *arguments], capture_output=True, text=True, check=True
    )
    return {name.partition(".")[0] for name in done.stderr.splitlines()} | set(done.stderr.splitlines())


def test_the_import_contracts_are_kept():
    """Layers, what rules may import, and who may reach the text UI, as pyproject.toml states them."""
    command = Path(sys.executable).with_name("lint-imports")
    done = subprocess.run([command, "--no-cache"], cwd=ROOT, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stdout


SCREENS_AND_PLOTS = {"textual", "rich", "matplotlib", "plotext", "textual_plot"}


@pytest.mark.parametrize(
    "module", ["rulecheck.cli.main", "rulecheck.api", "rulecheck.review.runner", "rulecheck_rules"]
)
def test_importing_the_checker_loads_no_screens_and_no_plots(module):
    """They cost more than a whole check."""
    assert not loaded_by(f"import {module}") & SCREENS_AND_PLOTS


def test_a_whole_check_loads_no_screens_no_plots_and_no_test_references(tmp_path):
    """From the file to the printed report, with all rules."""
    (tmp_path / "design.toml").write_text(DESIGN)
    code = "import sys; from rulecheck.cli.main import main; main(['check', sys.argv[1]])"
    assert not loaded_by(code, str(tmp_path / "design.toml")) & (SCREENS_AND_PLOTS | {"scipy", "control", "jsonschema"})


@pytest.mark.parametrize("module", ["rulecheck", "rulecheck.errors", "rulecheck.findings", "rulecheck.cli.main"])
def test_the_root_and_the_command_line_load_no_numerics(module):
    """Help and the version come at once."""
    assert not loaded_by(f"import {module}") & {"numpy", "networkx", "pydantic"}


def test_help_and_version_load_no_numerics():
    """Also when run, not only when imported."""
    for argument in ("--help", "--version"):
        loaded = loaded_by(f"from rulecheck.cli.main import main; main([{argument!r}])")
        assert not loaded & {"numpy", "networkx", "pydantic"}


def test_a_rule_that_only_reads_text_loads_no_numerics():
    """The types of analyses are loaded when first asked for."""
    assert not loaded_by("from rulecheck.api import Finding, Rule, Unit") & {"numpy", "networkx"}
    assert "numpy" in loaded_by("from rulecheck.api import OperatingPoints")
