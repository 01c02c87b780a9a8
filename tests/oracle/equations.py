"""A one-point solver of the circuit equations: residuals of Kirchhoff's laws with complex-step derivatives.

Every device is written from its equation for a whole stack of trial vectors, so that one call of the
residual with a complex step on each unknown gives the Jacobian to full precision. An amplifier at a limit is no
special case: its internal unknown ``z`` is its output while inside the limits, and the distance beyond them is
added to the input difference, which makes the equation continuous and solvable by the same Newton steps.
"""

from __future__ import annotations

import math

import numpy as np

from .reading import Parameters, nominal, number, read

BOLTZMANN = 1.380649e-23
CHARGE = 1.602176634e-19
NORMAL = 298.15
STEP = 1e-30
CLAMP_CURRENT = 1e-14
CLAMP_RESISTANCE = 20.0


class NoSolution(Exception):
    """Newton's method found no operating point."""


def thermal_voltage(temperature):
    """The thermal voltage kT/q."""
    return BOLTZMANN * temperature / CHARGE


def exponential(x):
    """An exponential that goes on as a straight line where no solution lies, so that trial steps stay finite."""
    limit = 300.0
    capped = np.where(x.real > limit, limit, x)
    return np.where(x.real > limit, math.exp(limit) * (1 + x - limit), np.exp(capped))


class Junction:
    """A two-terminal exponential element ``I(V)`` from anode to cathode."""

    def __init__(self, anode, cathode, saturation, scale, leakage=0.0):
        self.anode, self.cathode = anode, cathode
        self.saturation, self.scale, self.leakage = saturation, scale, leakage

    def current(self, v):
        """Current from anode to cathode."""
        e = exponential(v / self.scale)
        reverse = np.where(v.real < 0, 1 - e, 0)
        return self.saturation * (e - 1) - self.leakage * reverse

    def junctions(self):
        """Pairs of nodes whose forward step is limited."""
        return [(self.anode, self.cathode, 1.0)]

    def stamp(self, net):
        """Add the current to the residual."""
        net.flow(self.anode, self.cathode, self.current(net.v(self.anode) - net.v(self.cathode)))


class Transistor:
    """The bipolar transistor between its internal nodes."""

    def __init__(self, p, kind, nodes, temperature):
        ratio = temperature / NORMAL
        vt = thermal_voltage(temperature)
        grown = ratio**p.temperature_exponent * math.exp(
            CHARGE * p.bandgap / BOLTZMANN * (1 / NORMAL - 1 / temperature)
        )
        self.sign = 1.0 if kind == "npn" else -1.0
        self.c, self.b, self.e = nodes
        self.saturation = p.saturation_current * grown
        self.beta_f = p.forward_beta * ratio**p.beta_exponent
        self.beta_r = p.reverse_beta * ratio**p.beta_exponent
        self.scale = p.emission_coefficient * vt
        self.early, self.knee = p.early_voltage, p.knee_current
        self.leak = p.leakage_saturation_current * grown ** (1 / p.leakage_emission_coefficient)
        self.leak_scale = p.leakage_emission_coefficient * vt
        self.mismatch = p.vbe_offset

    def transport(self, vbe, vbc):
        """Forward and reverse currents and the base charge."""
        forward = self.saturation * (exponential((vbe + self.mismatch) / self.scale) - 1)
        reverse = self.saturation * (exponential(vbc / self.scale) - 1)
        charge = (1 + np.sqrt(1 + 4 * forward / self.knee)) / (2 * (1 - vbc / self.early))
        return forward, reverse, charge

    def currents(self, vbe, vbc):
        """Collector and base currents of an npn, positive into the pins."""
        forward, reverse, charge = self.transport(vbe, vbc)
        leak = self.leak * (exponential((vbe + self.mismatch) / self.leak_scale) - 1)
        collector = (forward - reverse) / charge - reverse / self.beta_r
        return collector, forward / self.beta_f + reverse / self.beta_r + leak

    def voltages(self, net):
        """Internal base-emitter and base-collector voltages with the sign of an npn."""
        base = net.v(self.b)
        return self.sign * (base - net.v(self.e)), self.sign * (base - net.v(self.c))

    def junctions(self):
        """Pairs of nodes whose forward step is limited."""
        return [(self.b, self.e, self.sign), (self.b, self.c, self.sign)]

    def stamp(self, net):
        """Add the pin currents to the residual."""
        ic, ib = self.currents(*self.voltages(net))
        net.leave(self.c, self.sign * ic)
        net.leave(self.b, self.sign * ib)
        net.leave(self.e, -self.sign * (ic + ib))

    def diffusion(self, net):
        """Slope of the collector transport current over the base-emitter voltage, for the transit time."""
        vbe, vbc = self.voltages(net)
        forward, _, charge = self.transport(vbe + 1j * STEP, vbc)
        return (forward / charge).imag[0] / STEP


