"""The circuit of a design at one point: its sources, loads and parts as elements."""

from __future__ import annotations

import math

from .elements import (
    BOLTZMANN,
    CHARGE,
    NORMAL,
    Amplifier,
    Conductor,
    Current,
    Junction,
    Transistor,
    Voltage,
    thermal_voltage,
)
from .newton import Equations
from .reading import Parameters, nominal, number

CLAMP_CURRENT = 1e-14
CLAMP_RESISTANCE = 20.0


def ambient_of(design):
    """The nominal ambient temperature of a design."""
    return nominal(design.get("environment", {}).get("ambient", "25 degC"))


class Network(Equations):
    """The equations of one design at one point, with the parts at given temperatures."""

    def __init__(self, design, point, temperatures, clamps=False):
        super().__init__()
        self.design, self.point, self.temperatures = design, point, temperatures
        self.ambient = point.get("ambient", ambient_of(design))
        self.capacitances, self.amplifiers, self.transistors = [], {}, {}
        self.resistors, self.clamped = {}, {}
        self.nets()
        for ref, table in design["parts"].items():
            getattr(self, table["kind"].replace("-", "_"))(ref, table, Parameters(table))
        if clamps:
            self.clamp_diodes()

    def value(self, name, otherwise):
        """A condition by name: what the point says, else its nominal."""
        return self.point.get(name, otherwise)

    def nets(self):
        """Sources and loads of the declared nets; every net that a pin names becomes a node."""
        tables = self.design.get("nets", {})
        self.ground |= {name for name, table in tables.items() if table.get("role") == "ground"}
        for table in self.design["parts"].values():
            pins = table["pins"]
            for net in pins.values() if isinstance(pins, dict) else pins:
                self.node(net)
        for name, table in tables.items():
            if name not in self.ground:
                self.node(name)
                getattr(self, f"net_{table['role']}")(name, table)

    def net_supply(self, name, table):
        """An ideal source to ground, with its temperature coefficient from 25 degC."""
        drift = 1 + number(table.get("tempco", 0.0)) * (self.ambient - NORMAL)
        self.fixed(name, self.value(name, nominal(table["voltage"])) * drift)

    net_reference = net_supply

    def fixed(self, node, voltage):
        """An ideal source from a node to ground."""
        self.add(Voltage(node, "0", voltage, node), f"branch:{node}")

    def net_input(self, name, table):
        """The source of an input, behind or across its resistance."""
        low, high = (number(end) for end in table["range"])
        value = self.value(name, (low + high) / 2)
        resistance = number(table.get("source_resistance", 0.0))
        self.capacitances.append((name, "0", number(table.get("source_capacitance", 0.0))))
        if table["drive"] == "current":
            self.add(Current("0", name, value))
            if resistance:
                self.add(Conductor(name, "0", resistance))
        elif resistance:
            self.node(f"{name} source")
            self.fixed(f"{name} source", value)
            self.add(Conductor(f"{name} source", name, resistance))
        else:
            self.fixed(name, value)

    def net_output(self, name, table):
        """The load of an output."""
        if "load" in table:
            self.add(Conductor(name, "0", nominal(table["load"])))
        self.capacitances.append((name, "0", nominal(table.get("load_capacitance", 0.0))))

    def temperature(self, ref):
        """The temperature of a part."""
        return self.temperatures.get(ref, self.ambient)

    def resistor(self, ref, table, p):
        """A resistor at its temperature; none at all is a link."""
        a, b = table["pins"]
        resistance = p.value * (1 + p.tempco * (self.temperature(ref) - NORMAL))
        if resistance:
            self.resistors[ref] = self.add(Conductor(a, b, resistance))
        else:
            self.add(Voltage(a, b, 0.0, ref), f"branch:{ref}")

    def potentiometer(self, ref, table, p):
        """Two resistors about the wiper."""
        pins, whole = table["pins"], p.value * (1 + p.tempco * (self.temperature(ref) - NORMAL))
        position = self.value(ref, p.position)
        for end, share in (("END1", position), ("END2", 1 - position)):
            if share:
                self.add(Conductor(pins[end], pins["WIPER"], whole * share))
            else:
                self.add(Voltage(pins[end], pins["WIPER"], 0.0, ref), f"branch:{ref}")

    def capacitor(self, ref, table, p):
        """A capacitor, open for direct current."""
        self.capacitances.append((*table["pins"], p.value))

    def behind(self, ref, table, pin, resistance):
        """The node behind an ohmic resistance, or the pin itself where there is none."""
        outer = table["pins"][pin]
        if not resistance:
            return outer
        inner = self.node(f"{ref} inside {pin}")
        self.add(Conductor(outer, inner, resistance))
        return inner

    def npn(self, ref, table, p):
        """A transistor behind its ohmic resistances."""
        nodes = [
            self.behind(ref, table, pin, resistance)
            for pin, resistance in (
                ("C", p.collector_resistance), ("B", p.base_resistance), ("E", p.bulk_emitter_resistance),
            )
        ]  # fmt: skip
        self.transistors[ref] = self.add(Transistor(p, table["kind"], nodes, self.temperature(ref)))

    pnp = npn

    def diode(self, ref, table, p):
        """A diode behind its series resistance."""
        t = self.temperature(ref)
        n = p.emission_coefficient
        grown = (t / NORMAL) ** (p.temperature_exponent / n) * math.exp(
            CHARGE * p.bandgap / (n * BOLTZMANN) * (1 / NORMAL - 1 / t)
        )
        leakage = p.reverse_leakage * 2 ** ((t - NORMAL) / p.leakage_doubling)
        anode = self.behind(ref, table, "A", p.series_resistance)
        junction = Junction(anode, table["pins"]["K"], p.saturation_current * grown, n * thermal_voltage(t), leakage)
        junction.fixed_capacitance, junction.transit_time = p.capacitance, p.transit_time
        self.add(junction)

    def photodiode(self, ref, table, p):
        """A photocurrent out of the anode, across a junction, a shunt and a capacitance."""
        a, k = table["pins"]["A"], table["pins"]["K"]
        t = self.temperature(ref)
        low, high = (number(end) for end in table["photocurrent"])
        self.add(Current(k, a, self.value(ref, (low + high) / 2)))
        dark = p.dark_current * 2 ** ((t - NORMAL) / p.dark_current_doubling)
        if dark:
            self.add(Junction(a, k, dark, thermal_voltage(t)))
        if math.isfinite(p.shunt_resistance):
            self.add(Conductor(a, k, p.shunt_resistance))
        self.capacitances.append((a, k, p.capacitance))

    def current_source(self, ref, table, p):
        """A source that drives current out of its P pin."""
        p_net, n_net = table["pins"]["P"], table["pins"]["N"]
        self.add(Current(n_net, p_net, p.value * (1 + p.tempco * (self.ambient - NORMAL))))

    def voltage_source(self, ref, table, p):
        """An ideal source between two nets."""
        drift = 1 + p.tempco * (self.ambient - NORMAL)
        self.add(Voltage(table["pins"]["P"], table["pins"]["N"], p.value * drift, ref), f"branch:{ref}")

    def op_amp(self, ref, table, p):
        """An amplifier with its input capacitances."""
        amplifier = Amplifier(p, ref, table["pins"], self.temperature(ref))
        self.amplifiers[ref] = self.add(amplifier, amplifier.z, amplifier.branch)
        plus, minus = table["pins"]["IN+"], table["pins"]["IN-"]
        self.capacitances.append((plus, minus, p.input_capacitance))
        self.capacitances.append((plus, "0", p.common_mode_capacitance))
        self.capacitances.append((minus, "0", p.common_mode_capacitance))

    def clamp_diodes(self):
        """The diodes that stand between the pins and the rails of every amplifier in fault scenarios."""
        for ref, amplifier in self.amplifiers.items():
            pins, kind = amplifier.pins, amplifier.p.table.get("input_clamps", "rails")
            if kind in ("rails", "both"):
                for pin in ("IN+", "IN-", "OUT"):
                    self.clamp(f"{ref}.{pin}.hi", pins[pin], pins["V+"], ref)
                    self.clamp(f"{ref}.{pin}.lo", pins["V-"], pins[pin], ref)
            if kind in ("differential", "both"):
                self.clamp(f"{ref}.IN+.across", pins["IN+"], pins["IN-"], ref)
                self.clamp(f"{ref}.IN-.across", pins["IN-"], pins["IN+"], ref)

    def clamp(self, name, anode, cathode, ref):
        """One clamp diode behind its series resistance."""
        inner = self.node(f"clamp {name}")
        self.add(Conductor(anode, inner, CLAMP_RESISTANCE))
        scale = thermal_voltage(self.temperature(ref))
        self.clamped[name] = self.add(Junction(inner, cathode, CLAMP_CURRENT, scale))
