"""Sustained oscillations on the graph: the least run into a fair cycle and once round it."""

from __future__ import annotations

from settled.verify.explicit.fair_cycles import Lasso, least_lasso
from settled.verify.explicit.graph import Graph


def least_oscillation(graph: Graph) -> Lasso | None:
    """A run into an oscillation and once round it, or None when everything settles.

    The least one within the bounds that `least_lasso` states.
    """
    found = least_lasso(graph, graph.held_edges, graph.excited, graph.cores, graph)
    return None if found is None else found[1]
