"""A loaded design: frozen data in SI units, as the analyses and rules see it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rulecheck.design.frozen import FrozenDict
from rulecheck.design.items import Input, Matching, Model, Net, Package, Part, Range, ThermalLink
from rulecheck.design.keypath import join_key, split_key
from rulecheck.findings import Concession, Location
from rulecheck.units import Dimension, Spread

if TYPE_CHECKING:
    from rulecheck.design.law import Law
    from rulecheck.design.source import Source

__all__ = [
    "Bandwidth",
    "Design",
    "Input",
    "Matching",
    "Model",
    "Net",
    "Noise",
    "Package",
    "Part",
    "Requirement",
    "ThermalLink",
]


@dataclass(frozen=True, slots=True)
class Bandwidth:
    """Required −3 dB bandwidth of at least `min` [Hz] from `input`, at the point `at` (SI by name)."""

    min: float
    input: str
    at: Mapping[str, float]


@dataclass(frozen=True, slots=True)
class Noise:
    """Required noise of at most `max` [V RMS] at the output in the band `bandwidth` [Hz]."""

    max: float
    bandwidth: Range


@dataclass(frozen=True, slots=True)
class Requirement:
    """What an output is asked to do.

    Attributes
    ----------
    name, output : str
    law : Law or None
    constants : mapping of str to float
        Of the law, in SI; `constant_dimensions` has their dimensions.
    reading, absolute : float
        Allowed error as a fraction of the law, and in volts; 0 where not given.
    has_accuracy : bool
        Whether the file gives an accuracy.
    range : mapping of str to (low, high)
        Of inputs, where it is narrower than their own.
    bandwidth : Bandwidth or None
    phase_margin : float or None [degree]
    noise : Noise or None
    """

    name: str
    output: str
    law: Law | None = None
    constants: Mapping[str, float] = field(default_factory=FrozenDict)
    constant_dimensions: Mapping[str, Dimension] = field(default_factory=FrozenDict)
    reading: float = 0.0
    absolute: float = 0.0
    has_accuracy: bool = False
    range: Mapping[str, Range] = field(default_factory=FrozenDict)
    bandwidth: Bandwidth | None = None
    phase_margin: float | None = None
    noise: Noise | None = None


@dataclass(frozen=True, eq=False)
class Design:
    """A design file that was found to be sound in itself.

    Attributes
    ----------
    path : Path
    title, revision, purpose : str
    ambient : Spread [K]
    board_insulation : Spread or None [ohm]
    nets : mapping of str to Net
        All nets: those with a table in the order of the file, then ordinary ones in the order of pins.
    parts, unmounted : mapping of str to Part
    packages : mapping of str to Package
        All packages, those without a table too.
    thermal_links : tuple of ThermalLink
    matching : mapping of str to Matching
    requirements : mapping of str to Requirement
    concessions : tuple of Concession
    rule_settings : mapping of str to mapping
        As written; the rules judge them.
    models : mapping of str to Model
        Of all catalogues, the shipped one first.
    inputs : mapping of str to Input
    """

    path: Path
    title: str
    revision: str
    purpose: str
    ambient: Spread
    board_insulation: Spread | None
    nets: Mapping[str, Net]
    parts: Mapping[str, Part]
    unmounted: Mapping[str, Part]
    packages: Mapping[str, Package]
    thermal_links: tuple[ThermalLink, ...]
    matching: Mapping[str, Matching]
    requirements: Mapping[str, Requirement]
    concessions: tuple[Concession, ...]
    rule_settings: Mapping[str, Mapping[str, Any]]
    models: Mapping[str, Model]
    inputs: Mapping[str, Input]
    source: Source = field(repr=False)

    @property
    def text(self) -> str:
        """The file as written."""
        return self.source.text

    @property
    def data(self) -> Mapping[str, Any]:
        """The file's tables as parsed, quantities still as text; not to be changed."""
        return self.source.data

    def locate(self, key: str) -> Location:
        """Place of a key in the file, of what stands nearest to it where the file does not have it.

        A parameter that comes from a catalogue is at the part's `model`, a net or package without a
        table at the first part that names it; otherwise it is the innermost table that is there.

        Parameters
        ----------
        key : str
            Dotted path such as ``parts.Q1.package``.
        """
        path, (line, column) = self.source.place(self._nearest(split_key(key)))
        return Location(self.source.file, line, column, join_key(path))

    def _nearest(self, path: tuple[str, ...]) -> tuple[str, ...]:
        if len(path) < 2 or path in self.source.spans:
            return path
        table, name = path[:2]
        if table == "parts" and len(path) > 2 and name in self.parts:
            part = self.parts[name]
            comes_from_model = part.model is not None and path[2] in part.parameters
            return ("parts", name, "model") if comes_from_model and path[:3] not in self.source.spans else path
        if path[:2] in self.source.spans:
            return path
        if table == "nets":
            pins = ((ref, pin) for ref, part in self.parts.items() for pin, net in part.pins.items() if net == name)
            return next((("parts", ref, "pins", pin) for ref, pin in pins), path)
        if table == "packages" and name in self.packages and self.packages[name].parts:
            return "parts", self.packages[name].parts[0], "package"
        return path
