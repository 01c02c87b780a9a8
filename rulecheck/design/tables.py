"""The other tables of a design file."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

from pydantic import WithJsonSchema

from rulecheck.design.fields import (
    NON_NEGATIVE,
    POSITIVE,
    Date,
    Table,
    Text,
    key,
    required,
)
from rulecheck.design.readers import AnyQuantity, Names, Range
from rulecheck.units import ZERO_CELSIUS, Dimension, Spread, Unit

# The units of these depend on what is named; they are read where the names are known.
_QUANTITY = {"type": ["string", "number"]}
_BY_NAME = {"type": "object", "additionalProperties": _QUANTITY}
_RANGES = {
    "type": "object",
    "additionalProperties": {"type": "array", "items": _QUANTITY, "minItems": 2, "maxItems": 2},
}

Limit = Annotated[float | None, Unit("%"), NON_NEGATIVE]


class Head(Table):
    """The title block."""

    called: ClassVar[str] = "the title block"

    title: Text = key("title", "")
    revision: Text = key("revision", "")
    purpose: Text = key("what the design is for", "")


class Environment(Table):
    """Where the board is used."""

    called: ClassVar[str] = "the environment"

    ambient: Annotated[Spread, Unit("degC")] = key(
        "ambient temperature (0, 25, 50 degC)", Spread(ZERO_CELSIUS, ZERO_CELSIUS + 25.0, ZERO_CELSIUS + 50.0)
    )
    board_insulation: Annotated[Spread | None, Unit("ohm"), POSITIVE] = key(
        "resistance of a node to the worst rail (not judged)"
    )


class PackageTable(Table):
    """A package."""

    called: ClassVar[str] = "a package"

    theta_ja: Annotated[float | None, Unit("K/W"), POSITIVE] = key("thermal resistance to ambient (the model's)")
    die: Literal["single", "separate"] | None = key(
        "whether its parts share a die (separate where it holds two or more transistors or diodes whose models "
        "are not monolithic)"
    )
    theta_between: Annotated[float | None, Unit("K/W"), POSITIVE] = key("thermal resistance between separate dice")
    ratio_tolerance: Limit = key("± limit of the ratios of a resistor network")
    ratio_tempco: Annotated[float | None, Unit("ppm/K"), NON_NEGATIVE] = key(
        "± limit of the temperature coefficient of its ratios"
    )
    held_temperature: Annotated[float | None, Unit("degC")] = key("temperature at which an oven holds all in it")


class ThermalLinkTable(Table):
    """A thermal link."""

    called: ClassVar[str] = "a thermal link"

    between: Annotated[tuple[str, ...], Names(count=2)] = required("the two packages that it joins")
    theta: Annotated[float, Unit("K/W"), POSITIVE] = required("thermal resistance between them")


class MatchingTable(Table):
    """A matched group."""

    called: ClassVar[str] = "a matched group"

    parts: Annotated[tuple[str, ...], Names()] = required("its transistors, the first being the one compared to")
    vbe_mismatch: Annotated[Spread | None, Unit("V", plus_minus=True)] = key(
        "± base-emitter mismatch of each to the first (the model's)"
    )
    vbe_mismatch_drift: Annotated[Spread | None, Unit("V/K", plus_minus=True)] = key(
        "± drift of that mismatch with temperature (the model's)"
    )


class Accuracy(Table):
    """An accuracy: allowed error = absolute + reading · abs(law)."""

    called: ClassVar[str] = "an accuracy"

    reading: Annotated[float, Unit("%"), NON_NEGATIVE] = key("allowed error as a share of reading (0)", 0.0)
    absolute: Annotated[float, Unit("V"), NON_NEGATIVE] = key("allowed error in volts (0)", 0.0)


class BandwidthTable(Table):
    """A required bandwidth."""

    called: ClassVar[str] = "a bandwidth requirement"

    min: Annotated[float, Unit("Hz"), POSITIVE] = required("least -3 dB frequency")
    input: Text | None = key("the input it is from (the only one)")
    at: Annotated[dict[str, Any], WithJsonSchema(_BY_NAME)] = key(
        "where it is asked: quantities by name of input, ambient and so on", {}
    )


class NoiseTable(Table):
    """A required noise."""

    called: ClassVar[str] = "a noise requirement"

    max: Annotated[float, Unit("V"), POSITIVE] = required("greatest RMS noise at the output")
    bandwidth: Annotated[tuple[float, float], Range("Hz")] = required("band, [low, high]")


class RequirementTable(Table):
    """What an output is asked to do."""

    called: ClassVar[str] = "a requirement"

    output: Text = required("the net judged")
    law: Text | None = key('law of the output, "full_scale * (VIN / full_scale) ** n"')
    constants: dict[str, Annotated[tuple[float, Dimension], AnyQuantity()]] = key("quantities that the law names", {})
    accuracy: Accuracy | None = key("allowed error of the output about the law")
    range: Annotated[dict[str, Any], WithJsonSchema(_RANGES)] = key("ranges [low, high] by input (the inputs' own)", {})
    bandwidth: BandwidthTable | None = key("least bandwidth")
    phase_margin: Annotated[float | None, Unit("deg"), POSITIVE] = key("least phase margin")
    noise: NoiseTable | None = key("greatest noise at the output")


class ConcessionTable(Table):
    """An agreed permission to release something that does not conform."""

    called: ClassVar[str] = "a concession"

    rule: Text | None = key("the rule it is about")
    parts: Annotated[tuple[str, ...], Names()] = key("parts it covers", ())
    nets: Annotated[tuple[str, ...], Names()] = key("nets it covers", ())
    finding: Text | None = key("id of the finding, in place of rule, parts and nets")
    reason: Text = required("why it is granted")
    approved_by: Text = key("who granted it", "")
    expires: Date | None = key("last day it holds; a date without quotes")


#: What may stand at the top of a design file, with words for it.
TOP_LEVEL = {
    "format": "version of this format, 1",
    "catalogues": "files of models, beside this file or below it",
    "design": "title block",
    "environment": "where the board is used",
    "nets": "nets by name; ordinary nets need no table",
    "parts": "parts by reference",
    "packages": "packages by name",
    "thermal_links": "thermal resistances between packages",
    "matching": "groups of matched transistors by name",
    "requirements": "what the outputs are asked to do, by name",
    "concessions": "agreed permissions",
    "rules": "settings by rule",
}
