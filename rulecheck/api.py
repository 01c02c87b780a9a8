"""All that a rule may import: the rule's base class, findings, quantities, and the types of what it is given.

Types of the design, the structure and the analyses are loaded when first asked for, so that a rule that only
reads text costs no numerics.
"""

from __future__ import annotations

import importlib
from collections.abc import Iterable
from typing import TYPE_CHECKING, Any, ClassVar

import pydantic
from pydantic import Field

from rulecheck.errors import AnalysisError, LawError, QuantityError, RulecheckError
from rulecheck.findings import (
    Add,
    Concession,
    Edit,
    Evidence,
    Finding,
    Move,
    Remedy,
    Remove,
    Set,
    Severity,
)
from rulecheck.series import decade_values, in_series, nearest, series_for_tolerance
from rulecheck.series import values as series_values
from rulecheck.units import ZERO_CELSIUS, Dimension, Spread, dimension_of, format_quantity, parse_quantity
from rulecheck.units import Unit as _Unit

if TYPE_CHECKING:
    from rulecheck.analysis.budget import Budget
    from rulecheck.analysis.conditions import Conditions, above_cutoff
    from rulecheck.analysis.effects import (
        Disturbance,
        SupplyEffect,
        bias_limit,
        conformity_cost,
        disturbance,
        junction_offset,
        supply_effect,
        worst_cost,
    )
    from rulecheck.analysis.latching import SecondPoint
    from rulecheck.analysis.loops import IslandLoops, Loops
    from rulecheck.analysis.operating_points import OperatingPoints, Worst
    from rulecheck.analysis.queries import (
        Carrier,
        at_typical,
        carriers,
        forward_current,
        forward_voltage,
        in_use,
        is_regulated,
        partner_of,
        points_in_use,
        potentiometers,
    )
    from rulecheck.analysis.review import Cost, Review
    from rulecheck.analysis.ringing import Ringing, ringing
    from rulecheck.analysis.transfer import Transfer, dimension_fault
    from rulecheck.analysis.trims import Travel, travel
    from rulecheck.circuit.islands import Island, equal_islands, islands
    from rulecheck.circuit.structure import (
        AntilogTransistor,
        FeedbackLoop,
        Junction,
        JunctionLoop,
        LogTransistor,
        Structure,
        SummingNode,
    )
    from rulecheck.design.keypath import join_key, split_key
    from rulecheck.design.law import Law
    from rulecheck.design.model import Design, Input, Model, Net, Package, Part, Requirement
    from rulecheck.devices.constants import BOLTZMANN, ELEMENTARY_CHARGE, thermal_voltage

_LAZY = {
    name: module
    for module, names in {
        "rulecheck.analysis.budget": ("Budget",),
        "rulecheck.analysis.conditions": ("Conditions", "above_cutoff"),
        "rulecheck.analysis.operating_points": ("OperatingPoints", "Worst"),
        "rulecheck.analysis.latching": ("SecondPoint",),
        "rulecheck.analysis.loops": ("IslandLoops", "Loops"),
        "rulecheck.analysis.effects": (
            "Disturbance",
            "SupplyEffect",
            "bias_limit",
            "conformity_cost",
            "disturbance",
            "junction_offset",
            "supply_effect",
            "worst_cost",
        ),
        "rulecheck.analysis.queries": (
            "Carrier",
            "at_typical",
            "carriers",
            "forward_current",
            "forward_voltage",
            "in_use",
            "is_regulated",
            "partner_of",
            "points_in_use",
            "potentiometers",
        ),
        "rulecheck.analysis.review": ("Cost", "Review"),
        "rulecheck.analysis.ringing": ("Ringing", "ringing"),
        "rulecheck.analysis.transfer": ("Transfer", "dimension_fault"),
        "rulecheck.analysis.trims": ("Travel", "travel"),
        "rulecheck.circuit.islands": ("Island", "equal_islands", "islands"),
        "rulecheck.circuit.structure": (
            "AntilogTransistor", "FeedbackLoop", "Junction", "JunctionLoop", "LogTransistor", "Structure",
            "SummingNode",
        ),
        "rulecheck.design.keypath": ("join_key", "split_key"),
        "rulecheck.design.law": ("Law",),
        "rulecheck.design.model": ("Design", "Input", "Model", "Net", "Package", "Part", "Requirement"),
        "rulecheck.devices.constants": ("BOLTZMANN", "ELEMENTARY_CHARGE", "thermal_voltage"),
    }.items()
    for name in names
}  # fmt: skip

