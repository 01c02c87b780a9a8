"""Packages and dice as nodes of a thermal network: from dissipations to temperatures."""

from __future__ import annotations

from dataclasses import dataclass
from typing import TYPE_CHECKING

import numpy as np

from ..devices.constants import Array, BoolArray

if TYPE_CHECKING:
    from ..design.model import Design

# Dissipation of other parts is not modelled: it is of no weight in these circuits.
DICE_KINDS = ("npn", "pnp", "op-amp")


@dataclass(frozen=True)
class ThermalNetwork:
    """Thermal nodes of a design.

    Attributes
    ----------
    node : dict of str to int
        Thermal node of each part that is not at ambient.
    rise : ndarray, shape (nodes, nodes) [K/W]
        Temperature rise of a node for the power in another.
    from_ambient : ndarray, shape (nodes,)
        Share of the ambient temperature in a node's; the rest is of held packages.
    held : ndarray, shape (nodes,) [K]
        What held packages add to a node's temperature.
    heated : frozenset of str
        Parts whose dissipation counts.
    """

    node: dict[str, int]
    rise: Array
    from_ambient: Array
    held: Array
    heated: frozenset[str]

    def temperatures(self, ambient: Array, power: Array) -> Array:
        """Temperatures of the nodes [K], shape (conditions, nodes), for `power` of the same shape [W]."""
        return ambient[:, None] * self.from_ambient + self.held + power @ self.rise.T


def build_thermal(design: Design) -> ThermalNetwork:
    """Lay out the thermal network of the packages.

    A package without a path to ambient stays at ambient; a linked one without `theta_ja` floats on its links.

    Parameters
    ----------
    design : Design

    Returns
    -------
    ThermalNetwork
    """
    dice = _dice(design)
    size = sum(len(d) for d in dice.values())
    conductance = np.zeros((size, size))
    to_ambient, held_at = np.zeros(size), np.full(size, np.nan)
    for name, nodes in dice.items():
        _package(design, name, nodes, conductance, to_ambient, held_at)
    for link in design.thermal_links:
        one, other = (sorted(set(dice[p].values())) for p in link.between)
        for a in one:
            for b in other:
                _join(conductance, a, b, 1 / link.theta)
    node = {ref: i for nodes in dice.values() for ref, i in nodes.items() if ref in design.parts}
    shared = frozenset(
        r for r in node if design.parts[r].kind in DICE_KINDS or len(design.packages[design.parts[r].package].parts) > 1
    )
    return _solve(node, conductance, to_ambient, held_at, shared)


def _dice(design: Design) -> dict[str, dict[str, int]]:
    """Thermal nodes by package and part; parts of one single die share a node."""
    linked = {name for link in design.thermal_links for name in link.between}
    dice: dict[str, dict[str, int]] = {}
    count = 0
    for name, package in design.packages.items():
        refs = [r for r in package.parts if r in design.parts]
        alone = len(refs) < 2 and name not in linked
        passive = all(design.parts[r].kind not in DICE_KINDS for r in refs)
        if not refs and name not in linked:
            continue
        if alone and passive and package.held_temperature is None:
            continue
        if package.die == "separate" and len(refs) > 1:
            dice[name] = {ref: count + i for i, ref in enumerate(refs)}
            count += len(refs)
        else:
            dice[name] = dict.fromkeys(refs or [f"({name})"], count)
            count += 1
    return dice


def _package(
    design: Design, name: str, nodes: dict[str, int], conductance: Array, to_ambient: Array, held_at: Array
) -> None:
    package = design.packages[name]
    own = sorted(set(nodes.values()))
    if package.held_temperature is not None:
        held_at[own] = package.held_temperature
    if package.theta_ja:
        to_ambient[own] = 1 / package.theta_ja
    if package.theta_between:
        for i, a in enumerate(own):
            for b in own[i + 1 :]:
                _join(conductance, a, b, 1 / package.theta_between)


def _join(conductance: Array, a: int, b: int, g: float) -> None:
    conductance[a, a] += g
    conductance[b, b] += g
    conductance[a, b] -= g
    conductance[b, a] -= g


def _solve(
    node: dict[str, int], conductance: Array, to_ambient: Array, held_at: Array, heated: frozenset[str]
) -> ThermalNetwork:
    size = len(to_ambient)
    held = np.isfinite(held_at)
    anchored = _reach(conductance, (to_ambient > 0) | held)
    rise, from_ambient, offset = np.zeros((size, size)), np.ones(size), np.zeros(size)
    from_ambient[held], offset[held] = 0.0, held_at[held]
    free = np.flatnonzero(anchored & ~held)
    if free.size:
        matrix = conductance[np.ix_(free, free)] + np.diag(to_ambient[free])
        inverse = np.linalg.inv(matrix)
        rise[np.ix_(free, free)] = inverse
        from_ambient[free] = inverse @ to_ambient[free]
        offset[free] = inverse @ (-conductance[np.ix_(free, np.flatnonzero(held))] @ held_at[held])
    return ThermalNetwork(node, rise, from_ambient, offset, heated)


def _reach(conductance: Array, anchored: BoolArray) -> BoolArray:
    """Nodes with a thermal path to an anchored one."""
    reached = anchored.copy()
    for _ in range(len(reached)):
        reached = reached | ((conductance != 0) @ reached)
    return reached
