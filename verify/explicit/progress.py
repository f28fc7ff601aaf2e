"""Dead ends, and runs that evade a goal, on the graph.

A run may end where nothing presses: no node is excited, no input that must move may move, no member of a burst is
outstanding. A fair run goes round a strongly connected set for ever when nothing presses with one value in all of it.
"""

from __future__ import annotations

from functools import cached_property

import numpy as np

from settled.encodings.packed import Bits, Packed, Places, Words
from settled.models.logic import Expr
from settled.verify.explicit.edges import Edges, fair_components
from settled.verify.explicit.fair_cycles import least_lasso
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.normal_form import Ways, least_run
from settled.verify.explicit.search import Key, Search


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


def least_evasion(graph: Graph, source: Expr, target: Expr) -> tuple[list[int], int | None] | None:
    """The least fair run from a start state through `source` and then without `target`, or None.

    As vertices, with the position at which its last vertex closes the loop, or None for a run that ends; of a run that
    ends and one that goes round with as many input changes and steps the one that ends.
    """
    region = Region(graph, source, target)
    lasso = least_lasso(graph, region.edges, region.pressing, region.cores, region)
    quiet = region.by_key(region.inside[region.pressing[region.inside] == 0])
    if quiet and (lasso is None or min(quiet) <= lasso[0]):
        return region.plain(least_run(region.search, quiet)), None
    return None if lasso is None else lasso[1]


class Region:
    """The vertices that a run can reach without `target` after `source` was true. `inside`: their indices.

    The search goes through the whole graph; a mark says that `source` was true and `target` has been avoided since.
    """

    def __init__(self, graph: Graph, source: Expr, target: Expr) -> None:
        self.graph, self.mark = graph, np.uint64(1 << graph.packed.bits)
        self.avoiding = ~graph.packed.holds([target], graph.vertices)
        self.entered = self.avoiding & graph.packed.holds([source], graph.vertices)
        self.pressing = pressing(graph.packed, graph.vertices, graph.excited)
        self.search = Search(graph.packed, graph.packed.bits + 1, self._moves, graph.limits_for(2))
        self.search.begin(np.concatenate([graph.starts, self._entering(graph.starts) | self.mark])).run()
        self.keys = list(self.search.layers)
        self.layer = np.full(len(graph), -1)
        for number, words in enumerate(self.search.layers.values()):
            self.layer[graph.index(words[self._marked(words)] & ~self.mark)] = number
        self.inside = np.flatnonzero(self.layer >= 0)

    def key(self, index: int) -> Key:
        """(input changes, steps) of the shortest run to a vertex that evades the goal."""
        return self.keys[int(self.layer[index])]

    def by_key(self, indices: Places) -> dict[Key, Words]:
        """The marked vertices at `indices` by the length of the shortest run that evades the goal."""
        numbers = self.layer[indices]
        words = self.graph.vertices[indices] | self.mark
        return {self.keys[n]: words[numbers == n] for n in np.unique(numbers).tolist()}

    def least_to(self, indices: Places) -> dict[int, tuple[int, list[int]]]:
        """For each of several vertices the switchings of nodes on the least run that evades the goal, and that run."""
        ways = Ways(self.search, self.by_key(indices))
        marked = (self.graph.vertices | self.mark)[indices].tolist()
        found = {i: ways.found(self.key(i), word) for i, word in zip(indices.tolist(), marked, strict=True)}
        return {i: (nodes, self.plain(run)) for i, (nodes, run) in found.items()}

    def plain(self, run: list[int]) -> list[int]:
        """The run without marks."""
        return [word & ~int(self.mark) for word in run]

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

    def _marked(self, words: Words) -> Bits:
        found: Bits = words & self.mark != 0
        return found

    def _entering(self, vertices: Words) -> Words:
        return vertices[self.entered[self.graph.index(vertices)]]

    def _moves(self, words: Words) -> tuple[Places, Words]:
        source, target = self.graph.known(*self.graph.moves(words & ~self.mark))
        place = self.graph.index(target)
        marked = self._marked(words)[source]
        plain, inside = ~marked, marked & self.avoiding[place] | ~marked & self.entered[place]
        return (
            np.concatenate([source[plain], source[inside]]),
            np.concatenate([target[plain], target[inside] | self.mark]),
        )
