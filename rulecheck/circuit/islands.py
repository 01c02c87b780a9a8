"""Islands: pieces of the circuit that only ground and ideal sources join, and those that are the same circuit."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

import networkx as nx
from networkx.algorithms.isomorphism import GraphMatcher

from .wiring import is_ideal, joined_by_sources, voltage_sources

if TYPE_CHECKING:
    from rulecheck.design.model import Design, Net, Part, ThermalLink

    from .graph import Circuit

    Labelled = nx.Graph[tuple[str, str]]

Node = tuple[str, str]
SYMMETRIC = ("resistor", "capacitor")
NOT_ELECTRICAL = frozenset({"adjusts"})
ROUNDS = 6  # of the hash; what it leaves apart or together is settled by matching


@dataclass(frozen=True, slots=True)
class Island:
    """Parts joined by nets that no ideal source holds.

    Attributes
    ----------
    parts : tuple of str
        In the order of the file.
    nets : tuple of str
        Nets inside, in the order of the file.
    boundary : tuple of str
        Nets of ideal sources that the parts touch, in the order of the file.
    """

    parts: tuple[str, ...]
    nets: tuple[str, ...]
    boundary: tuple[str, ...]


@dataclass(frozen=True, slots=True)
class Copy:
    """An island that is the same circuit as another.

    Attributes
    ----------
    island : Island
    parts, nets : mapping of str to str
        The other island's parts, and its nets with the boundary, to those of this one.
    """

    island: Island
    parts: Mapping[str, str]
    nets: Mapping[str, str]


def islands(design: Design, graph: Circuit) -> tuple[Island, ...]:
    """Cut the circuit at ground and at the nets that ideal sources hold.

    Parameters
    ----------
    design : Design
    graph : networkx.MultiGraph
        Graph of the design.

    Returns
    -------
    tuple of Island
        In the order of their first parts. A part that stands between such nets only is an island by itself;
        a net without parts belongs to none.
    """
    held = ideal_nets(design)
    inner = graph.subgraph(node for node in graph if node[0] == "part" or node[1] not in held)
    place = {ref: i for i, ref in enumerate(design.parts)}
    found = []
    for nodes in nx.connected_components(inner):
        refs = sorted((name for kind, name in nodes if kind == "part"), key=place.__getitem__)
        touched = {net for ref in refs for net in design.parts[ref].pins.values()}
        if refs:
            nets = tuple(net for net in design.nets if ("net", net) in nodes)
            found.append(Island(tuple(refs), nets, tuple(n for n in design.nets if n in touched and n in held)))
    return tuple(sorted(found, key=lambda island: place[island.parts[0]]))


def ideal_nets(design: Design) -> frozenset[str]:
    """Names of nets that an ideal source holds, or a chain of voltage sources from such a net."""
    return joined_by_sources((n for n, net in design.nets.items() if is_ideal(net)), voltage_sources(design))


def equal_islands(design: Design, graph: Circuit, found: tuple[Island, ...]) -> tuple[tuple[Copy, ...], ...]:
    """Group islands that are the same circuit with the same values.

    Parameters
    ----------
    design : Design
    graph : networkx.MultiGraph
        Graph of the design.
    found : tuple of Island

    Returns
    -------
    tuple of groups
        Each begins with the island that the others are copies of, as the copy of itself. Parts correspond in
        kind, model, parameters and thermal surroundings; nets inside in role and load; nets of the boundary in
        what drives them, for inputs whatever their names. Fixed nets of the boundary are the same net.
    """
    links = _links(design)
    groups: dict[str, list[tuple[Labelled, list[Copy]]]] = {}
    order: list[list[Copy]] = []
    for island in found:
        labelled = _labelled(design, graph, island, links)
        same_hash = groups.setdefault(
            nx.weisfeiler_lehman_graph_hash(labelled, node_attr="label", edge_attr="label", iterations=ROUNDS), []
        )
        for model, copies in same_hash:
            match = _match(model, labelled)
            if match is not None:
                copies.append(_copy(island, match))
                break
        else:
            copies = [_copy(island, {node: node for node in labelled})]
            same_hash.append((labelled, copies))
            order.append(copies)
    return tuple(tuple(copies) for copies in order)


def _copy(island: Island, match: Mapping[Node, Node]) -> Copy:
    parts = {a[1]: b[1] for a, b in match.items() if a[0] == "part"}
    nets = {a[1]: b[1] for a, b in match.items() if a[0] == "net"}
    return Copy(island, parts, nets)


def _match(first: Labelled, second: Labelled) -> dict[Node, Node] | None:
    def same(a: Mapping[str, str], b: Mapping[str, str]) -> bool:
        return a["label"] == b["label"]

    matcher = GraphMatcher(first, second, node_match=same, edge_match=same)
    return dict(matcher.mapping) if matcher.is_isomorphic() else None


def _labelled(design: Design, graph: Circuit, island: Island, links: Mapping[str, list[ThermalLink]]) -> Labelled:
    """Simple graph of an island, its packages included, with all that makes two of them the same as labels."""
    labelled: Labelled = nx.Graph()
    packages = {design.parts[ref].package for ref in island.parts}
    for ref in island.parts:
        part = design.parts[ref]
        labelled.add_node(("part", ref), label=_part_label(part))
        labelled.add_edge(("part", ref), ("package", part.package), label="")
        for net, pins in _pins(graph, ref, part):
            labelled.add_edge(("part", ref), net, label=pins)
    for name in packages:
        outer = [link for link in links.get(name, ()) if not packages.issuperset(link.between)]
        labelled.add_node(("package", name), label=_package_label(design, name, outer))
        for link in links.get(name, ()):
            if link not in outer:
                labelled.add_edge(*(("package", end) for end in link.between), label=f"link {link.theta}")
    inside = set(island.nets)
    for name in (*island.nets, *island.boundary):
        labelled.add_node(("net", name), label=_net_label(design.nets[name], inside=name in inside))
    return labelled


def _links(design: Design) -> dict[str, list[ThermalLink]]:
    """Thermal links by package."""
    found: dict[str, list[ThermalLink]] = {}
    for link in design.thermal_links:
        for name in link.between:
            found.setdefault(name, []).append(link)
    return found


def _pins(graph: Circuit, ref: str, part: Part) -> Iterator[tuple[Node, str]]:
    """Nets of a part with its pins there; the ends of resistors and capacitors are alike."""
    for net, edges in graph[("part", ref)].items():
        yield net, " ".join("end" if part.kind in SYMMETRIC else pin for pin in sorted(edges))


def _part_label(part: Part) -> str:
    values = sorted((key, value) for key, value in part.parameters.items() if key not in NOT_ELECTRICAL)
    return f"{part.kind} {part.model} {values}"


def _package_label(design: Design, name: str, outer: Iterable[ThermalLink]) -> str:
    """Thermal surroundings: the package's own figures, how many parts it has, and links out of the island."""
    package = design.packages[name]
    links = sorted((link.theta, *sorted(set(link.between) - {name})) for link in outer)
    figures = (package.theta_ja, package.die, package.theta_between, package.held_temperature)
    return f"package {figures} {package.ratio_tolerance} {package.ratio_tempco} {len(package.parts)} {links}"


def _net_label(net: Net, *, inside: bool) -> str:
    if net.role in ("ground", "supply", "reference"):
        return f"fixed {net.name!r}"
    figures = (net.role, net.drive, net.range, net.survives, net.source_resistance, net.source_capacitance)
    loads = (net.cutoff, net.spacing, net.compliance, net.load, net.load_capacitance)
    return f"{'inside' if inside else 'boundary'} {figures} {loads}"
