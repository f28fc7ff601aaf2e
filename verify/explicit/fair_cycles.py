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

from settled.encodings.packed import Words
from settled.verify.explicit.graph import Edges, Graph, Key, Places

LARGE = 200
PATIENCE = 20_000

Place = tuple[int, tuple[int, int]]
HEEDED = (0, 0)
HOME: Place = (-1, HEEDED)


def nearest_cycle(
    graph: Graph, edges: Edges, pressing: Words, cores: list[Places], key: Callable[[int], Key]
) -> list[int] | None:
    """The fair cycle with the shortest lasso, as indices without the return to the first; None without `cores`.

    `key` is the length (input changes, steps) of the way to a vertex. Shortest as long as a core has at most 200
    states; beyond that it is entered at its nearest state. Very long cycles may not be the shortest.
    """
    best: tuple[Key, list[int]] | None = None
    core_at = cache(lambda number: Core(graph, edges, pressing, cores[number]))
    for entry, number in sorted(_entries(cores, key), key=lambda found: (key(found[0]), found[0])):
        changes, steps = key(entry)
        if best is not None and (changes, steps + 2) > best[0]:
            break
        more, cycle = core_at(number).cycle(entry)
        length = (changes + more, steps + len(cycle))
        if best is None or length < best[0]:
            best = (length, cycle)
    return best[1] if best else None


def _entries(cores: list[Places], key: Callable[[int], Key]) -> Iterator[tuple[int, int]]:
    for number, core in enumerate(cores):
        members = core.tolist()
        for entry in members if len(members) <= LARGE else [min(members, key=lambda v: (key(v), v))]:
            yield entry, number


class Core:
    """A strongly connected set of vertices in which nothing presses with one value throughout."""

    def __init__(self, graph: Graph, edges: Edges, pressing: Words, members: Places) -> None:
        self.graph, self.edges, self.pressing = graph, edges, pressing
        self.members = set(members.tolist())
        self.after = cache(self._after)

    def cycle(self, entry: int) -> tuple[int, list[int]]:
        """A fair closed walk from `entry`, without the return to it, and how many of its steps change an input.

        The shortest one, unless the search for it gets too large; then one that heeds what presses one by one.
        """
        path = self._shortest(entry) or self._tour(entry)
        following = [*path[1:], entry]
        return sum(self._changes(v, w) for v, w in zip(path, following, strict=True)), path

    def _after(self, vertex: int) -> list[int]:
        _, after = self.edges.out_of(np.array([vertex]))
        return sorted(self.members.intersection(after.tolist()))

    def _changes(self, before: int, after: int) -> int:
        flips = int(self.graph.vertices[before]) ^ int(self.graph.vertices[after])
        return int(flips & int(self.graph.packed.input_mask) != 0)

    def _unheeded(self, vertex: int, left: tuple[int, int] = (-1, -1)) -> tuple[int, int]:
        """What of `left` (pressing while 1, pressing while 0) presses in this vertex as well."""
        value, pressing = int(self.graph.vertices[vertex]), int(self.pressing[vertex])
        return left[0] & pressing & value, left[1] & pressing & ~value

    def _shortest(self, entry: int) -> list[int] | None:
        """Dijkstra's search over (vertex, what has pressed all along); None when it gets too large."""
        start = (entry, self._unheeded(entry))
        parent: dict[Place, Place] = {}
        number = count()
        queue = [(0, 0, next(number), start, start)]
        while queue and len(parent) < PATIENCE:
            changes, steps, _, here, before = heappop(queue)
            if here in parent:
                continue
            if here == HOME:
                return _trace(parent, start, before)
            parent[here] = before
            vertex, left = here
            for v in self.after(vertex):
                there = HOME if v == entry and left == HEEDED else (v, self._unheeded(v, left))
                if there not in parent:
                    heappush(queue, (changes + self._changes(vertex, v), steps + 1, next(number), there, here))
        return None

    def _tour(self, entry: int) -> list[int]:
        """From `entry` to the nearest vertex in which something left presses no longer, and so on; then back."""
        path, left = [entry], self._unheeded(entry)
        while left != HEEDED:
            for v in self._nearest(path[-1], lambda v, left=left: self._unheeded(v, left) != left):
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
