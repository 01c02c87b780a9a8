"""Parameters of transistors, diodes and amplifiers, as models state them and parts override them."""

from __future__ import annotations

import math
from typing import Annotated, ClassVar, Literal

from rulecheck.design.fields import NON_NEGATIVE, POSITIVE, Flag, Table, Text, key, required
from rulecheck.design.readers import Range
from rulecheck.errors import QuantityError
from rulecheck.units import Spread, Unit

ZERO = Spread.exactly(0.0)
INFINITE = Spread.exactly(math.inf)


def _exactly(value: float) -> Spread:
    return Spread.exactly(value)


Plain = Annotated[Spread, Unit("1"), POSITIVE]
Volts = Annotated[Spread | None, Unit("V"), POSITIVE]
VoltageLimit = Annotated[Spread | None, Unit("V", plus_minus=True)]
DriftLimit = Annotated[Spread | None, Unit("V/K", plus_minus=True)]
Current = Annotated[Spread | None, Unit("A"), POSITIVE]
Leakage = Annotated[Spread, Unit("A"), NON_NEGATIVE]
Ohms = Annotated[Spread, Unit("ohm"), NON_NEGATIVE]
Farads = Annotated[Spread, Unit("F"), NON_NEGATIVE]
Hertz = Annotated[Spread | None, Unit("Hz"), POSITIVE]
Seconds = Annotated[Spread, Unit("s"), NON_NEGATIVE]
Kelvin = Annotated[Spread | None, Unit("K"), POSITIVE]
ThermalResistance = Annotated[Spread | None, Unit("K/W"), POSITIVE]


class Parameters(Table):
    """Parameters that a model states and a part may override."""

    needed: ClassVar[tuple[str, ...]] = ()
    """Those that must be known of every part."""


class TransistorParameters(Parameters):
    """Parameters of a bipolar transistor."""

    needed: ClassVar[tuple[str, ...]] = ("saturation_current", "forward_beta")

    saturation_current: Current = key("saturation current at 25 °C; must be known of every transistor")
    emission_coefficient: Plain = key("emission coefficient n of the base-emitter junction (1)", _exactly(1.0))
    forward_beta: Annotated[Spread | None, Unit("1"), POSITIVE] = key(
        "forward current gain at 25 °C; must be known of every transistor"
    )
    reverse_beta: Plain = key("reverse current gain at 25 °C (2)", _exactly(2.0))
    beta_exponent: Annotated[Spread, Unit("1")] = key(
        "exponent of the current gains in absolute temperature (1.5)", _exactly(1.5)
    )
    early_voltage: Annotated[Spread, Unit("V"), POSITIVE] = key("Early voltage (infinite)", INFINITE)
    knee_current: Annotated[Spread, Unit("A"), POSITIVE] = key("knee current of high injection (infinite)", INFINITE)
    leakage_saturation_current: Leakage = key("saturation current of the base leakage junction (0)", ZERO)
    leakage_emission_coefficient: Plain = key("emission coefficient of the base leakage junction (2)", _exactly(2.0))
    bulk_emitter_resistance: Ohms = key("resistance in the emitter, which bends the log law (0)", ZERO)
    base_resistance: Ohms = key("resistance in the base (0)", ZERO)
    collector_resistance: Ohms = key("resistance in the collector (0)", ZERO)
    emitter_capacitance: Farads = key("base-emitter capacitance at small current (0)", ZERO)
    collector_capacitance: Farads = key("base-collector capacitance (0)", ZERO)
    transit_time: Seconds = key("forward transit time (0)", ZERO)
    bandgap: Annotated[Spread, Unit("V"), POSITIVE] = key("bandgap voltage (1.12 V)", _exactly(1.12))
    temperature_exponent: Annotated[Spread, Unit("1")] = key(
        "exponent of the saturation current in absolute temperature (3)", _exactly(3.0)
    )
    monolithic: Flag = key("whether it shares its die with the others of its package (false)", False)
    vbe_mismatch: VoltageLimit = key("± base-emitter mismatch to a matched transistor")
    vbe_mismatch_drift: DriftLimit = key("± drift of that mismatch with temperature")
    vbe_spread: Annotated[Spread, Unit("V", plus_minus=True)] = key(
        "± base-emitter spread of unmatched parts, for the whole spread of the saturation current (30 mV)",
        Spread.about_zero(0.03),
    )
    emitter_base_breakdown: Volts = key("least emitter-base breakdown voltage")
    collector_emitter_breakdown: Volts = key("least collector-emitter breakdown voltage")
    collector_current: Current = key("greatest collector current")
    log_range: Annotated[tuple[float, float] | None, Range("A")] = key(
        "collector currents between which the maker states log conformity, [low, high]"
    )
    theta_ja: ThermalResistance = key("thermal resistance from junction to ambient")
    junction: Annotated[Spread | None, Unit("degC")] = key("greatest junction temperature")


class DiodeParameters(Parameters):
    """Parameters of a diode."""

    needed: ClassVar[tuple[str, ...]] = ("saturation_current",)

    saturation_current: Current = key("saturation current at 25 °C; must be known of every diode")
    emission_coefficient: Plain = key("emission coefficient n (1)", _exactly(1.0))
    series_resistance: Ohms = key("series resistance (0)", ZERO)
    capacitance: Farads = key("junction capacitance (0)", ZERO)
    transit_time: Seconds = key("transit time (0)", ZERO)
    reverse_leakage: Leakage = key("reverse leakage at 25 °C beyond the saturation current (0)", ZERO)
    leakage_doubling: Annotated[Spread, Unit("K"), POSITIVE] = key(
        "temperature rise that doubles the reverse leakage (10 K)", _exactly(10.0)
    )
    reverse_voltage: Volts = key("greatest reverse voltage")
    forward_current: Current = key("greatest forward current")
    bandgap: Annotated[Spread, Unit("V"), POSITIVE] = key("bandgap voltage (1.12 V)", _exactly(1.12))
    temperature_exponent: Annotated[Spread, Unit("1")] = key(
        "exponent of the saturation current in absolute temperature (3)", _exactly(3.0)
    )


