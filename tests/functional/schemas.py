"""Validation of outputs against the schemas that ship with the package."""

from __future__ import annotations

import json
from importlib.resources import files

from jsonschema import Draft202012Validator


def schema(name):
    """A shipped schema."""
    return json.loads(files("rulecheck.report").joinpath(name).read_text())


def valid_report(text):
    """The object of a report, which must fit its schema."""
    return _valid(text, "report_schema.json")


def valid_figures(text):
    """The object of figures, which must fit its schema."""
    return _valid(text, "figures_schema.json")


def valid_comparison(text):
    """The object of a comparison, which must fit its schema."""
    return _valid(text, "comparison_schema.json")


def valid_bench(text):
    """The object of a bench sheet, which must fit its schema."""
    return _valid(text, "bench_schema.json")


def _valid(text, name):
    value = json.loads(text)
    validator = Draft202012Validator(schema(name), format_checker=Draft202012Validator.FORMAT_CHECKER)
    assert [error.message for error in validator.iter_errors(value)] == []
    return value
