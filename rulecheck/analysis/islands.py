"""The circuit cut into pieces that are solved by themselves, each kind of piece once.

A piece is an island, or several that share the heat of a package. Pieces that are the same circuit are
solved together, at the distinct conditions that any of them meets.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING, Any

import networkx as nx
import numpy as np

from ..circuit.islands import Copy, Island, equal_islands, islands
from ..circuit.wiring import is_ideal
from ..design.frozen import FrozenDict
from ..devices.constants import Array, IntArray
from .conditions import Conditions, typical_row
from .network import in_circuit
from .solution import Solution, solve_circuit
from .thermal import build_thermal
from .values import Overrides

if TYPE_CHECKING:
    from ..circuit.graph import Circuit
    from ..design.model import Design


@dataclass(frozen=True)
class Piece:
    """A circuit to solve, and all its places in the design.

    Attributes
    ----------
    design : Design
        The parts and nets of the first place alone.
    copies : tuple of Copy
        The places, the first included.
    """

    design: Design
    copies: tuple[Copy, ...]


@dataclass(frozen=True)
class Placed:
    """A solution as it stands at one place of the design.

    Attributes
    ----------
    solution : Solution
    index : ndarray of int, shape (conditions,)
        Row of the solution for each condition of the design.
    parts, nets : mapping of str to str
        Names at this place to names in the solution.
    """

    solution: Solution
    index: IntArray
    parts: Mapping[str, str]
    nets: Mapping[str, str]


def cut(design: Design, circuit: Circuit, apart: frozenset[str] = frozenset()) -> tuple[Piece, ...]:
    """Cut a design into pieces.

    Parameters
    ----------
    design : Design
    circuit : networkx.MultiGraph
    apart : frozenset of str
        Parts and nets that are changed against the file: their pieces are solved by themselves.

    Returns
    -------
    tuple of Piece
    """
    whole = _joined(design, islands(design, circuit))
    changed = tuple(i for i in whole if apart.intersection((*i.parts, *i.nets, *i.boundary)))
    same = equal_islands(design, circuit, tuple(i for i in whole if i not in changed))
    own = tuple((_itself(island),) for island in changed)
    return tuple(Piece(_excerpt(design, copies[0].island), tuple(copies)) for copies in (*own, *same))


def _itself(island: Island) -> Copy:
    return Copy(island, {p: p for p in island.parts}, {n: n for n in (*island.nets, *island.boundary)})


def _joined(design: Design, found: tuple[Island, ...]) -> tuple[Island, ...]:
    """Join islands whose parts warm each other, or that hang on one source part, whose current is of them all."""
    thermal = build_thermal(design)
    place = {ref: i for i, island in enumerate(found) for ref in island.parts}
    nodes: nx.Graph[int] = nx.Graph()
    nodes.add_nodes_from(range(len(found)))
    by_node: dict[int, set[int]] = {}
    for ref, node in thermal.node.items():
        by_node.setdefault(node, set()).add(place[ref])
    warms = np.argwhere(thermal.rise != 0)
    for a, b in ((int(a), int(b)) for a, b in warms):
        together = sorted(by_node.get(a, set()) | by_node.get(b, set()))
        nodes.add_edges_from((together[0], other) for other in together)
    for net in design.nets.values():
        if not is_ideal(net):
            touching = [i for i, island in enumerate(found) if net.name in island.boundary]
            nodes.add_edges_from((touching[0], other) for other in touching[1:])
    groups = [sorted(group) for group in nx.connected_components(nodes)]
    return tuple(_join(design, [found[i] for i in group]) for group in sorted(groups))


def _join(design: Design, group: list[Island]) -> Island:
    if len(group) == 1:
        return group[0]
    parts, nets, boundary = (
        {name for island in group for name in getattr(island, kind)} for kind in ("parts", "nets", "boundary")
    )
    return Island(
        tuple(p for p in design.parts if p in parts),
        tuple(n for n in design.nets if n in nets),
        tuple(n for n in design.nets if n in boundary),
    )


def _excerpt(design: Design, island: Island) -> Design:
    """The design with the parts and nets of one island only; grounds stay."""
    held = in_circuit(design)
    parts = {ref: design.parts[ref] for ref in island.parts if ref in held}
    wanted = {*island.nets, *island.boundary}
    nets = {n: net for n, net in design.nets.items() if n in wanted or net.role == "ground"}
    packages = {part.package for part in parts.values()}
    linked = {p for link in design.thermal_links if packages.intersection(link.between) for p in link.between}
    return replace(
        design,
        parts=FrozenDict(parts),
        nets=FrozenDict(nets),
        inputs=FrozenDict({n: s for n, s in design.inputs.items() if n in nets or n in parts}),
        packages=FrozenDict({n: p for n, p in design.packages.items() if n in packages | linked}),
        thermal_links=tuple(link for link in design.thermal_links if linked.issuperset(link.between)),
    )


def solve_pieces(
    pieces: tuple[Piece, ...],
    conditions: Conditions,
    *,
    with_clamps: bool,
    overrides: Overrides,
    temperatures: Mapping[str, Array],
    cache: dict[Any, Any],
) -> tuple[Placed, ...]:
    """Solve every piece at the distinct conditions its places meet.

    Returns
    -------
    tuple of Placed
        One a place.
    """
    placed: list[Placed] = []
    for piece in pieces:
        parts = set(piece.design.parts)
        own = {key: value for key, value in overrides.items() if key[0] in parts or key[0] in piece.design.nets}
        imposed = {ref: t for ref, t in temperatures.items() if ref in parts}
        apart = bool(imposed) or any(np.size(v) > 1 for v in own.values())
        local, indices = _local_conditions(piece, conditions, whole=apart or len(pieces) == len(piece.copies) == 1)
        solution = solve_circuit(
            piece.design, local, with_clamps=with_clamps, overrides=own, temperatures=imposed, cache=cache
        )
        placed += [
            Placed(solution, index, {b: a for a, b in copy.parts.items()}, {b: a for a, b in copy.nets.items()})
            for copy, index in zip(piece.copies, indices, strict=True)
        ]
    return tuple(placed)


def _local_conditions(piece: Piece, conditions: Conditions, *, whole: bool) -> tuple[Conditions, list[IntArray]]:
    """Conditions of a piece, and for each of its places the row of each condition of the design."""
    names = list(typical_row(piece.design))
    size = conditions.size
    if whole:
        return replace(conditions, values={n: conditions.values[n] for n in names}), [np.arange(size)]
    absent = list(conditions.absent)
    tables = []
    for copy in piece.copies:
        there = {**copy.nets, **copy.parts}
        columns = [conditions.values[there.get(n, n)] for n in names]
        columns += [conditions.absent[n].astype(float) for n in absent]
        tables.append(np.stack(columns, axis=1))
    unique, inverse = np.unique(np.concatenate(tables), axis=0, return_inverse=True)
    values = {n: unique[:, i] for i, n in enumerate(names)}
    off = {n: unique[:, len(names) + i] > 0 for i, n in enumerate(absent)}
    rows = inverse.reshape(len(piece.copies), size)
    return Conditions(values, None, off), list(rows)
