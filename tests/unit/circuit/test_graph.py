"""The circuit as a networkx graph."""

import networkx as nx
import pytest
from circuits import USUAL, amplifier, design_of, resistor

from rulecheck.circuit.graph import build_graph


def test_every_pin_is_an_edge_keyed_by_its_name():
    """Two pins of a part on one net are two edges, keyed by pin."""
    graph = build_graph(design_of(USUAL, [amplifier("U1", "VX", "VOUT", "VOUT")]))
    assert set(graph[("part", "U1")][("net", "VOUT")]) == {"IN-", "OUT"}
    assert graph.degree(("part", "U1")) == 5


def test_nodes_carry_kind_and_role_in_the_order_of_the_file():
    """Nodes are nets, then parts, each in the order of the file, with kind and role."""
    graph = build_graph(design_of(USUAL, [resistor("R2", "1 kohm", "VX", "N"), resistor("R1", "1 kohm", "N", "GND")]))
    assert [name for kind, name in graph if kind == "part"] == ["R2", "R1"]
    assert graph.nodes[("part", "R1")]["kind"] == "resistor"
    assert graph.nodes[("net", "VX")]["role"] == "input"
    assert graph.nodes[("net", "N")]["role"] is None


def test_the_graph_cannot_be_changed():
    """Rules share the graph, so it refuses edits."""
    graph = build_graph(design_of(USUAL, [resistor("R1", "1 kohm", "VX", "GND")]))
    with pytest.raises(nx.NetworkXError, match="Frozen"):
        graph.remove_node(("part", "R1"))
