"""One change against three changes of the same input (Unger 1959, "Hazards and delays in asynchronous sequential
switching circuits", recalled): where the internal states reached differ, the circuit has an essential hazard."""

from __future__ import annotations

from collections.abc import Iterator
from functools import cached_property

import numpy as np

from settled.verify.explicit.graph import Graph
from settled.verify.explicit.races import MANY, NONE, NearestEnds, all_ends, nearest_ends, run_to

Leg = tuple[int, int]


class ThreeChanges:
    """Outcomes of single input changes on the graph. A leg is (vertex just after a change, end of the response)."""

    def __init__(self, graph: Graph) -> None:
        self.graph = graph
        self.internal = (graph.vertices & graph.packed.state_mask) >> np.uint64(graph.packed.inputs)

    @cached_property
    def after(self) -> dict[tuple[int, int], int]:
        """For a stable vertex and the bit of an input: the vertex just after that input alone has changed."""
        edges, vertices = self.graph.change_edges, self.graph.vertices
        flips = vertices[edges.source] ^ vertices[edges.target]
        alone = np.bitwise_count(flips) == 1
        rows = zip(edges.source[alone].tolist(), flips[alone].tolist(), edges.target[alone].tolist(), strict=True)
        return {(source, bit): target for source, bit, target in rows}

    @cached_property
    def _near(self) -> NearestEnds:
        return nearest_ends(self.graph)

    def ends(self, vertex: int) -> list[int]:
        """The ends of the response from a vertex just after a change."""
        only = int(self.graph.outcome[vertex])
        return [] if only == NONE else all_ends(self.graph, vertex) if only == MANY else [only]

    def outcomes(self, stable: int, bit: int) -> Iterator[list[Leg]]:
        """Ways to an outcome: one leg each after one change, then three legs each after three changes."""
        once = self._legs(stable, bit)
        yield from ([leg] for leg in once)
        for one in once:
            for two in self._legs(one[1], bit):
                for three in self._legs(two[1], bit):
                    yield [one, two, three]

    def _legs(self, stable: int, bit: int) -> list[Leg]:
        vertex = self.after.get((stable, bit))
        return [] if vertex is None else [(vertex, end) for end in self.ends(vertex)]

    def clash(self, stable: int, bit: int) -> tuple[list[Leg], list[Leg]] | None:
        """Two ways to different internal states, or None."""
        first: list[Leg] | None = None
        for legs in self.outcomes(stable, bit):
            first = first or legs
            if self.internal[legs[-1][1]] != self.internal[first[-1][1]]:
                return first, legs
        return None

    def shortest(self) -> tuple[list[int], list[int], int] | None:
        """The two runs (as indices) with the fewest changes and steps that end apart, and the input's bit."""
        best: tuple[tuple[int, int], list[int], list[int], int] | None = None
        for stable, bit in self.after:
            pair = self.clash(stable, bit)
            if pair is None:
                continue
            first, second = (self._run(stable, legs) for legs in pair)
            rounds, steps = self.graph.key(stable)
            length = (rounds + len(pair[1]), steps + len(first) + len(second))
            if best is None or length < best[0]:
                before = self.graph.path_to(stable)
                best = (length, before + first, before + second, bit)
        return best[1:] if best else None

    def _run(self, stable: int, legs: list[Leg]) -> list[int]:
        path: list[int] = []
        for vertex, end in legs:
            near = end in self._near.end[vertex]
            path += run_to(self.graph, self._near, vertex, end) if near else self._walk(vertex, end)
        return path

    def _walk(self, start: int, end: int) -> list[int]:
        parent: dict[int, int | None] = {start: None}
        queue = [start]
        for here in queue:
            if here == end:
                break
            _, after = self.graph.step_edges.out_of(np.array([here]))
            for v in sorted(set(after.tolist()) - set(parent)):
                parent[v] = here
                queue.append(v)
        path: list[int] = []
        at: int | None = end
        while at is not None:
            path.append(at)
            at = parent[at]
        return path[::-1]