__all__ = [
    "BOLTZMANN",
    "ELEMENTARY_CHARGE",
    "ZERO_CELSIUS",
    "Add",
    "AnalysisError",
    "AntilogTransistor",
    "BaseModel",
    "Budget",
    "Carrier",
    "Concession",
    "Conditions",
    "Cost",
    "Design",
    "Dimension",
    "Disturbance",
    "Edit",
    "Evidence",
    "FeedbackLoop",
    "Field",
    "Finding",
    "Input",
    "Island",
    "IslandLoops",
    "Junction",
    "JunctionLoop",
    "Law",
    "LawError",
    "LogTransistor",
    "Loops",
    "Model",
    "Move",
    "Net",
    "OperatingPoints",
    "Package",
    "Part",
    "QuantityError",
    "Remedy",
    "Remove",
    "Requirement",
    "Review",
    "Ringing",
    "Rule",
    "RulecheckError",
    "SecondPoint",
    "Set",
    "Severity",
    "Spread",
    "Structure",
    "SummingNode",
    "SupplyEffect",
    "Transfer",
    "Travel",
    "Unit",
    "Worst",
    "above_cutoff",
    "at_typical",
    "bias_limit",
    "carriers",
    "conformity_cost",
    "decade_values",
    "dimension_fault",
    "dimension_of",
    "disturbance",
    "equal_islands",
    "format_quantity",
    "forward_current",
    "forward_voltage",
    "in_series",
    "in_use",
    "is_regulated",
    "islands",
    "join_key",
    "junction_offset",
    "nearest",
    "parse_quantity",
    "partner_of",
    "points_in_use",
    "potentiometers",
    "ringing",
    "series_for_tolerance",
    "series_values",
    "split_key",
    "supply_effect",
    "thermal_voltage",
    "travel",
    "worst_cost",
]


def __getattr__(name: str) -> Any:  # noqa: ANN401
    if name in _LAZY:
        return getattr(importlib.import_module(_LAZY[name]), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)


class Unit(_Unit):
    """Annotation of a setting that holds a quantity: ``Annotated[float, Unit("V")]`` takes "50 mV" or 0.05.

    Parameters
    ----------
    symbol : str
        Unit expected; any prefix and any unit of the same dimension is taken.
    plus_minus : bool
        For a `Spread`: the quantity is a limit about zero.
    """

    def __init__(self, symbol: str, *, plus_minus: bool = False) -> None:
        super().__init__(symbol, plus_minus=plus_minus, allow_number=True)


class BaseModel(pydantic.BaseModel):
    """Base of a rule's settings: unknown keys are refused, defaults are validated, values do not change."""

    model_config = pydantic.ConfigDict(extra="forbid", frozen=True, validate_default=True)


class NoSettings(BaseModel):
    """The settings of a rule that has none."""


class Rule:
    """Base class of all rules.

    A subclass states what it is in its class attributes and finds faults in `check`. It keeps no state: one
    instance may judge many designs. Its docstring, with that of its module, is its page. A class whose name
    begins with an underscore is a base for others and is not registered.

    Attributes
    ----------
    name : str
        Lower-case words joined by hyphens.
    title : str
        What it finds, in a line.
    source : str
        Where the rule is published, or "common practice, no source".
    default_severity : Severity
        Of findings that do not say their own.
    needs : tuple of str
        Members of `Review` the verdict rests on. They are computed before the rule runs, and points of
        theirs without a solution are reported. A rule that needs none runs on a broken circuit too.
    blocks_analysis : bool
        A major finding of this rule makes analysis meaningless: rules that need any are then not run.
    Settings : type of BaseModel
        The limits, each with its default.
    """

    name: ClassVar[str] = ""
    title: ClassVar[str] = ""
    source: ClassVar[str] = ""
    default_severity: ClassVar[Severity] = Severity.MINOR
    needs: ClassVar[tuple[str, ...]] = ("operating_points",)
    blocks_analysis: ClassVar[bool] = False
    Settings: ClassVar[type[BaseModel]] = NoSettings

    def check(self, review: Review, settings: Any) -> Iterable[Finding]:  # noqa: ANN401
        """Judge one design.

        Parameters
        ----------
        review : Review
            The design, its structure and its analyses; frozen.
        settings : BaseModel
            An instance of the rule's own `Settings`.

        Returns
        -------
        iterable of Finding
        """
        raise NotImplementedError(f"{type(self).__name__} does not say how it checks")
