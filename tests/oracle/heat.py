"""The thermal network of packages, dice and links, solved for given powers."""

from __future__ import annotations

import numpy as np

from .reading import nominal, number

DICE_KINDS = ("npn", "pnp", "diode")


class Heat:
    """Temperatures of the parts of a design from the power of each."""

    def __init__(self, design, ambient):
        self.design, self.ambient = design, ambient
        self.packages = {}
        for ref, table in design["parts"].items():
            self.packages.setdefault(table["package"], []).append(ref)
        self.declared = design.get("packages", {})
        self.links = [(*link["between"], number(link["theta"])) for link in design.get("thermal_links", [])]
        self.linked = {name for link in self.links for name in link[:2]}
        self.dice = {name: self.dice_of(name) for name in {*self.packages, *self.linked, *self.declared}}

    def dice_of(self, package):
        """Parts that share a temperature: all of a single die, each by itself on separate ones."""
        refs = self.packages.get(package, [])
        parts = self.design["parts"]
        junctions = [ref for ref in refs if parts[ref]["kind"] in DICE_KINDS]
        separate = len(junctions) >= 2 and not all(parts[ref].get("monolithic", False) for ref in junctions)
        die = self.declared.get(package, {}).get("die", "separate" if separate else "single")
        return [[ref] for ref in refs] if die == "separate" else [refs]

    def theta(self, package, refs):
        """Thermal resistance of a die to ambient, from its package or model; none where neither says."""
        own = self.declared.get(package, {}).get("theta_ja")
        stated = [self.design["parts"][ref].get("theta_ja") for ref in self.packages.get(package, [])]
        values = [nominal(t) for t in ([own] if own is not None else stated) if t is not None]
        return values[0] if values else None

    def start(self):
        """Every part at ambient, or at what holds it."""
        return self.temperatures(dict.fromkeys(self.design["parts"], 0.0))

    def heats(self, ref, package):
        """Whether the power of a part counts in its package."""
        return self.design["parts"][ref]["kind"] != "resistor" or len(self.packages[package]) > 1

    def temperatures(self, power):
        """Temperature of every part."""
        nodes = [(name, k) for name, dice in self.dice.items() for k in range(len(dice))]
        row = {node: k for k, node in enumerate(nodes)}
        g, p = np.zeros((len(nodes), len(nodes))), np.zeros(len(nodes))
        for name, k in nodes:
            self.node_equation(g, p, row, name, k, power)
        for a, b, theta in self.links:
            for i in range(len(self.dice[a])):
                for j in range(len(self.dice[b])):
                    join(g, row[a, i], row[b, j], theta)
        self.hold(g, p, row)
        rise = np.linalg.solve(g, p) if nodes else p
        return {ref: self.ambient + rise[row[name, k]] for name, k in nodes for ref in self.dice[name][k]}

    def node_equation(self, g, p, row, name, k, power):
        """Heat of one die and its way to ambient and to the other dice of its package."""
        here, dice = row[name, k], self.dice[name]
        theta = self.theta(name, dice[k])
        p[here] = sum(power[ref] for ref in dice[k] if self.heats(ref, name))
        between = self.declared.get(name, {}).get("theta_between")
        if between is not None:
            for other in range(k):
                join(g, here, row[name, other], number(between))
        if theta is not None:
            g[here, here] += 1 / theta
        elif name not in self.linked:
            g[here, here], p[here] = 1.0, 0.0

    def hold(self, g, p, row):
        """Packages that an oven keeps at one temperature."""
        for (name, _), here in row.items():
            held = self.declared.get(name, {}).get("held_temperature")
            if held is not None:
                g[here], p[here] = 0.0, number(held) - self.ambient
                g[here, here] = 1.0


def join(g, a, b, theta):
    """A thermal resistance between two nodes."""
    for i, j, sign in ((a, a, 1), (b, b, 1), (a, b, -1), (b, a, -1)):
        g[i, j] += sign / theta