class Conductor:
    """A resistance between two nodes."""

    def __init__(self, a, b, resistance):
        self.a, self.b, self.resistance = a, b, resistance

    def stamp(self, net):
        """Add the current to the residual."""
        net.flow(self.a, self.b, (net.v(self.a) - net.v(self.b)) / self.resistance)


class Current:
    """A constant current from one node to another through the source."""

    def __init__(self, a, b, current):
        self.a, self.b, self.current = a, b, current

    def stamp(self, net):
        """Add the current to the residual."""
        net.flow(self.a, self.b, self.current * net.scale_sources)


class Voltage:
    """An ideal voltage source with its branch current as an unknown."""

    def __init__(self, p, n, voltage, name):
        self.p, self.n, self.voltage, self.branch = p, n, voltage, f"branch:{name}"

    def stamp(self, net):
        """Add the branch current, and the equation that fixes the voltage."""
        net.flow(self.p, self.n, net.v(self.branch))
        net.equation(self.branch, net.v(self.p) - net.v(self.n) - self.voltage * net.scale_sources)


class Amplifier:
    """The op-amp: a gain between limits that follow its supplies, an output resistance, input and supply currents."""

    def __init__(self, p, ref, pins, temperature):
        self.p, self.ref, self.pins = p, ref, pins
        self.gain = p.open_loop_gain
        self.headroom = (p.end("output_headroom", "low"), p.end("output_headroom", "high"))
        doubling = 2 ** ((temperature - NORMAL) / p.bias_current_doubling) if p.bias_current_doubling else 1.0
        self.bias = {"IN+": p.bias_current * doubling, "IN-": p.bias_current * doubling}
        self.z, self.branch = f"z:{ref}", f"branch:{ref}"

    def limits(self, net):
        """Lowest and highest internal output voltage."""
        return net.v(self.pins["V-"]) + self.headroom[0], net.v(self.pins["V+"]) - self.headroom[1]

    def powered(self, net):
        """Whether the supply is more than both headrooms."""
        low, high = self.limits(net)
        return high[0].real > low[0].real

    def state(self, net):
        """The name of the state at the solution."""
        if not self.powered(net):
            return "unpowered"
        low, high = (limit[0].real for limit in self.limits(net))
        z = net.v(self.z)[0].real
        return "high" if z > high else "low" if z < low else "linear"

    def stamp(self, net):
        """Add the pin currents and the two equations of gain and output."""
        pins = self.pins
        for pin in ("IN+", "IN-"):
            net.leave(pins[pin], self.bias[pin] * net.scale_sources)
        out = net.v(self.branch)
        net.leave(pins["OUT"], -out)
        quiescent = self.p.supply_current
        net.leave(pins["V+"], quiescent + np.where(out.real > 0, out, 0))
        net.leave(pins["V-"], -quiescent + np.where(out.real > 0, 0, out))
        z = net.v(self.z)
        difference = net.v(pins["IN+"]) - net.v(pins["IN-"]) + self.p.offset
        if not self.powered(net):
            net.equation(self.z, z - difference)
            net.equation(self.branch, out)
            return
        low, high = self.limits(net)
        inside = np.where(z.real > high.real, high, np.where(z.real < low.real, low, z))
        net.equation(self.z, (z - inside) + inside / min(self.gain, net.gain_limit) - difference)
        net.equation(self.branch, net.v(pins["OUT"]) - inside + self.p.output_resistance * out)


