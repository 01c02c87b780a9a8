"""Natural modes with little damping or none, told apart by the amplifiers whose loops make them."""

from __future__ import annotations

from dataclasses import dataclass

import networkx as nx
import numpy as np

from ..devices.constants import Array, BoolArray
from .loops import IslandLoops
from .stability import DAMPING_SPAN, TAKES_PART, damping_of


@dataclass(frozen=True, slots=True)
class Ringing:
    """Modes that ring or grow, in which the same amplifiers take part; arrays over conditions, NaN where none does.

    Attributes
    ----------
    amplifiers : tuple of str
        In the order of the island.
    damping : ndarray
        Least damping ratio; that of a real mode that grows is -1.
    frequency : ndarray [Hz]
        Of the mode with the least damping ratio.
    growth : ndarray [1/s]
        Largest real part.
    """

    amplifiers: tuple[str, ...]
    damping: Array
    frequency: Array
    growth: Array


def ringing(island: IslandLoops, damping: float, judged: BoolArray) -> tuple[Ringing, ...]:
    """Modes of an island whose damping ratio is below a limit, grouped by the amplifiers that take part.

    Two stages of one island may ring each by itself: modes belong together where an amplifier takes part in both.

    Parameters
    ----------
    island : IslandLoops
    damping : float
        The limit.
    judged : ndarray of bool, shape (conditions,)
        Conditions that count.

    Returns
    -------
    tuple of Ringing
        In the order of their first amplifiers.
    """
    place = island.placed.index
    s = island.circuit.modes.frequency[place]
    ratio = damping_of(s[..., None], 2 * np.pi * DAMPING_SPAN * island.system.widest)
    low = judged[:, None] & (ratio < damping)
    if not low.any():
        return ()
    share = _shares(island)[place]
    taking_part = low[..., None] & (share > 0) & (share >= TAKES_PART * share.max(axis=-1, keepdims=True))
    together = np.einsum("nma,nmb->ab", taking_part.astype(float), taking_part.astype(float))
    groups = nx.connected_components(nx.from_numpy_array(together))
    found = []
    for group in sorted(sorted(g) for g in groups if together[min(g)].any()):
        own = np.where(taking_part[..., group].any(axis=-1), ratio, np.inf)
        rows, worst = np.arange(len(own)), own.argmin(axis=-1)
        rings = np.isfinite(own[rows, worst])
        growth = np.where(np.isfinite(own), s.real, -np.inf).max(axis=-1)
        figures = (own[rows, worst], np.abs(s[rows, worst]) / (2 * np.pi), growth)
        names = tuple(island.amplifiers[a] for a in group)
        found.append(Ringing(names, *(np.where(rings, figure, np.nan) for figure in figures)))
    return tuple(found)


def _shares(island: IslandLoops) -> Array:
    """Share of each amplifier's own state in each mode, shape (conditions solved, modes, amplifiers)."""
    modes, system = island.circuit.modes, island.system
    place = {int(column): i for i, column in enumerate(modes.columns)}
    share = np.abs(modes.right.swapaxes(1, 2) * modes.left)
    states = zip(system.state_columns, system.internal_columns, strict=True)
    own = [[place[int(column)] for column in pair if int(column) in place] for pair in states]
    return np.stack([share[..., columns].sum(axis=-1) for columns in own], axis=-1)
