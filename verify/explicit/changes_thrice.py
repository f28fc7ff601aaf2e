"""One change against three changes of the same input (Unger 1959, "Hazards and delays in asynchronous sequential
switching circuits", recalled): where the internal states reached differ, the circuit has an essential hazard."""

from __future__ import annotations

from functools import cache
from typing import NamedTuple

import numpy as np

from settled.encodings.packed import Places, Words
from settled.verify.explicit.graph import MANY, NONE, Graph
from settled.verify.explicit.nearest import Entries, Nearest, ends_as, following, joined, pair_sums
from settled.verify.explicit.normal_form import Ways
from settled.verify.explicit.races import Pair, all_ends, least_beginnings, least_pair
from settled.verify.explicit.search import Key, Moves, Search

LONG = 1 << 32
"""More steps than any run has: with it, input changes and steps are compared as one number."""


class Clash(NamedTuple):
    """Two runs to different internal states, how many changes each is from the stable vertex on, the input's bit."""

    runs: Pair
    changes: tuple[int, int]
    bit: int


class ThreeChanges:
    """Outcomes of one and of three changes of a single input on the graph."""

    def __init__(self, graph: Graph) -> None:
        self.graph, self.packed = graph, graph.packed
        edges = graph.change_edges
        self.flips = graph.vertices[edges.source] ^ graph.vertices[edges.target]
        self.exercised = bool((np.bitwise_count(self.flips) == 1).any())

    def least(self) -> Clash | None:
        """The least two runs, over all stable vertices and inputs, that end in different internal states, or None."""
        bits = [1 << i for i in range(self.packed.inputs)]
        pairs = [self.clashing(bit) for bit in bits]
        which = np.repeat(bits, [len(pair) // 2 for pair in pairs])
        if not len(which):
            return None
        two = joined(*pairs)
        source = two.owner[::2]
        rounds, steps = self.graph.lengths(source)
        inputs = 2 * rounds + pair_sums(two.steps // LONG)
        lengths = inputs, 2 * steps + pair_sums(two.steps % LONG), pair_sums(two.nodes)
        kept, paths = least_beginnings(self.graph, source, lengths)
        found = [self._clash(path, int(which[i])) for i, path in zip(kept, paths, strict=True)]
        least = least_pair(self.graph, [clash.runs for clash in found])
        return next(clash for clash in found if clash.runs is least)

    def clashing(self, bit: int) -> Entries:
        """For one input the stable vertices with two outcomes, each as the owner of two rows.

        The changes count among the steps, and once more as `LONG`.
        """
        failing = self._failing(bit)
        if not failing:
            return Entries(*(np.zeros(0, np.int64) for _ in range(4)))
        within = following(self.graph, np.array(sorted(self._after(bit).values()), np.int64))
        ends = ends_as(self.graph, self._internal(self.graph.vertices))
        thrice = once = self._before(bit, Nearest(self.graph, ends, within))
        for _ in range(2):
            thrice = self._before(bit, Nearest(self.graph, thrice, within))
        both = joined(once, thrice)
        changes = np.repeat([LONG, 3 * LONG], [len(once), len(thrice)])
        two = Entries(both.owner, both.label, both.steps + changes, both.nodes).two_each()
        return two.at(np.flatnonzero(np.isin(two.owner, failing)))

    def _failing(self, bit: int) -> list[int]:
        """The stable vertices from which one change and three changes of an input have more than one outcome."""
        after, ends = self._after(bit), cache(self._ends)
        label = self._internal(self.graph.vertices).tolist()

        def change(stable: set[int]) -> set[int]:
            return {end for s in stable if s in after for end in ends(after[s])}

        found = []
        for s in after:
            once = change({s})
            if len({label[end] for end in once | change(change(once))}) > 1:
                found.append(s)
        return found

    def _after(self, bit: int) -> dict[int, int]:
        """For each stable vertex the vertex just after one input alone has changed."""
        edges, place = self.graph.change_edges, np.flatnonzero(self.flips == np.uint64(bit))
        return dict(zip(edges.source[place].tolist(), edges.target[place].tolist(), strict=True))

    def _ends(self, vertex: int) -> list[int]:
        """The ends of the response from a vertex."""
        only = int(self.graph.outcome[vertex])
        return [] if only == NONE else all_ends(self.graph, vertex) if only == MANY else [only]

    def _before(self, bit: int, ends: Nearest) -> Entries:
        """What can be reached by one more change: a row's owner is the stable vertex before it."""
        edges, place = self.graph.change_edges, np.flatnonzero(self.flips == np.uint64(bit))
        rows = ends.of(edges.target[place])
        return Entries(edges.source[place][rows.owner], rows.label, rows.steps + 1, rows.nodes)

    def _internal(self, words: Words) -> Places:
        """Internal states, as numbers."""
        return ((words & self.packed.state_mask) >> np.uint64(self.packed.inputs)).astype(np.int64)

    # ---- the ways on from one stable vertex --------------------------------------------------------------------------

    def _clash(self, before: list[int], bit: int) -> Clash:
        """The two least ways on from the end of a run to different internal states by changes of one input."""
        search = Search(self.packed, self.packed.bits + 2, self._counting(bit), self.graph.limits_for(4))
        search.begin(np.array(before[-1:], np.uint64)).run()
        goals = self._goals(search)
        ways = Ways(search, goals)
        found: dict[int, list[int]] = {}
        for key, word in ways.ordered(goals):
            label = int(self._internal(np.array([word], np.uint64))[0])
            found.setdefault(label, ways.run(key, word))
            if len(found) == 2:
                break
        one, two = found.values()
        changes = one[-1] >> self.packed.bits, two[-1] >> self.packed.bits
        low = (1 << self.packed.bits) - 1
        runs = before[:-1] + [w & low for w in one], before[:-1] + [w & low for w in two]
        return Clash(runs, changes, bit)

    def _counting(self, bit: int) -> Moves:
        """Steps of the response, and up to three changes of one input; the marks count the changes."""
        low = np.uint64((1 << self.packed.bits) - 1)

        def moves(words: Words) -> tuple[Places, Words]:
            plain = words & low
            source, target = self.graph.known(*self.graph.steps(plain))
            early = np.flatnonzero(words <= low | np.uint64(2 << self.packed.bits))
            changed, after = self.graph.known(*self.graph.changes(plain[early]))
            lawful = np.flatnonzero(plain[early][changed] ^ after == np.uint64(bit))
            changed, after = early[changed[lawful]], after[lawful]
            more = (words[changed] & ~low) + np.uint64(1 << self.packed.bits)
            return np.concatenate([source, changed]), np.concatenate([target | words[source] & ~low, after | more])

        return moves

    def _goals(self, search: Search) -> dict[Key, Words]:
        """The ends reached after one and after three changes."""
        low, odd = np.uint64((1 << self.packed.bits) - 1), np.uint64(1 << self.packed.bits)
        goals = {}
        for key, words in search.layers.items():
            plain = words & low
            ends = words[self.packed.ends(plain, self.packed.excited(plain)) & (words & odd != 0)]
            if len(ends):
                goals[key] = ends
        return goals