class Network:
    """The equations of one design at one point, with the parts at given temperatures."""

    def __init__(self, design, point, temperatures, clamps=False):
        self.design, self.point, self.temperatures = design, point, temperatures
        self.ambient = point.get("ambient", ambient_of(design))
        self.elements, self.capacitances, self.amplifiers, self.transistors = [], [], {}, {}
        self.resistors, self.clamped, self.index, self.ground = {}, {}, {}, set()
        self.scale_sources, self.gain_limit, self.shunt = 1.0, math.inf, 0.0
        self.nets()
        for ref, table in design["parts"].items():
            getattr(self, table["kind"].replace("-", "_"))(ref, table, Parameters(table))
        if clamps:
            self.clamp_diodes()

    # ---- what the elements read and write -------------------------------------------------------------
    def node(self, name):
        """A node by name, made known to the vector of unknowns."""
        if name not in self.ground and name not in self.index:
            self.index[name] = len(self.index)
        return name

    def v(self, name):
        """The unknown of that name in every trial vector; zero for ground."""
        return self.zero if name in self.ground else self.x[self.index[name]]

    def leave(self, node, current):
        """Count a current that leaves a node into an element."""
        if node not in self.ground:
            self.f[self.index[node]] += current

    def flow(self, a, b, current):
        """Count a current from one node through an element to another."""
        self.leave(a, current)
        self.leave(b, -current)

    def equation(self, name, value):
        """Set the equation that belongs to an extra unknown."""
        self.f[self.index[name]] += value

    def add(self, element, *extra):
        """Take an element in, with the unknowns that it brings."""
        for name in extra:
            self.node(name)
        self.elements.append(element)
        return element

    # ---- nets and parts ---------------------------------------------------------------------------------
    def value(self, name, otherwise):
        """A condition by name: what the point says, else its nominal."""
        return self.point.get(name, otherwise)

    def nets(self):
        """Sources and loads of the declared nets; every net that a pin names becomes a node."""
        tables = self.design.get("nets", {})
        self.ground = {name for name, table in tables.items() if table.get("role") == "ground"}
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
        self.ground.add("0")

    def net_input(self, name, table):
        """The source of an input, behind or across its resistance."""
        low, high = (number(end) for end in table["range"])
        value = self.value(name, (low + high) / 2)
        resistance = number(table.get("source_resistance", 0.0))
        self.capacitances.append((name, "0", number(table.get("source_capacitance", 0.0))))
        self.ground.add("0")
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
        self.ground.add("0")
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
        junction = Junction(
            anode, table["pins"]["K"], p.saturation_current * grown, n * thermal_voltage(t), leakage
        )
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
        self.ground.add("0")
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
                self.clamp(f"{ref}.IN+.differential", pins["IN+"], pins["IN-"], ref)
                self.clamp(f"{ref}.IN-.differential", pins["IN-"], pins["IN+"], ref)

    def clamp(self, name, anode, cathode, ref):
        """One clamp diode behind its series resistance."""
        inner = self.node(f"clamp {name}")
        self.add(Conductor(anode, inner, CLAMP_RESISTANCE))
        scale = thermal_voltage(self.temperature(ref))
        self.clamped[name] = self.add(Junction(inner, cathode, CLAMP_CURRENT, scale))

    # ---- the equations and their solution ---------------------------------------------------------------
    def residual(self, x):
        """Residual of every equation for every column of trial unknowns."""
        self.x, self.f, self.zero = x, np.zeros_like(x), np.zeros_like(x[0])
        for element in self.elements:
            element.stamp(self)
        if self.shunt:
            nodes = [row for name, row in self.index.items() if ":" not in name]
            self.f[nodes] += self.shunt * x[nodes]
        return self.f

    def jacobian(self, x):
        """Residual and Jacobian at one real vector, by one complex step per unknown."""
        n = len(x)
        trial = np.repeat(x[:, None], n + 1, axis=1).astype(complex)
        trial[np.arange(n), np.arange(1, n + 1)] += 1j * STEP
        f = self.residual(trial)
        return f[:, 0].real, f[:, 1:].imag / STEP

    def damping(self, x, step):
        """Share of a Newton step that keeps nodes in reach and every junction from running away forwards."""
        reach = 10.0 if self.gain_limit < math.inf else 1e3
        nodes = [row for name, row in self.index.items() if ":" not in name]
        share = min(1.0, reach / max(np.max(np.abs(step[nodes])), 1e-300))
        for element in self.elements:
            for p, n, sign in element.junctions() if hasattr(element, "junctions") else ():
                now = sign * (self.entry(x, p) - self.entry(x, n))
                move = sign * (self.entry(step, p) - self.entry(step, n))
                allowed = max(0.1, 0.5 - now)
                if move > allowed:
                    share = min(share, allowed / move)
        return share

    def entry(self, x, name):
        """One entry of a vector of unknowns; zero for ground."""
        return 0.0 if name in self.ground else x[self.index[name]]

    def newton(self, x, tries=400):
        """Newton's method from a start."""
        best = math.inf  # smallest full step so far: below 1e-9 it is rounding once it no longer falls
        for _ in range(tries):
            f, matrix = self.jacobian(x)
            rows = np.max(np.abs(matrix), axis=1)
            if not np.all(np.isfinite(matrix)) or np.any(rows == 0):
                raise NoSolution
            try:
                step = -np.linalg.solve(matrix / rows[:, None], f / rows)
            except np.linalg.LinAlgError:
                raise NoSolution from None
            share = self.damping(x, step)
            x = x + share * step
            size = np.max(np.abs(step) / (np.abs(x) + 1e-6))
            if share == 1.0 and size < 1e-9 and size >= best / 2:
                return x
            best = min(best, size) if share == 1.0 else math.inf
        raise NoSolution

    def staged(self, attribute, stages, x):
        """Newton's method while one property goes through its stages."""
        kept = getattr(self, attribute)
        try:
            for stage in stages:
                setattr(self, attribute, stage)
                x = self.newton(x)
        finally:
            setattr(self, attribute, kept)
        return self.newton(x)

    def solve(self, start=None):
        """The operating point, by the first road that arrives."""
        flat = np.zeros(len(self.index))
        roads = [
            lambda: self.newton(flat),
            lambda: self.staged("gain_limit", 10.0 ** np.arange(0, 10), flat),
            lambda: self.staged("shunt", 10.0 ** np.arange(-2, -16, -1.0), flat),
            lambda: self.staged("scale_sources", np.linspace(0.02, 1, 50), flat),
        ]
        if start is not None and len(start) == len(flat):
            roads.insert(0, lambda: self.newton(start))
        for road in roads:
            try:
                return road()
            except NoSolution:
                continue
        raise NoSolution(f"{self.design['design']['title']} at {self.point}")


