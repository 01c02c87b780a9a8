"""A loaded design: frozen data in SI units, as the analyses and rules see it."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, field
from pathlib import Path
from typing import TYPE_CHECKING, Any

from rulecheck.design.frozen import FrozenDict
from rulecheck.design.keypath import join_key, split_key
from rulecheck.findings import Concession, Location
from rulecheck.units import Dimension, Spread

if TYPE_CHECKING:
    from rulecheck.design.law import Law
    from rulecheck.design.source import Source

Range = tuple[float, float]


@dataclass(frozen=True, slots=True)
class Net:
    """A net; what its role does not have is None.

    Attributes
    ----------
    name : str
    role : str or None
        ``ground``, ``supply``, ``reference``, ``input``, ``output``; None for an ordinary net.
    voltage : Spread or None
        Of a supply or reference at 25 °C, tolerance included [V].
    tempco : float
        Nominal, from 25 °C [1/K]; `tempco_spread` has its limits.
    source : str or None
        The supply that a reference hangs on.
    drive : str or None
        ``voltage`` or ``current`` of an input.
    range, survives : (low, high) or None
        Of an input's source value [V or A]; `survives` is None where the file does not say.
    source_resistance : Spread or None
        In series; parallel for a current drive [ohm].
    source_capacitance, load_capacitance : Spread or None
        To ground [F].
    compliance : float
        Bound of a current drive in faults [V].
    cutoff : float or None
        Magnitude below which no law is asked [V or A].
    spacing : str or None
        ``log`` or ``linear``, of an input.
    load : Spread or None
        Resistance from an output to ground [ohm].
    given : frozenset of str
        Attributes that the file states.
    """

    name: str
    role: str | None = None
    voltage: Spread | None = None
    tempco: float = 0.0
    tempco_spread: Spread = field(default=Spread(0.0, 0.0, 0.0))
    source: str | None = None
    drive: str | None = None
    range: Range | None = None
    survives: Range | None = None
    source_resistance: Spread | None = None
    source_capacitance: Spread | None = None
    compliance: float = 15.0
    cutoff: float | None = None
    spacing: str | None = None
    load: Spread | None = None
    load_capacitance: Spread | None = None
    given: frozenset[str] = frozenset()


@dataclass(frozen=True, slots=True)
class Part:
    """A part; every parameter of its kind is an attribute too, with its default where nothing is stated.

    A parameter is a `Spread` in SI, a ``(low, high)`` pair, a truth value or a word; None where it is absent
    and has no default. Limits about zero are spreads with nominal 0.

    Attributes
    ----------
    ref, kind : str
    model : str or None
    package : str
        The reference where the file names none.
    pins : mapping of pin to net
        In the order of the kind; pins written as a list are ``"0"``, ``"1"``.
    mounted, spare : bool
    parameters : mapping of str to parameter
    given : frozenset of str
        Parameters stated in the part or its model.
    """

    ref: str
    kind: str
    model: str | None
    package: str
    pins: Mapping[str, str]
    mounted: bool
    spare: bool
    parameters: Mapping[str, Any]
    given: frozenset[str]

    def __getattr__(self, name: str) -> Any:  # noqa: ANN401
        # Dunder names and `parameters` itself come here only while the part is copied or unpickled.
        if not name.startswith("__") and name != "parameters" and name in self.parameters:
            return self.parameters[name]
        raise AttributeError(self._no_parameter(name))

    def _no_parameter(self, name: str) -> str:
        if name.startswith("__") or name == "parameters":
            return name
        near = difflib.get_close_matches(name, self.parameters, n=1)
        hint = f"; did you mean {near[0]!r}?" if near else ""
        return f"{self.ref} is of kind {self.kind}, which has no parameter {name!r}{hint}"


@dataclass(frozen=True, slots=True)
class Model:
    """A model of a catalogue.

    Attributes
    ----------
    name, kind, note : str
    parameters : object
        Validated parameters as attributes, defaults filled in.
    given : frozenset of str
        Parameters that the model states.
    file : str
        The catalogue it comes from.
    """

    name: str
    kind: str
    note: str
    parameters: Any
    given: frozenset[str]
    file: str


@dataclass(frozen=True, slots=True)
class Package:
    """A package and the dice in it.

    Attributes
    ----------
    name : str
    parts : tuple of str
        Mounted parts in it.
    theta_ja, theta_between : float or None [K/W]
        Die to ambient (of the package, else of its parts' models); between separate dice.
    die : str
        ``single`` or ``separate``.
    ratio_tolerance, ratio_tempco : float or None
        ± limits of a resistor network.
    held_temperature : float or None [K]
    declared : bool
        Whether the file has a table of it.
    """

    name: str
    parts: tuple[str, ...] = ()
    theta_ja: float | None = None
    die: str = "single"
    theta_between: float | None = None
    ratio_tolerance: float | None = None
    ratio_tempco: float | None = None
    held_temperature: float | None = None
    declared: bool = False


@dataclass(frozen=True, slots=True)
class ThermalLink:
    """A thermal resistance `theta` [K/W] between two packages."""

    between: tuple[str, str]
    theta: float


@dataclass(frozen=True, slots=True)
class Matching:
    """A matched group; each mounted member after the first has its own ± mismatch to the first.

    A mismatch of None is that of the members' models.
    """

    name: str
    parts: tuple[str, ...]
    vbe_mismatch: Spread | None = None
    vbe_mismatch_drift: Spread | None = None


@dataclass(frozen=True, slots=True)
class Input:
    """An input net or a photodiode.

    Attributes
    ----------
    name : str
    kind : str
        ``voltage``, ``current`` or ``photodiode``.
    low, high : float
        Range of the source value [V or A].
    log_spacing : bool
    cutoff : float or None
        Magnitude below which no law is asked.
    survives : (low, high) or None
        None where the file does not say; then the range holds.
    compliance : float or None
        Of a current drive in faults [V].
    """

    name: str
    kind: str
    low: float
    high: float
    log_spacing: bool
    cutoff: float | None = None
    survives: Range | None = None
    compliance: float | None = None

    @property
    def unit(self) -> str:
        """Unit of the source value."""
        return "V" if self.kind == "voltage" else "A"


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
