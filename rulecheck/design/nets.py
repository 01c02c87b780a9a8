"""Tables of nets, one class a role; inputs one a drive."""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from rulecheck.design.fields import (
    NON_NEGATIVE,
    POSITIVE,
    TOLERANCE,
    Table,
    Text,
    key,
    required,
)
from rulecheck.design.parameters import ZERO
from rulecheck.design.readers import Range
from rulecheck.units import Spread, Unit

Capacitance = Annotated[Spread | None, Unit("F"), NON_NEGATIVE]


class NetTable(Table):
    """What every net with a table has."""


class Ground(NetTable):
    """A ground net."""

    called: ClassVar[str] = "a ground net"

    role: Literal["ground"] = required("what the net is")


class Supply(NetTable):
    """A supply: an ideal source from the net to ground."""

    called: ClassVar[str] = "a supply"

    role: Literal["supply"] = required("what the net is")
    voltage: Annotated[Spread, Unit("V")] = required("voltage to ground at 25 °C")
    tolerance: Annotated[float | None, Unit("%"), TOLERANCE] = key("± tolerance of the voltage's magnitude")
    tempco: Annotated[Spread, Unit("ppm/K")] = key("temperature coefficient, signed, from 25 °C (0)", ZERO)


class Reference(NetTable):
    """A reference: an ideal source from the net to ground."""

    called: ClassVar[str] = "a reference"

    role: Literal["reference"] = required("what the net is")
    voltage: Annotated[Spread, Unit("V")] = required("voltage to ground at 25 °C")
    tolerance: Annotated[float | None, Unit("%"), TOLERANCE] = key("± tolerance of the voltage's magnitude")
    tempco: Annotated[Spread, Unit("ppm/K")] = key("temperature coefficient, signed, from 25 °C (0)", ZERO)
    source: Text | None = key("the supply without which it is off", alias="from")


class InputTable(NetTable):
    """What every input net has."""

    role: Literal["input"] = required("what the net is")
    drive: str
    range: tuple[float, float]
    source_capacitance: Capacitance = key("capacitance of the source to ground")
    spacing: Literal["log", "linear"] | None = key(
        "how its range is divided (log where both ends have one sign and differ by a factor of 10 or more)"
    )


class VoltageInput(InputTable):
    """An input driven by a voltage."""

    called: ClassVar[str] = "a voltage input"

    drive: Literal["voltage"] = required("what drives it")
    range: Annotated[tuple[float, float], Range("V")] = required("range of the source voltage, [low, high]")
    survives: Annotated[tuple[float, float] | None, Range("V")] = key(
        "source voltages it must survive, [low, high] (the range)"
    )
    cutoff: Annotated[float | None, Unit("V"), NON_NEGATIVE] = key("magnitude below which no law is asked")
    source_resistance: Annotated[Spread | None, Unit("ohm"), NON_NEGATIVE] = key("resistance in series (0)")


class CurrentInput(InputTable):
    """An input driven by a current."""

    called: ClassVar[str] = "a current input"

    drive: Literal["current"] = required("what drives it")
    range: Annotated[tuple[float, float], Range("A")] = required(
        "range of the source current into the net, [low, high]"
    )
    survives: Annotated[tuple[float, float] | None, Range("A")] = key(
        "source currents it must survive, [low, high] (the range)"
    )
    cutoff: Annotated[float | None, Unit("A"), NON_NEGATIVE] = key("magnitude below which no law is asked")
    source_resistance: Annotated[Spread | None, Unit("ohm"), POSITIVE] = key("resistance in parallel (infinite)")
    compliance: Annotated[float, Unit("V"), POSITIVE] = key("bound of its voltage in faults (15 V)", 15.0)


class Output(NetTable):
    """An output."""

    called: ClassVar[str] = "an output"

    role: Literal["output"] = required("what the net is")
    load: Annotated[Spread | None, Unit("ohm"), POSITIVE] = key("resistance to ground")
    load_capacitance: Capacitance = key("capacitance to ground")


#: Tables of nets by role; those of inputs by drive.
NET_TABLES: dict[str, type[NetTable]] = {
    "ground": Ground,
    "supply": Supply,
    "reference": Reference,
    "output": Output,
}
INPUT_TABLES: dict[str, type[NetTable]] = {"voltage": VoltageInput, "current": CurrentInput}
ROLES = ("ground", "supply", "reference", "input", "output")
