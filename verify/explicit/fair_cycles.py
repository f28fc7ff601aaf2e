"""Shortest lasso into a strongly connected set and once round it, such that nothing presses all the way unheeded.

What presses is an excited node, or an input that may not wait for ever: a fair run does not stay among states in all
of which it presses with the same value.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from functools import cache
from heapq import heappop, heappush
from itertools import count

import numpy as np

from settled.encodings.packed import Places, Words
from settled.verify.explicit.edges import Edges
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.search import Key

LARGE = 200
PATIENCE = 20_000

Place = tuple[int, tuple[int, int]]
HEEDED = (0, 0)
HOME: Place = (-1, HEEDED)
FAR: Key = (1 << 40, 0)


class TooLarge(Exception):
    """The search for a shortest cycle is given up."""


def nearest_cycle(
    graph: Graph, edges: Edges, pressing: Words, cores: list[Places], key: Callable[[int], Key]
) -> list[int] | None:
    """The fair cycle with the shortest lasso, as indices without the return to the first; None without `cores`.

    `key` is the length (input changes, steps) of the way to a vertex. Shortest as long as a core has at most 200
    states; beyond that it is entered at its nearest state. Very long cycles may not be the shortest.
    """
    best: list[int] | None = None
    length: Key = FAR
    core_at = cache(lambda number: Core(graph, edges, pressing, cores[number]))
    for entry, number in sorted(_entries(cores, key), key=lambda found: (key(found[0]), found[0])):
        changes, steps = key(entry)
        if (changes, steps + 2) > length:
            break
        cycle = core_at(number).cycle(entry, (length[0] - changes, length[1] - steps))
        if cycle is not None:
            best, length = cycle, (changes + core_at(number).changes(cycle), steps + len(cycle))
    return best


def _entries(cores: list[Places], key: Callable[[int], Key]) -> Iterator[tuple[int, int]]:
    for number, core in enumerate(cores):
        members = core.tolist()
        for entry in members if len(members) <= LARGE else [min(members, key=lambda v: (key(v), v))]:
            yield entry, number


class Core:
    """A strongly connected set of vertices in which nothing presses with one value throughout."""

    def __init__(self, graph: Graph, edges: Edges, pressing: Words, members: Places) -> None:
        self.edges, self.inputs = edges, int(graph.packed.input_mask)
        self.vertex = dict(zip(members.tolist(), graph.vertices[members].tolist(), strict=True))
        self.pressing = dict(zip(members.tolist(), pressing[members].tolist(), strict=True))
        self.after = cache(self._after)

    def cycle(self, entry: int, limit: Key) -> list[int] | None:
        """A fair closed walk from `entry`, without the return to it; None if none is shorter than `limit`.

        The shortest one, unless the search for it gets too large; then one that heeds what presses one by one.
        """
        try:
            return self._shortest(entry, limit)
        except TooLarge:
            tour = self._tour(entry)
            return tour if (self.changes(tour), len(tour)) < limit else None

    def changes(self, cycle: list[int]) -> int:
        """How many steps of a closed walk change an input."""
        return sum(self._changes(v, w) for v, w in zip(cycle, [*cycle[1:], cycle[0]], strict=True))

    def _after(self, vertex: int) -> list[int]:
        _, after = self.edges.out_of(np.array([vertex]))
        return sorted(v for v in after.tolist() if v in self.vertex)

    def _changes(self, before: int, after: int) -> int:
        return int((self.vertex[before] ^ self.vertex[after]) & self.inputs != 0)

    def _unheeded(self, vertex: int, left: tuple[int, int] = (-1, -1)) -> tuple[int, int]:
        """What of `left` (pressing while 1, pressing while 0) presses in this vertex as well."""
        value, pressing = self.vertex[vertex], self.pressing[vertex]
        return left[0] & pressing & value, left[1] & pressing & ~value

    def _shortest(self, entry: int, limit: Key) -> list[int] | None:
        """Dijkstra's search over (vertex, what has pressed all along). Raises `TooLarge`."""
        start = (entry, self._unheeded(entry))
        parent: dict[Place, Place] = {}
        number = count()
        queue = [(0, 0, next(number), start, start)]
        while queue:
            changes, steps, _, here, before = heappop(queue)
            if (changes, steps) >= limit:
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
                    heappush(queue, (changes + self._changes(vertex, v), steps + 1, next(number), there, here))
        raise AssertionError("a set in which nothing presses throughout has a fair cycle through each vertex")

    def _tour(self, entry: int) -> list[int]:
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

    def _nearest(self, start: int, wanted: Callable[[int], bool]) -> list[int]:
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


def _trace(parent: dict[Place, Place], start: Place, last: Place) -> list[int]:
    path = [last[0]]
    while last != start:
        last = parent[last]
        path.append(last[0])
    return path[::-1]


def _back(parent: dict[int, int], start: int, last: int) -> list[int]:
    path = []
    while last != start:
        path.append(last)
        last = parent[last]
    return path[::-1]