class Headroom(Table):
    """Least distance from the negative rail (low) and the positive one (high); negative: beyond the rail."""

    called: ClassVar[str] = "a headroom"

    low: Annotated[Spread, Unit("V")] = required("least distance from V-")
    high: Annotated[Spread, Unit("V")] = required("least distance from V+")


class _TotalSupply(Unit):
    """A total supply: stated by its greatest value alone it begins at zero, its least alone is no range."""

    def read_spread(self, value: object) -> Spread:
        """Spread of the table."""
        if isinstance(value, dict):
            if "max" not in value:
                raise QuantityError("the greatest total supply, max, is missing; { min, max } is expected")
            value = {"min": "0 V", **value}
        return super().read_spread(value)


class AmplifierParameters(Parameters):
    """Parameters of an operational amplifier."""

    needed: ClassVar[tuple[str, ...]] = ("open_loop_gain", "gain_bandwidth", "input_headroom", "output_headroom")

    open_loop_gain: Annotated[Spread | None, Unit("1"), POSITIVE] = key(
        'open-loop gain at DC, 8e5 or "118 dB"; must be known of every amplifier'
    )
    gain_bandwidth: Hertz = key("gain-bandwidth product; must be known of every amplifier")
    second_pole: Annotated[Spread, Unit("Hz"), POSITIVE] = key("second pole of the open-loop gain (infinite)", INFINITE)
    output_resistance: Ohms = key("open-loop output resistance (0)", ZERO)
    input_capacitance: Farads = key("capacitance between the inputs (0)", ZERO)
    common_mode_capacitance: Farads = key("capacitance of each input to ground (0)", ZERO)
    offset_voltage: VoltageLimit = key("± offset voltage")
    offset_drift: DriftLimit = key("± drift of the offset voltage")
    bias_current: Annotated[Spread | None, Unit("A")] = key("bias current, typ and max, positive into the pin")
    offset_current: Annotated[Spread | None, Unit("A", plus_minus=True)] = key("± difference of the bias currents")
    bias_current_doubling: Kelvin = key("temperature rise that doubles the bias current (none)")
    common_mode_rejection: Annotated[Spread | None, Unit("dB")] = key('common-mode rejection, "100 dB"')
    supply_rejection: Annotated[Spread | None, Unit("dB")] = key('supply rejection, "100 dB"')
    input_headroom: Headroom | None = key(
        "least distance of an input from the rails, { low, high }; must be known of every amplifier"
    )
    output_headroom: Headroom | None = key(
        "least distance of the output from the rails, { low, high }; must be known of every amplifier"
    )
    output_load: Annotated[Spread | None, Unit("ohm"), POSITIVE] = key("load at which output_headroom holds")
    output_current: Current = key("greatest output current")
    supply: Annotated[Spread | None, _TotalSupply("V"), NON_NEGATIVE] = key("total supply voltage, { min, max }")
    input_clamps: Literal["rails", "differential", "both", "none"] = key(
        "where input clamp diodes lead (rails)", "rails"
    )
    input_current: Current = key("greatest current into an input clamp")
    phase_reversal: Flag = key("whether the output reverses when an input leaves its range (false)", False)
    slew_rate: Annotated[Spread | None, Unit("V/us"), POSITIVE] = key("slew rate")
    voltage_noise: Annotated[Spread | None, Unit("V/sqrt(Hz)"), NON_NEGATIVE] = key("input voltage noise density")
    voltage_noise_corner: Annotated[Spread | None, Unit("Hz"), NON_NEGATIVE] = key("1/f corner of voltage noise")
    current_noise: Annotated[Spread | None, Unit("A/sqrt(Hz)"), NON_NEGATIVE] = key("input current noise density")
    current_noise_corner: Annotated[Spread | None, Unit("Hz"), NON_NEGATIVE] = key("1/f corner of current noise")
    supply_current: Annotated[Spread | None, Unit("A"), NON_NEGATIVE] = key("supply current of one amplifier")
    theta_ja: ThermalResistance = key("thermal resistance from junction to ambient")


class ModelTable(Parameters):
    """What every model of a catalogue has."""

    kind: str
    note: Text = key("what the model stands for, and where its figures come from", "")


class TransistorModel(TransistorParameters, ModelTable):
    """A transistor model of a catalogue."""

    called: ClassVar[str] = "a transistor model"

    kind: Literal["npn", "pnp"] = required("polarity")


class DiodeModel(DiodeParameters, ModelTable):
    """A diode model of a catalogue."""

    called: ClassVar[str] = "a diode model"

    kind: Literal["diode"] = required("kind of part")


class AmplifierModel(AmplifierParameters, ModelTable):
    """An amplifier model of a catalogue."""

    called: ClassVar[str] = "an op-amp model"

    kind: Literal["op-amp"] = required("kind of part")


#: Tables of models by the kind of part they are for.
MODEL_TABLES: dict[str, type[ModelTable]] = {
    "npn": TransistorModel,
    "pnp": TransistorModel,
    "diode": DiodeModel,
    "op-amp": AmplifierModel,
}
NOT_PARAMETERS = frozenset({"kind", "note"})
