"""Sustained oscillations on the graph: the shortest run into a fair cycle and once round it."""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterable

import numpy as np

from settled.verify.explicit.graph import Edges, Graph, Places

Obligations = tuple[int, int]
LARGE = 200


def shortest_lasso(graph: Graph) -> tuple[list[int], int] | None:
    """A run as indices and the position at which its last state closes the loop, or None when everything settles.

    Shortest (changes, then steps) as long as the oscillations have at most 200 states; beyond that the loop is
    entered at the earliest state.
    """
    candidates = [v for core in graph.cores for v in entries(graph, core)]
    best: tuple[tuple[int, int], list[int], int] | None = None
    inside = {int(v): number for number, core in enumerate(graph.cores) for v in core}
    for entry in graph.earliest(np.array(candidates, np.int64)).tolist():
        rounds, steps = graph.key(entry)
        if best is not None and (rounds, steps + 2) > best[0]:
            continue
        core = set(graph.cores[inside[entry]].tolist())
        cycle = fair_cycle(graph.held_edges, core, entry, obligations(graph))
        length = (rounds, steps + len(cycle))
        if best is None or length < best[0]:
            best = (length, cycle, entry)
    if best is None:
        return None
    before = graph.path_to(best[2])
    return before + best[1][1:], len(before) - 1


def entries(graph: Graph, core: Places) -> Iterable[int]:
    """Where a lasso may enter a core: anywhere in a small one, at the earliest state of a large one."""
    earliest = graph.earliest(core)
    return earliest.tolist() if len(core) <= LARGE else earliest[:1].tolist()


def obligations(graph: Graph) -> Callable[[int], Obligations]:
    """For a vertex the nodes excited while 1 and those excited while 0."""

    def at(index: int) -> Obligations:
        value, excited = int(graph.vertices[index]), int(graph.excited[index])
        return excited & value, excited & ~value

    return at


def fair_cycle(edges: Edges, core: set[int], entry: int, at: Callable[[int], Obligations]) -> list[int]:
    """The shortest closed walk from `entry` inside a core in which no node is excited with one value throughout.

    Returned without the final return to `entry`. Searches over (state, nodes excited alike so far).
    """
    start = (entry, *at(entry))
    parent: dict[tuple[int, int, int], tuple[int, int, int] | None] = {start: None}
    queue = deque([start])
    while queue:
        here = queue.popleft()
        _, after = edges.out_of(np.array([here[0]]))
        for v in sorted(after.tolist()):
            if v == entry and not here[1] and not here[2]:
                return _trace(parent, here)
            if v not in core:
                continue
            high, low = at(v)
            there = (v, here[1] & high, here[2] & low)
            if there not in parent:
                parent[there] = here
                queue.append(there)
    raise AssertionError("a sustained oscillation has a fair cycle through each of its states")


def _trace(
    parent: dict[tuple[int, int, int], tuple[int, int, int] | None], last: tuple[int, int, int]
) -> list[int]:
    path: list[int] = []
    here: tuple[int, int, int] | None = last
    while here is not None:
        path.append(here[0])
        here = parent[here]
    return path[::-1]
