"""Nets, parts, models, packages and inputs of a loaded design: frozen, in SI units."""

from __future__ import annotations

import difflib
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from rulecheck.units import Spread

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
