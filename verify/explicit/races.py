"""Races on the graph: input changes and bursts whose response has two ends, and the least pair of runs to them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import islice

import numpy as np

from settled.encodings.packed import Bits, Places, Words
from settled.verify.explicit.graph import MANY, Graph
from settled.verify.explicit.nearest import Entries, Nearest, ends_as, following, pair_sums
from settled.verify.explicit.normal_form import Ways, first_of_each, values
from settled.verify.explicit.search import Key, Search

Path = list[int]
Pair = tuple[Path, Path]


@dataclass(frozen=True)
class Changes:
    """The input changes and bursts of the graph. `group[e]`: the number of the one that change edge `e` begins.

    Beside each number: `source`, the vertex before, and `inputs`, how many steps of a run change an input for it.
    """

    group: Places
    source: Places
    inputs: Places

    @classmethod
    def of(cls, graph: Graph) -> Changes:
        """Those of a graph, in the order of the vertices before them and of what changes."""
        edges, packed = graph.change_edges, graph.packed
        before, after = graph.vertices[edges.source], graph.vertices[edges.target]
        picked = ((before ^ after) & packed.input_mask) | packed.outstanding(after)
        order = np.lexsort((picked, edges.source))
        fresh = first_of_each(edges.source[order]) | first_of_each(picked[order])
        group = np.zeros(len(order), np.int64)
        group[order] = np.cumsum(fresh) - 1
        alike = np.bitwise_count(picked).astype(np.int64) if packed.burst else np.ones(len(picked), np.int64)
        return cls(group, edges.source[order][fresh], alike[order][fresh])

    def targets(self, graph: Graph, number: int) -> Words:
        """The vertices right after a change: in a burst there are several."""
        return graph.vertices[graph.change_edges.target[self.group == number]]


class Races:
    """The critical races of a graph, one for each input change or burst."""

    def __init__(self, graph: Graph) -> None:
        self.graph = graph
        self.changes = Changes.of(graph)
        self.numbers = np.flatnonzero(self._open())

    def _open(self) -> Bits:
        """Whether each change can end differently."""
        first = self.graph.outcome[self.graph.change_edges.target]
        size, group = len(self.changes.source), self.changes.group
        low, high = np.full(size, len(self.graph), np.int64), np.full(size, -1, np.int64)
        np.minimum.at(low, group[first >= 0], first[first >= 0])
        np.maximum.at(high, group[first >= 0], first[first >= 0])
        found = low < high
        found[group[first == MANY]] = True
        return found

    @cached_property
    def inputs(self) -> Places:
        """How many steps change an input in each race, both runs from the start together."""
        rounds, _ = self.graph.lengths(self.changes.source[self.numbers])
        return 2 * (rounds + self.changes.inputs[self.numbers])

    def _lengths(self, numbers: Places) -> tuple[Places, Places]:
        """Of some races the pair's steps from the start together, and its switchings after the change."""
        edges = self.graph.change_edges
        racing = np.flatnonzero(np.isin(self.changes.group, numbers))
        within = following(self.graph, edges.target[racing])
        ends = ends_as(self.graph, np.arange(len(self.graph)))
        near = Nearest(self.graph, ends, within).of(edges.target[racing])
        owner = self.changes.group[racing][near.owner]
        two = Entries(owner, near.label, near.steps, near.nodes).two_each()
        _, steps = self.graph.lengths(self.changes.source[numbers])
        return 2 * (steps + 1) + pair_sums(two.steps), pair_sums(two.nodes)

    def least(self) -> Pair | None:
        """The least pair of runs (as vertices, from the same start state) that end differently, or None."""
        if not len(self.numbers):
            return None
        few = np.flatnonzero(self.inputs == self.inputs.min())
        numbers = self.numbers[few]
        lengths = (self.inputs[few], *self._lengths(numbers))
        kept, paths = least_beginnings(self.graph, self.changes.source[numbers], lengths)
        pairs = [(self.pair(number, path)) for number, path in zip(numbers[kept].tolist(), paths, strict=True)]
        return least_pair(self.graph, pairs)

    def pair(self, number: int, before: Path) -> Pair:
        """The least pair of runs of one race that go on from the run `before` it."""
        one, two = islice(self.endings(number), 2)
        return before[:-1] + one, before[:-1] + two

    def endings(self, number: int) -> Iterator[Path]:
        """For each end of a change the least run from the vertex before the change to it, in their order."""
        source = self.graph.vertices[self.changes.source[number]]
        search = response(self.graph, source, self.changes.targets(self.graph, number))
        goals = ends_of(self.graph, search)
        ways = Ways(search, goals)
        return (ways.run(*goal) for goal in ways.ordered(goals))


