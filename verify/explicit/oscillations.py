"""Sustained oscillations on the graph: the shortest run into a fair cycle and once round it."""

from __future__ import annotations

from settled.verify.explicit.fair_cycles import nearest_cycle
from settled.verify.explicit.graph import Graph


def shortest_lasso(graph: Graph) -> tuple[list[int], int] | None:
    """A run as indices and the position at which its last state closes the loop, or None when everything settles.

    Shortest (changes, then steps) within the bounds that `nearest_cycle` states.
    """
    cycle = nearest_cycle(graph, graph.held_edges, graph.excited, graph.cores, graph.key)
    if cycle is None:
        return None
    before = graph.path_to(cycle[0])
    return before + cycle[1:], len(before) - 1
