"""The normal form of runs: of all runs that refute a property, the one that is shown, whoever finds it.

Runs are compared by the number of steps that change an input, then by steps, then by switchings of nodes in all steps
together, then by values: state by state from the beginning, in each the signals in their order. Of several runs shown
together the numbers add up, and values are compared run by run. A layered search settles the first two; this module
settles the rest, by dynamic programming over the moves that lie on shortest runs.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np

from settled.encodings.packed import Bits, Packed, Places, Words
from settled.verify.explicit.search import Key, Search, distinct

Edge = tuple[Words, Words]


def reading(packed: Packed, words: Words) -> Words:
    """Words that order total states by their values, signal by signal in their order (marks are passed over)."""
    found = np.zeros_like(words)
    for place in range(packed.state_bits):
        found = found << np.uint64(1) | words >> np.uint64(place) & np.uint64(1)
    return found


def switchings(packed: Packed, before: Words, after: Words) -> Places:
    """How many nodes switch in each move."""
    nodes = packed.state_mask & ~packed.input_mask
    return np.bitwise_count((before ^ after) & nodes).astype(np.int64)


Measure = tuple[int, int, int, list[list[int]]]
"""What the runs of a refutation are compared by."""


def measure(packed: Packed, runs: Sequence[Sequence[int]]) -> Measure:
    """Steps that change an input, steps, switchings of nodes, and values, of several runs together."""
    moves = [(a ^ b) & int(packed.state_mask) for run in runs for a, b in pairwise(run)]
    changes = sum(moved & int(packed.input_mask) != 0 for moved in moves)
    nodes = sum((moved & ~int(packed.input_mask)).bit_count() for moved in moves)
    return changes, len(moves), nodes, [values(packed, run) for run in runs]


def values(packed: Packed, words: Sequence[int]) -> list[int]:
    """What runs of the same length are compared by last."""
    found: list[int] = reading(packed, np.array(words, np.uint64)).tolist()
    return found


@dataclass(frozen=True)
class Level:
    """The words so many steps from the beginning that lie on the ways, in increasing order, and beside each:

    the fewest switchings on the way there, where the least such way stands among those of all words of this level
    (equal for equal values), and the position in the level before of the word that it comes from.
    """

    words: Words
    nodes: Places
    rank: Places
    before: Places


class Ways:
    """The least runs of a search to each of `goals`, words of its layers by key."""

    def __init__(self, search: Search, goals: Mapping[Key, Words]) -> None:
        self.search, self.packed = search, search.packed
        first, edges = _marked(search, goals)
        order = reading(self.packed, first)
        self.levels = [Level(first, np.zeros(len(first), np.int64), _ranks(order), np.zeros(len(first), np.int64))]
        for before, after in edges:
            self.levels.append(self._next(self.levels[-1], before, after))

    def _next(self, last: Level, before: Words, after: Words) -> Level:
        place = np.searchsorted(last.words, before)
        nodes = last.nodes[place] + switchings(self.packed, before, after)
        order = np.lexsort((place, last.rank[place], nodes, after))
        order = order[first_of_each(after[order])]
        words, place = after[order], place[order]
        return Level(words, nodes[order], _ranks(last.rank[place], reading(self.packed, words)), place)

    def length(self, key: Key, words: Words) -> tuple[Places, Places]:
        """Of each word in layer `key`: the fewest switchings on the way, and the place of its way by values."""
        level = self.levels[key[1]]
        place = np.searchsorted(level.words, words)
        return level.nodes[place], level.rank[place]

    def found(self, key: Key, word: int) -> tuple[int, list[int]]:
        """The switchings of nodes on the least run to a word of layer `key`, and that run."""
        nodes, _ = self.length(key, np.array([word], np.uint64))
        return int(nodes[0]), self.run(key, word)

    def run(self, key: Key, word: int) -> list[int]:
        """The least run to a word of layer `key`."""
        place = int(np.searchsorted(self.levels[key[1]].words, np.uint64(word)))
        path = []
        for level in self.levels[key[1] :: -1]:
            path.append(int(level.words[place]))
            place = int(level.before[place])
        return path[::-1]

    def ordered(self, goals: Mapping[Key, Words]) -> Iterator[tuple[Key, int]]:
        """The goals, those with the least runs first."""
        for key in sorted(goals):
            nodes, rank = self.length(key, goals[key])
            for place in np.lexsort((goals[key], rank, nodes)).tolist():
                yield key, int(goals[key][place])


def least_run(search: Search, goals: Mapping[Key, Words]) -> list[int]:
    """The least run of a search to any of `goals`, as words."""
    key = min(goals)
    ways = Ways(search, {key: goals[key]})
    return ways.run(*next(ways.ordered({key: goals[key]})))


def first_of_each(ordered: Words | Places) -> Bits:
    """Whether each of the ordered values is not the one before it."""
    first = np.ones(len(ordered), bool)
    first[1:] = ordered[1:] != ordered[:-1]
    return first


def _ranks(*keys: Words | Places) -> Places:
    """The place of each row among all rows, compared by the first key, then the second; equal for equal rows."""
    order = np.lexsort(keys[::-1])
    fresh = np.zeros(len(order), bool)
    for key in keys:
        fresh |= first_of_each(key[order])
    rank = np.zeros(len(order), np.int64)
    rank[order] = np.cumsum(fresh)
    return rank


def _marked(search: Search, goals: Mapping[Key, Words]) -> tuple[Words, list[Edge]]:
    """Where shortest runs to the goals begin and, step by step, the moves that lie on them."""
    marked = {key: distinct(words) for key, words in goals.items()}
    edges: list[Edge] = []
    for steps in range(max(key[1] for key in goals), 0, -1):
        found = [_into(search, key, marked) for key in list(search.layers) if key[1] == steps - 1]
        edges.append((np.concatenate([e[0] for e in found]), np.concatenate([e[1] for e in found])))
    return marked[0, 0], edges[::-1]


def _into(search: Search, key: Key, marked: dict[Key, Words]) -> Edge:
    """The moves from layer `key` to marked words of the layers after it; where they come from is marked as well."""
    nothing = np.zeros(0, np.uint64)
    still, moved = (marked.get((key[0] + more, key[1] + 1), nothing) for more in (0, 1))
    if not len(still) and not len(moved):
        return nothing, nothing
    layer = search.layers[key]
    source, target = search.moves(layer)
    changed = search.changed(layer[source], target)
    kept = np.where(changed, _among(target, moved), _among(target, still))
    edge = layer[source[kept]], target[kept]
    marked[key] = distinct(np.concatenate([marked.get(key, nothing), edge[0]]))
    return edge


def _among(words: Words, known: Words) -> Bits:
    """Whether each word is one of `known`, which is in increasing order."""
    if not len(known):
        return np.zeros(len(words), bool)
    place = np.searchsorted(known, words)
    place[place == len(known)] = 0
    found: Bits = known[place] == words
    return found
