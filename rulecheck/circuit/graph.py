"""The circuit as a graph: parts and nets are nodes, every pin is an edge."""

from __future__ import annotations

from typing import TYPE_CHECKING

import networkx as nx

if TYPE_CHECKING:
    from rulecheck.design.model import Design

    Circuit = nx.MultiGraph[tuple[str, str]]


def build_graph(design: Design) -> Circuit:
    """Graph of the mounted parts of a design, frozen.

    Parameters
    ----------
    design : Design

    Returns
    -------
    networkx.MultiGraph
        Nodes ``("part", ref)`` with `kind`, `model`, `package`, and ``("net", name)`` with `role`; an edge a
        pin, keyed by the pin's name. Nodes and edges stand in the order of the file.
    """
    graph: Circuit = nx.MultiGraph()
    for name, net in design.nets.items():
        graph.add_node(("net", name), role=net.role)
    for ref, part in design.parts.items():
        graph.add_node(("part", ref), kind=part.kind, model=part.model, package=part.package)
        for pin, net_name in part.pins.items():
            graph.add_edge(("part", ref), ("net", net_name), key=pin)
    nx.freeze(graph)
    return graph
