"""Junction loops: closed loops of junction voltages, virtual grounds and resistive level shifts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import networkx as nx

from .elimination import Row
from .laws import output_law, product_law
from .pairings import Junction, Pairing, complete_pairings, is_balanced
from .relations import Relation, junction_relations
from .wiring import Wiring

if TYPE_CHECKING:
    from .graph import Circuit

NEGLIGIBLE = 0.01  # of the greatest weight: a junction that counts for less is an imbalance of resistors


@dataclass(frozen=True, slots=True)
class JunctionLoop:
    """Junctions whose voltages add up round a loop, or up to an output.

    Attributes
    ----------
    junctions : tuple of Junction
        In the order of the file.
    parts : tuple of str
        Their references.
    level_shifts : tuple of str
        Resistors and potentiometers whose ratios weigh the junctions.
    drops : tuple of str
        Resistors in the loop that carry a junction's current; their voltage adds to the loop.
    amplifiers : tuple of str
        Amplifiers whose held inputs close the loop.
    inputs, references : tuple of str
        Inputs (nets, photodiodes), and supplies, references and sources, whose voltage stands in the loop.
    outputs : tuple of str
        Output nets whose voltage the junctions make up.
    gain : float, optional
        Volts at the first output per volt across the first junction.
    translinear : bool
        The junction voltages cancel and nothing else is left: the currents obey a product law.
    compensated : bool
        The weights cancel, so that the junctions' common part and its drift do.
    product_law : str
        The law of the loop, or of its outputs, in words.
    """

    junctions: tuple[Junction, ...]
    parts: tuple[str, ...]
    level_shifts: tuple[str, ...]
    drops: tuple[str, ...]
    amplifiers: tuple[str, ...]
    inputs: tuple[str, ...]
    references: tuple[str, ...]
    outputs: tuple[str, ...]
    gain: float | None
    translinear: bool
    compensated: bool
    product_law: str

    @property
    def pairings(self) -> tuple[Pairing, ...]:
        """All complete pairings (clockwise part, anticlockwise part), equal weights first."""
        return complete_pairings(self.junctions)


def junction_loops(
    wiring: Wiring,
    graph: Circuit,
    rows: list[Row],
    junctions: Sequence[str],
) -> tuple[JunctionLoop, ...]:
    """Find the junction loops of a circuit.

    Parameters
    ----------
    wiring : Wiring
    graph : networkx.MultiGraph
    rows : list of row
        Its constraints.
    junctions : sequence of str
        Junctions at work, in the order of the file.
    """
    outputs = list(dict.fromkeys(wiring.point_of[net] for net in _output_nets(wiring)))
    reader = _Reader(wiring, rows)
    found: list[JunctionLoop] = []
    for relation in junction_relations(rows, outputs, junctions, _Distances(wiring, graph)):
        loop = reader.read(relation)
        if loop is not None:
            _add(found, loop)
    place = {ref: i for i, ref in enumerate(junctions)}
    return tuple(sorted(found, key=lambda loop: [place[ref] for ref in loop.parts]))


def _output_nets(wiring: Wiring) -> list[str]:
    """Nets that are outputs by their role, or that a requirement speaks of."""
    asked = {requirement.output for requirement in wiring.design.requirements.values()}
    return [name for name, net in wiring.design.nets.items() if net.role == "output" or name in asked]


def _add(found: list[JunctionLoop], loop: JunctionLoop) -> None:
    """Add a loop; one that reaches another output through the same junctions joins the first."""
    for index, other in enumerate(found):
        if loop.outputs and other.outputs and loop.junctions == other.junctions:
            found[index] = replace(
                other,
                outputs=other.outputs + loop.outputs,
                product_law=f"{other.product_law}; {loop.product_law}",
                level_shifts=tuple(dict.fromkeys(other.level_shifts + loop.level_shifts)),
                amplifiers=tuple(dict.fromkeys(other.amplifiers + loop.amplifiers)),
            )
            return
    found.append(loop)


class _Reader:
    """Reads relations as loops."""

    def __init__(self, wiring: Wiring, rows: list[Row]) -> None:
        self.wiring = wiring
        self.place = {ref: i for i, ref in enumerate(wiring.design.parts)}
        self.output_nets = _output_nets(wiring)
        self.carrying = {
            name.removeprefix("sum ")
            for row in rows
            if any(kind == "I" for kind, _ in row)
            for kind, name in row
            if kind == "eq"
        }

    def read(self, relation: Relation) -> JunctionLoop | None:
        """Read a relation as a loop; None where it only says how a junction is biased."""
        row = relation.row
        refs = sorted((name for kind, name in row if kind == "v"), key=self.place.__getitem__)
        weights = {ref: float(row["v", ref]) for ref in refs}
        least = NEGLIGIBLE * max(map(abs, weights.values()))
        weights = {ref: weight for ref, weight in weights.items() if abs(weight) > least}
        first = next(iter(weights.values()))
        junctions = tuple(Junction(r, 1 if w * first > 0 else -1, abs(w / first)) for r, w in weights.items())
        inputs = self._named(row, inputs=True)
        references = self._named(row, inputs=False)
        compensated = is_balanced(junctions)
        biased = bool(references) or len(junctions) == 1 or any(kind == "I" for kind, _ in row)
        if relation.output is None and not compensated and not inputs and biased:
            return None
        shifts, drops = self._resistors(row)
        outputs = self._outputs(relation)
        scale = -float(row["V", relation.output]) if relation.output is not None else -first
        rest = {self._term(kind, name): float(value) / scale for (kind, name), value in row.items() if kind in "IKS"}
        units = {self._term(kind, name): self._unit(kind, name) for kind, name in row if kind in "IKS"}
        ideality = {ref: self._ideality(ref) for ref in weights}
        if outputs:
            law = "; ".join(output_law(o, first / scale, junctions, ideality, rest, units) for o in outputs)
        else:
            law = product_law(junctions, ideality, rest, units)
        return JunctionLoop(
            junctions=junctions,
            parts=tuple(weights),
            level_shifts=shifts,
            drops=drops,
            amplifiers=self._amplifiers(row),
            inputs=inputs,
            references=references,
            outputs=outputs,
            gain=first / scale if outputs else None,
            translinear=compensated and not rest and not outputs,
            compensated=compensated,
            product_law=law,
        )

    def _named(self, row: Row, *, inputs: bool) -> tuple[str, ...]:
        design = self.wiring.design
        names = {name for kind, name in row if kind in "KS" and (name in design.inputs) == inputs}
        nets = tuple(name for name in design.nets if name in names) if names else ()
        return nets + tuple(sorted(names - set(nets), key=self.place.__getitem__))

    def _outputs(self, relation: Relation) -> tuple[str, ...]:
        if relation.output is None:
            return ()
        nets = self.wiring.nets_at[relation.output]
        return tuple(net for net in nets if net in self.output_nets)

    def _amplifiers(self, row: Row) -> tuple[str, ...]:
        held = (name.removeprefix("held ") for kind, name in row if kind == "eq" and name.startswith("held "))
        return tuple(sorted(held, key=self.place.__getitem__))

    def _resistors(self, row: Row) -> tuple[tuple[str, ...], tuple[str, ...]]:
        """Resistors that the relation rests on: those that weigh, and those in a junction's current.

        A resistor matters where the current sums of its two ends count differently in the relation.
        """
        shares = {
            name.removeprefix("sum "): v for (kind, name), v in row.items() if kind == "eq" and name.startswith("sum ")
        }
        shifts: set[str] = set()
        drops: set[str] = set()
        for point in shares:
            for resistance in self.wiring.resistances_at.get(point, ()):
                if resistance.part and shares.get(resistance.a, 0) != shares.get(resistance.b, 0):
                    carries = any(end in shares and end in self.carrying for end in (resistance.a, resistance.b))
                    (drops if carries else shifts).add(resistance.part)
        return tuple(sorted(shifts, key=self.place.__getitem__)), tuple(sorted(drops, key=self.place.__getitem__))

    def _term(self, kind: str, name: str) -> str:
        return f"I({name})" if kind == "I" else name

    def _unit(self, kind: str, name: str) -> str:
        if kind == "I":
            return "ohm"
        if kind == "S":
            return "1" if self.wiring.design.parts[name].kind == "voltage-source" else "ohm"
        return "ohm" if self.wiring.drives_current(name) else "1"

    def _ideality(self, ref: str) -> float:
        return float(self.wiring.design.parts[ref].emission_coefficient.typ)


class _Distances:
    """_Distances between junctions in the graph, without ground, supplies, references and inputs."""

    def __init__(self, wiring: Wiring, graph: Circuit) -> None:
        ways = (
            (a, b)
            for a, b, pin in graph.edges(keys=True)
            if pin not in ("V+", "V-")
            and not any(k == "net" and wiring.point_of[n] in wiring.sourced for k, n in (a, b))
        )
        self.ways: nx.Graph[tuple[str, str]] = nx.Graph(ways)
        self.found: dict[str, dict[tuple[str, str], int]] = {}

    def __call__(self, root: str, other: str) -> int:
        """Count steps from one part to another; more than any way has where nothing joins them."""
        if root not in self.found:
            node = ("part", root)
            self.found[root] = nx.single_source_shortest_path_length(self.ways, node) if node in self.ways else {}
        return self.found[root].get(("part", other), len(self.ways))