def response(graph: Graph, source: np.uint64, targets: Words) -> Search:
    """The search through the response that goes from a stable vertex to `targets` and on."""

    def moves(words: Words) -> tuple[Places, Words]:
        place, target = graph.known(*graph.steps(words))
        begin = np.flatnonzero(words == source)
        first = np.repeat(begin, len(targets)), np.tile(targets, len(begin))
        return np.concatenate([place, first[0]]), np.concatenate([target, first[1]])

    search = Search(graph.packed, graph.packed.bits, moves, graph.limits_for(1))
    return search.begin(np.array([source], np.uint64)).run()


def ends_of(graph: Graph, search: Search) -> dict[Key, Words]:
    """The ends that a search through a response has reached, by key."""
    found = {}
    for key, words in search.layers.items():
        ends = words[graph.packed.ends(words, graph.packed.excited(words))]
        if key != (0, 0) and len(ends):
            found[key] = ends
    return found


def least_beginnings(
    graph: Graph, sources: Places, lengths: tuple[Places, Places, Places], runs: int = 2
) -> tuple[list[int], list[Path]]:
    """Which of several failures are the least, as far as that is settled by lengths and the runs before them.

    `sources`: the vertex before each failure; `lengths`: steps that change an input, steps, and switchings of its
    `runs` together, the switchings after the vertex only. Gives positions, each with the least run to its vertex.
    """
    inputs, steps, nodes = lengths
    order = np.lexsort((steps, inputs))
    kept = np.flatnonzero((inputs == inputs[order[0]]) & (steps == steps[order[0]]))
    goals = graph.by_key(np.unique(sources[kept]))
    ways = Ways(graph.search, goals)
    before: dict[int, tuple[Key, int, int]] = {}
    for key, words in goals.items():
        rows = zip(words.tolist(), *(c.tolist() for c in ways.length(key, words)), strict=True)
        before |= {word: (key, count, rank) for word, count, rank in rows}
    words = graph.vertices[sources[kept]].tolist()
    total = [nodes[i] + runs * before[w][1] for i, w in zip(kept.tolist(), words, strict=True)]
    tied = [(i, w) for i, w, t in zip(kept.tolist(), words, total, strict=True) if t == min(total)]
    first: dict[int, int] = {}
    for _, w in tied:
        first[before[w][0][1]] = min(first.get(before[w][0][1], w), w, key=lambda v: before[v][2])
    tied = [(i, w) for i, w in tied if w in first.values()]
    return [i for i, _ in tied], [ways.run(before[w][0], w) for _, w in tied]


def least_pair(graph: Graph, pairs: Sequence[Pair]) -> Pair:
    """Of pairs of runs with equal lengths the one with the least values."""
    return min(pairs, key=lambda pair: [values(graph.packed, path) for path in pair])


def all_ends(graph: Graph, start: int) -> list[int]:
    """Indices of every end that the response can reach from a vertex, by increasing distance, then value."""
    seen, frontier, found = {start}, [start], []
    while frontier:
        found += [v for v in frontier if graph.end[v]]
        _, after = graph.step_edges.out_of(np.array(frontier))
        frontier = sorted(set(after.tolist()) - seen)
        seen.update(frontier)
    return found
