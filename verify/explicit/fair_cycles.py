"""The least lasso into a strongly connected set and once round it, such that nothing presses all the way unheeded.

What presses is an excited node, or an input that may not wait for ever: a fair run does not stay among states in all
of which it presses with the same value.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import cache
from heapq import heappop, heappush
from itertools import pairwise
from typing import Protocol

import numpy as np

from settled.encodings.packed import Places, Words
from settled.verify.explicit.edges import Edges
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.normal_form import values
from settled.verify.explicit.search import Key

ENTRIES = 200
PATIENCE = 20_000

Path = list[int]
Lasso = tuple[Path, int]
"""A run as vertices, and the position at which its last vertex closes the loop."""

Place = tuple[int, tuple[int, int]]
HEEDED = (0, 0)
HOME: Place = (-1, HEEDED)
FAR: Key = (1 << 40, 0)


class Approach(Protocol):
    """The runs that lead to vertices (as indices)."""

    def key(self, index: int) -> Key:
        """(input changes, steps) of the shortest run to a vertex."""

    def least_to(self, indices: Places) -> dict[int, tuple[int, Path]]:
        """For each of several vertices the switchings of nodes on the least run to it, and that run, as vertices."""


class TooLarge(Exception):
    """The search for a shortest cycle is given up."""


@dataclass(frozen=True)
class Cycle:
    """A fair closed walk through vertices (as indices) from the first one on, the return to it left out."""

    path: Path
    changes: int
    nodes: int


def least_lasso(
    graph: Graph, edges: Edges, pressing: Words, cores: list[Places], approach: Approach
) -> tuple[Key, Lasso] | None:
    """The least lasso, with its input changes and steps, the return included; None without `cores`.

    The least one as long as a core has at most 200 states; a larger one is entered at the 200 nearest of them, those
    with the least values first. Very long cycles may not be the shortest.
    """
    length, found = shortest_cycles(graph, edges, pressing, cores, approach)
    if not found:
        return None
    before = approach.least_to(np.array(sorted({cycle.path[0] for cycle in found})))
    lassos = []
    for cycle in found:
        nodes, path = before[cycle.path[0]]
        run = path + graph.vertices[np.array(cycle.path[1:], np.int64)].tolist()
        lassos.append((nodes + cycle.nodes, values(graph.packed, run), len(path) - 1, run))
    _, _, loop, run = min(lassos)
    return length, (run, loop)


def shortest_cycles(
    graph: Graph, edges: Edges, pressing: Words, cores: list[Places], approach: Approach
) -> tuple[Key, list[Cycle]]:
    """Of each entry whose lasso has the fewest input changes and steps the least fair cycle, and that length."""
    found: list[Cycle] = []
    length = FAR
    core_at = cache(lambda number: Core(graph, edges, pressing, cores[number]))
    for entry, number in sorted(_entries(graph, cores, approach.key), key=lambda e: (approach.key(e[0]), e[0])):
        changes, steps = approach.key(entry)
        if (changes, steps + 2) > length:
            break
        cycle = core_at(number).cycle(entry, (length[0] - changes, length[1] - steps))
        if cycle is not None:
            now = changes + cycle.changes, steps + len(cycle.path)
            found = [*found, cycle] if now == length else [cycle]
            length = now
    return length, found


def _entries(graph: Graph, cores: list[Places], key: Callable[[int], Key]) -> Iterator[tuple[int, int]]:
    for number, core in enumerate(cores):
        order = dict(zip(core.tolist(), values(graph.packed, graph.vertices[core].tolist()), strict=True))
        for entry in sorted(order, key=lambda v: (key(v), order[v]))[:ENTRIES]:
            yield entry, number


class Core:
    """A strongly connected set of vertices in which nothing presses with one value throughout."""

    def __init__(self, graph: Graph, edges: Edges, pressing: Words, members: Places) -> None:
        self.edges, self.packed = edges, graph.packed
        self.inputs, self.states = int(graph.packed.input_mask), int(graph.packed.state_mask)
        words = graph.vertices[members].tolist()
        self.vertex = dict(zip(members.tolist(), words, strict=True))
        self.value = dict(zip(members.tolist(), values(graph.packed, words), strict=True))
        self.pressing = dict(zip(members.tolist(), pressing[members].tolist(), strict=True))
        self.after = cache(self._after)

    def cycle(self, entry: int, limit: Key) -> Cycle | None:
        """A fair closed walk from `entry`; None if each has more input changes or steps than `limit`.

        The least one, unless the search for it gets too large; then one that heeds what presses one by one.
        """
        try:
            path = self._least(entry, limit)
        except TooLarge:
            path = self._tour(entry)
        if path is None:
            return None
        moves = list(pairwise([*path, path[0]]))
        found = Cycle(path, sum(self._changes(*m) for m in moves), sum(self._nodes(*m) for m in moves))
        return found if (found.changes, len(path)) <= limit else None

    def _after(self, vertex: int) -> list[int]:
        _, after = self.edges.out_of(np.array([vertex]))
        return sorted(v for v in after.tolist() if v in self.vertex)

    def _changes(self, before: int, after: int) -> int:
        return int((self.vertex[before] ^ self.vertex[after]) & self.inputs != 0)

    def _nodes(self, before: int, after: int) -> int:
        return ((self.vertex[before] ^ self.vertex[after]) & self.states & ~self.inputs).bit_count()

    def _unheeded(self, vertex: int, left: tuple[int, int] = (-1, -1)) -> tuple[int, int]:
        """What of `left` (pressing while 1, pressing while 0) presses in this vertex as well."""
        value, pressing = self.vertex[vertex], self.pressing[vertex]
        return left[0] & pressing & value, left[1] & pressing & ~value

    def _least(self, entry: int, limit: Key) -> Path | None:
        """Dijkstra's search over (vertex, what has pressed all along). Raises `TooLarge`."""
        start = (entry, self._unheeded(entry))
        parent: dict[Place, Place] = {}
        passed: tuple[int, ...] = ()
        queue = [(0, 0, 0, passed, start, start)]
        while queue:
            changes, steps, nodes, passed, here, before = heappop(queue)
            if (changes, steps) > limit:
                return None
            if here in parent:
                continue
            if here == HOME:
                return _trace(parent, start, before)
            if len(parent) >= PATIENCE:
                raise TooLarge
            parent[here] = before
            vertex, left = here
            for v in self.after(vertex):
                there = HOME if v == entry and left == HEEDED else (v, self._unheeded(v, left))
                if there not in parent:
                    more = self._changes(vertex, v), self._nodes(vertex, v)
                    ahead = changes + more[0], steps + 1, nodes + more[1], (*passed, self.value[v])
                    heappush(queue, (*ahead, there, here))
        raise AssertionError("a set in which nothing presses throughout has a fair cycle through each vertex")

    def _tour(self, entry: int) -> Path:
        """From `entry` to the nearest vertex in which something left presses no longer, and so on; then back."""
        path, left = [entry], self._unheeded(entry)

        def relieved(v: int) -> bool:
            return self._unheeded(v, left) != left

        while left != HEEDED:
            for v in self._nearest(path[-1], relieved):
                path.append(v)
                left = self._unheeded(v, left)
        if path[-1] == entry and len(path) > 1:
            return path[:-1]
        return path + self._nearest(path[-1], lambda v: v == entry)[:-1]

    def _nearest(self, start: int, wanted: Callable[[int], bool]) -> Path:
        """The shortest way (its first vertex left out, one step at least) to a vertex that is wanted."""
        parent: dict[int, int] = {}
        queue = [start]
        for here in queue:
            for v in self.after(here):
                if v not in parent:
                    parent[v] = here
                    if wanted(v):
                        return [*_back(parent, start, here), v]
                    queue.append(v)
        raise AssertionError("in a strongly connected set every vertex is reached")


def _trace(parent: dict[Place, Place], start: Place, last: Place) -> Path:
    path = [last[0]]
    while last != start:
        last = parent[last]
        path.append(last[0])
    return path[::-1]


def _back(parent: dict[int, int], start: int, last: int) -> Path:
    path = []
    while last != start:
        path.append(last)
        last = parent[last]
    return path[::-1]