def ambient_of(design):
    """The nominal ambient temperature of a design."""
    return nominal(design.get("environment", {}).get("ambient", "25 degC"))


class Point:
    """The solved state of one design at one point, with names for its figures."""

    def __init__(self, network, x):
        self.network, self.x = network, x
        network.residual(x[:, None].astype(complex))

    def voltage(self, net):
        """Voltage of a net."""
        return float(self.network.entry(self.x, net))

    def voltages(self):
        """Voltage of every net that the design names."""
        internal = (":", " inside ", "clamp ", " source")
        return {
            name: self.voltage(name) for name in self.network.index if not any(mark in name for mark in internal)
        }

    def states(self):
        """State of every amplifier."""
        return {ref: amplifier.state(self.network) for ref, amplifier in self.network.amplifiers.items()}

    def transistor_currents(self, ref):
        """Collector and base current into the pins."""
        q = self.network.transistors[ref]
        ic, ib = q.currents(*q.voltages(self.network))
        return q.sign * float(ic[0].real), q.sign * float(ib[0].real)

    def clamp_currents(self):
        """Current of every clamp diode."""
        result = {}
        for name, diode in self.network.clamped.items():
            v = np.array([self.voltage(diode.anode) - self.voltage(diode.cathode)], dtype=complex)
            result[name] = float(diode.current(v)[0].real)
        return result

    def dissipation(self):
        """Power that each part turns to heat: transistors and amplifiers always, resistors as they stand."""
        return {ref: self.part_power(ref, table) for ref, table in self.network.design["parts"].items()}

    def part_power(self, ref, table):
        """Power that one part turns to heat."""
        pins, kind = table["pins"], table["kind"]
        if kind in ("npn", "pnp"):
            ic, ib = self.transistor_currents(ref)
            emitter = self.voltage(pins["E"])
            return (self.voltage(pins["C"]) - emitter) * ic + (self.voltage(pins["B"]) - emitter) * ib
        if kind == "op-amp":
            amplifier = self.network.amplifiers[ref]
            out = float(self.network.entry(self.x, amplifier.branch))
            high, low = self.voltage(pins["V+"]), self.voltage(pins["V-"])
            rail = high if out > 0 else low
            return (high - low) * amplifier.p.supply_current + (rail - self.voltage(pins["OUT"])) * out
        if ref in self.network.resistors:
            return (self.voltage(pins[0]) - self.voltage(pins[1])) ** 2 / self.network.resistors[ref].resistance
        return 0.0


def solve(text, point, catalogue_text=None, clamps=False, start=None):
    """The operating point of a design at one point, with its temperatures."""
    from .heat import Heat

    design = read(text, catalogue_text)
    heat = Heat(design, point.get("ambient", ambient_of(design)))
    temperatures = heat.start()
    for _ in range(100):
        network = Network(design, point, temperatures, clamps)
        solved = Point(network, network.solve(start))
        start = solved.x
        new = heat.temperatures(solved.dissipation())
        moved = max((abs(new[ref] - temperatures[ref]) for ref in new), default=0.0)
        temperatures = new
        if moved < 1e-7:
            solved.temperatures = temperatures
            return solved
    raise NoSolution("temperatures do not settle")
