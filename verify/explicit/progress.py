"""Dead ends, and runs that evade a goal, on the graph.

A run may end where nothing presses: no node is excited, no input that must move may move, no member of a burst is
outstanding. A fair run goes round a strongly connected set for ever when nothing presses with one value in all of it.
"""

from __future__ import annotations

from dataclasses import replace
from functools import cached_property

import numpy as np

from settled.encodings.packed import Packed, Places, Words
from settled.models.logic import Expr
from settled.verify.explicit.edges import Edges, fair_components
from settled.verify.explicit.fair_cycles import nearest_cycle
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.search import Key, Search

Lasso = tuple[list[int], int | None]


def dead_ends(graph: Graph) -> Places:
    """Vertices in which no node is excited and the environment can do nothing either."""
    stable = np.flatnonzero(graph.excited == 0)
    source, _ = graph.moves(graph.vertices[stable])
    return np.delete(stable, source)


def changeable(packed: Packed, vertices: Words) -> Words:
    """The inputs that may change alone in each vertex, as bits: guards and assumptions allow it."""
    found = packed.allowed(vertices)
    for i in range(packed.inputs):
        bit = np.uint64(1 << i)
        found = np.where(packed.admits(vertices ^ bit), found, found & ~bit)
    return found


def pressing(packed: Packed, vertices: Words, excited: Words) -> Words:
    """What must not wait for ever, as bits of each vertex: nodes, `must` inputs, and members of a burst."""
    must = [packed.environment.guard(x).must for x in packed.circuit.inputs]
    inputs = np.uint64(sum(1 << i for i, presses in enumerate(must) if presses))
    found: Words = excited | (changeable(packed, vertices) & inputs) | (vertices & ~packed.state_mask)
    return found


def shortest_evasion(graph: Graph, source: Expr, target: Expr) -> Lasso | None:
    """A fair run from a start state through `source` and then without `target`, or None.

    As indices, with the position at which its last vertex closes the loop, or None for a run that ends: it ends if
    it can.
    """
    region = Region(graph, source, target)
    quiet = region.inside[region.pressing[region.inside] == 0]
    if len(quiet):
        return region.path_to(int(quiet[np.argmin(region.layer[quiet])])), None
    cycle = nearest_cycle(graph, region.edges, region.pressing, region.cores, region.key)
    if cycle is None:
        return None
    before = region.path_to(cycle[0])
    return before + cycle[1:], len(before) - 1


class Region:
    """The vertices that a run can reach without `target` after `source` was true. `inside`: their indices."""

    def __init__(self, graph: Graph, source: Expr, target: Expr) -> None:
        self.graph = graph
        self.concerned = graph.packed.holds([source], graph.vertices)
        self.avoiding = ~graph.packed.holds([target], graph.vertices)
        self.pressing = pressing(graph.packed, graph.vertices, graph.excited)
        packed = graph.packed
        limits = replace(graph.limits, states=len(graph))
        self.search = Search(packed.bits, packed.input_mask, self._moves, limits).begin(self._sources()).run()
        self.keys = list(self.search.layers)
        self.layer = np.full(len(graph), -1)
        for number, words in enumerate(self.search.layers.values()):
            self.layer[graph.index(words)] = number
        self.inside = np.flatnonzero(self.layer >= 0)

    def key(self, index: int) -> Key:
        """(input changes, steps) of the shortest run to a vertex that evades the goal."""
        return self.keys[int(self.layer[index])]

    def path_to(self, index: int) -> list[int]:
        """That run, from a start state."""
        words = [v for _, v in self.search.path(self.key(index), int(self.graph.vertices[index]))]
        path: list[int] = self.graph.index(np.array(words, np.uint64)).tolist()
        return self.graph.path_to(path[0])[:-1] + path

    @cached_property
    def edges(self) -> Edges:
        """All moves inside."""
        inside = self.layer >= 0
        both = [self.graph.step_edges, self.graph.change_edges]
        source = np.concatenate([e.source for e in both])
        target = np.concatenate([e.target for e in both])
        kept = inside[source] & inside[target]
        return Edges(len(self.graph), source[kept], target[kept])

    @cached_property
    def cores(self) -> list[Places]:
        """The strongly connected sets inside that a fair run can go round for ever."""
        return fair_components(self.edges, self.graph.vertices, self.pressing)

    def _sources(self) -> dict[Key, Words]:
        found = {}
        place = np.flatnonzero(self.concerned & self.avoiding)
        for number in np.unique(self.graph.layer[place]).tolist():
            found[self.graph.keys[number]] = self.graph.vertices[place[self.graph.layer[place] == number]]
        return found

    def _moves(self, vertices: Words) -> tuple[Places, Words]:
        source, target = self.graph.moves(vertices)
        place = self.graph.index(target)
        kept = place >= 0
        kept[kept] = self.avoiding[place[kept]]
        return source[kept], target[kept]
