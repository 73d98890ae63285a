"""The graph of a pipeline: order of execution and circles."""

from __future__ import annotations

from collections.abc import Mapping

import networkx as nx


def _graph(links: Mapping[str, set[str]]) -> nx.DiGraph:
    graph = nx.DiGraph()
    graph.add_nodes_from(links)
    graph.add_edges_from((source, name) for name, sources in links.items() for source in sorted(sources))
    return graph


def run_order(links: Mapping[str, set[str]]) -> tuple[str, ...]:
    """Return the nodes in an order in which every input is ready; ties in the order of the file.

    Parameters
    ----------
    links : mapping of node to the set of nodes that feed it
        In the order of the file.
    """
    position = {name: k for k, name in enumerate(links)}
    return tuple(nx.lexicographical_topological_sort(_graph(links), key=position.__getitem__))


def cycle_of(links: Mapping[str, set[str]]) -> tuple[str, ...]:
    """Return the nodes of one circle in flow order, empty when there is none."""
    try:
        edges = nx.find_cycle(_graph(links))
    except nx.NetworkXNoCycle:
        return ()
    return tuple(edge[0] for edge in edges)


def consumers(links: Mapping[str, set[str]], node: str) -> set[str]:
    """Return all nodes that depend on `node`, directly or not."""
    return nx.descendants(_graph(links), node)
