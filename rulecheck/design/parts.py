"""Tables of parts, one class a kind."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, ClassVar, Literal

from rulecheck.design.fields import (
    FRACTION,
    NON_NEGATIVE,
    POSITIVE,
    TOLERANCE,
    Flag,
    Table,
    Text,
    key,
    required,
)
from rulecheck.design.parameters import (
    ZERO,
    AmplifierParameters,
    DiodeParameters,
    Parameters,
    TransistorParameters,
)
from rulecheck.design.readers import Pins, Range
from rulecheck.units import Spread, Unit

Nets = Mapping[str, str]
Tolerance = Annotated[float | None, Unit("%"), TOLERANCE]
Tempco = Annotated[Spread, Unit("ppm/K")]


class PartTable(Table):
    """What every part has."""

    kind: str
    pins: Nets
    package: Text | None = key("the package it is in (one of its own)")
    mounted: Flag = key("false leaves the part out (true)", True)
    spare: Flag = key("true exempts it from connectivity (false)", False)


class Modelled(PartTable, Parameters):
    """A part that may take its parameters from a model."""

    model: Text | None = key("the model of a catalogue that its parameters come from")


class Resistor(PartTable):
    """A resistor."""

    called: ClassVar[str] = "a resistor"

    kind: Literal["resistor"] = required("kind of part")
    pins: Annotated[Nets, Pins(listed=True)] = required("its two nets, as a list")
    value: Annotated[Spread, Unit("ohm", letter_code="R"), NON_NEGATIVE] = required(
        'resistance, "4.7 kohm" or "4K7"; 0 ohm is a link'
    )
    tolerance: Tolerance = key("± tolerance of the value")
    tempco: Tempco = key("temperature coefficient, signed, from 25 °C (0)", ZERO)
    tempco_tolerance: Annotated[Spread | None, Unit("ppm/K", plus_minus=True)] = key(
        "± limit of the temperature coefficient about its nominal"
    )
    power: Annotated[Spread | None, Unit("W"), POSITIVE] = key("power rating")


class Potentiometer(PartTable):
    """A potentiometer."""

    called: ClassVar[str] = "a potentiometer"

    kind: Literal["potentiometer"] = required("kind of part")
    pins: Annotated[Nets, Pins("END1", "WIPER", "END2")] = required("nets of END1, WIPER and END2")
    value: Annotated[Spread, Unit("ohm", letter_code="R"), POSITIVE] = required("resistance from end to end")
    tolerance: Tolerance = key("± tolerance of the value")
    tempco: Tempco = key("temperature coefficient, signed, from 25 °C (0)", ZERO)
    position: Annotated[Spread, Unit("1"), FRACTION] = key(
        "fraction of the value between END1 and WIPER, 0 to 1 (the whole travel)", Spread(0.0, 0.5, 1.0)
    )
    adjusts: Text | None = key("the requirement whose error it is set to null")


class Capacitor(PartTable):
    """A capacitor."""

    called: ClassVar[str] = "a capacitor"

    kind: Literal["capacitor"] = required("kind of part")
    pins: Annotated[Nets, Pins(listed=True)] = required("its two nets, as a list")
    value: Annotated[Spread, Unit("F", letter_code="F"), NON_NEGATIVE] = required('capacitance, "4.7 nF" or "4n7"')
    tolerance: Tolerance = key("± tolerance of the value")
    voltage: Annotated[Spread | None, Unit("V"), POSITIVE] = key("voltage rating")


class Diode(DiodeParameters, Modelled):
    """A diode."""

    called: ClassVar[str] = "a diode"

    kind: Literal["diode"] = required("kind of part")
    pins: Annotated[Nets, Pins("A", "K")] = required("nets of anode A and cathode K")


class Transistor(TransistorParameters, Modelled):
    """A bipolar transistor."""

    called: ClassVar[str] = "a transistor"

    kind: Literal["npn", "pnp"] = required("polarity")
    pins: Annotated[Nets, Pins("C", "B", "E")] = required("nets of collector C, base B and emitter E")
    vbe_offset: Annotated[Spread | None, Unit("V")] = key("the known base-emitter error of this one unit, signed")


class Amplifier(AmplifierParameters, Modelled):
    """An operational amplifier."""

    called: ClassVar[str] = "an op-amp"

    kind: Literal["op-amp"] = required("kind of part")
    pins: Annotated[Nets, Pins("IN+", "IN-", "OUT", "V+", "V-")] = required("nets of IN+, IN-, OUT, V+ and V-")
    offset: Annotated[Spread | None, Unit("V")] = key("the known offset voltage of this one unit, signed")


class VoltageSource(PartTable):
    """A voltage source."""

    called: ClassVar[str] = "a voltage source"

    kind: Literal["voltage-source"] = required("kind of part")
    pins: Annotated[Nets, Pins("P", "N", listed=True)] = required("nets of P and N")
    value: Annotated[Spread, Unit("V")] = required("voltage of P above N at 25 °C")
    tolerance: Tolerance = key("± tolerance of the value")
    tempco: Tempco = key("temperature coefficient, signed, from 25 °C (0)", ZERO)
    source: Text | None = key("the supply without which it is off", alias="from")


class CurrentSource(PartTable):
    """A current source."""

    called: ClassVar[str] = "a current source"

    kind: Literal["current-source"] = required("kind of part")
    pins: Annotated[Nets, Pins("P", "N", listed=True)] = required("nets of P, which the current leaves, and N")
    value: Annotated[Spread, Unit("A")] = required("current out of P at 25 °C")
    tolerance: Tolerance = key("± tolerance of the value")
    tempco: Tempco = key("temperature coefficient, signed, from 25 °C (0)", ZERO)
    compliance: Annotated[Spread | None, Unit("V"), NON_NEGATIVE] = key("least voltage across it")
    source: Text | None = key("the supply without which it is off", alias="from")


class Photodiode(PartTable):
    """A photodiode, which is an input too."""

    called: ClassVar[str] = "a photodiode"

    kind: Literal["photodiode"] = required("kind of part")
    pins: Annotated[Nets, Pins("A", "K")] = required("nets of anode A and cathode K")
    photocurrent: Annotated[tuple[float, float], Range("A")] = required(
        "range of the photocurrent out of A, [low, high]"
    )
    survives: Annotated[tuple[float, float] | None, Range("A")] = key(
        "photocurrents it must survive, [low, high] (the range)"
    )
    capacitance: Annotated[Spread | None, Unit("F"), NON_NEGATIVE] = key("capacitance")
    dark_current: Annotated[Spread | None, Unit("A"), NON_NEGATIVE] = key("dark current at 25 °C, typ and max")
    dark_current_doubling: Annotated[Spread, Unit("K"), POSITIVE] = key(
        "temperature rise that doubles the dark current (10 K)", Spread.exactly(10.0)
    )
    shunt_resistance: Annotated[Spread | None, Unit("ohm"), POSITIVE] = key("shunt resistance")
    reverse_voltage: Annotated[Spread | None, Unit("V"), POSITIVE] = key("greatest reverse voltage")


class Connector(PartTable):
    """A connector: it ties pins to nets and is nothing else."""

    called: ClassVar[str] = "a connector"

    kind: Literal["connector"] = required("kind of part")
    pins: Annotated[Nets, Pins(free=True)] = required("nets by pin")


#: Tables of parts by kind.
PART_TABLES: dict[str, type[PartTable]] = {
    "resistor": Resistor,
    "potentiometer": Potentiometer,
    "capacitor": Capacitor,
    "diode": Diode,
    "npn": Transistor,
    "pnp": Transistor,
    "op-amp": Amplifier,
    "voltage-source": VoltageSource,
    "current-source": CurrentSource,
    "photodiode": Photodiode,
    "connector": Connector,
}
NOT_PARAMETERS = frozenset({"kind", "pins", "model", "package", "mounted", "spare"})
