"""Hazards on the graph: which signals can change more than once in one response, and the least run that shows it.

A response is followed with one tag a signal: the value that the signal had in the stable state before the change.
A signal whose value is not the tag has changed; back at the tag it has changed twice.
"""

from __future__ import annotations

import numpy as np

from settled.encodings.packed import Bits, Places, Words
from settled.models.logic import Program
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.normal_form import least_run
from settled.verify.explicit.search import Key, Search

ONE = np.uint64(1)


class Watch:
    """Values of the watched signals, packed into one word a vertex."""

    def __init__(self, graph: Graph, signals: tuple[str, ...]) -> None:
        circuit = graph.packed.circuit
        self.graph, self.signals = graph, signals
        self.program = Program(circuit.resolve(*map(circuit.signal, signals)))

    def __call__(self, vertices: Words) -> Words:
        packed = self.graph.packed
        return packed.mask(packed.values(self.program, vertices), vertices)


def flickering(graph: Graph, watch: Watch) -> int:
    """The packed set of watched signals that change twice or more in some response.

    Spreads, along the edges of all responses at once, which values each signal may have had before the change.
    """
    value = watch(graph.vertices)
    had = [np.zeros(len(graph), np.uint64), np.zeros(len(graph), np.uint64)]
    change = graph.change_edges
    bad = np.uint64(0)
    source, target = change.source, change.target
    now = [~value[source], value[source]]
    while len(source):
        fresh = np.zeros(0, np.int64)
        for tag in (0, 1):
            start, moved = (~value, value) if tag else (value, ~value)
            twice = now[tag] & start[source] & moved[target]
            bad |= np.bitwise_or.reduce(twice, initial=0)
            old = had[tag][target]
            np.bitwise_or.at(had[tag], target, now[tag] & ~twice)
            fresh = np.union1d(fresh, target[had[tag][target] != old])
        source, target = graph.step_edges.out_of(fresh[~graph.end[fresh]])
        now = [had[0][source], had[1][source]]
    return int(bad) & (1 << len(watch.signals)) - 1


def least_flicker(graph: Graph, watch: Watch, bad: int) -> tuple[list[int], str] | None:
    """The least run (as vertices) up to the second change of one of the signals in the packed set `bad`."""
    tagged = Tagged(graph, watch, bad)
    search = Search(graph.packed, tagged.bits, tagged.moves, graph.limits_for(tagged.copies), tagged.flagged)
    hit = search.begin(graph.starts).run().hit
    if hit is None:
        return None
    run = least_run(search, dict([hit]))
    return tagged.plain(run), watch.signals[tagged.signal(run[-1])]


def least_flickers(graph: Graph, watch: Watch, source: int, targets: Words, bad: int) -> dict[str, list[int]]:
    """For each signal in the packed set `bad` the least way on from a stable vertex to its second change, if any.

    `targets`: the vertices right after the change that is meant.
    """
    tagged = Tagged(graph, watch, bad)
    before = np.full(len(targets), source, np.uint64)

    def moves(words: Words) -> tuple[Places, Words]:
        begin = np.flatnonzero(words == np.uint64(source))
        _, first = tagged.followed(before, targets)
        followed, target = tagged.steps(words)
        return (
            np.concatenate([np.repeat(begin, len(first)), followed]),
            np.concatenate([np.tile(first, len(begin)), target]),
        )

    search = Search(graph.packed, tagged.bits, moves, graph.limits_for(tagged.copies))
    search.begin(np.array([source], np.uint64)).run()
    found: dict[int, tuple[Key, Words]] = {}
    for key, words in search.layers.items():
        back = words[tagged.flagged(words)]
        for number in {tagged.signal(word) for word in back.tolist()} - set(found):
            found[number] = key, back[tagged.numbers(back) == number]
    return {watch.signals[i]: tagged.plain(least_run(search, dict([found[i]]))) for i in sorted(found)}


def still_changing(graph: Graph, watch: Watch) -> tuple[Words, Words]:
    """For each vertex the watched signals that can change at least once, at least twice, in what follows there."""
    value, edges = watch(graph.vertices), graph.step_edges
    moved = value[edges.source] ^ value[edges.target]
    once = _spread_back(graph, moved)
    return once, _spread_back(graph, moved & once[edges.target])


def _spread_back(graph: Graph, seen: Words) -> Words:
    """What is seen on some edge of a run from each vertex."""
    edges = graph.step_edges
    here = np.zeros(len(graph), np.uint64)
    while True:
        after = here.copy()
        np.bitwise_or.at(after, edges.source, seen | here[edges.target])
        if (after == here).all():
            return here
        here = after


def rest_of_response(graph: Graph, vertex: int) -> list[int]:
    """The least way on from a vertex to the end of its response, the vertex left out; empty if none is reached."""
    packed = graph.packed

    def ends(words: Words) -> Bits:
        return packed.ends(words, packed.excited(words))

    search = Search(packed, packed.bits, graph.steps, graph.limits, ends)
    hit = search.begin(np.array([vertex], np.uint64)).run().hit
    return least_run(search, dict([hit]))[1:] if hit else []


class Tagged:
    """Vertices and, in a response followed for one signal: its tag, whether it is back at it, the signal's number.

    In the words signals are numbered from 1 on; number 0 is a vertex that is not followed. `bad`: the packed set of
    signals that are followed; `copies`: how often a vertex can occur.
    """

    def __init__(self, graph: Graph, watch: Watch, bad: int) -> None:
        self.graph, self.watch = graph, watch
        self.chosen = [i for i in range(len(watch.signals)) if bad >> i & 1]
        self.copies = 1 + 4 * len(self.chosen)
        bits = graph.packed.bits
        self.low = np.uint64((1 << bits) - 1)
        self.tag, self.back, self.number = (np.uint64(bits + i) for i in range(3))
        self.bits = bits + 2 + len(watch.signals).bit_length()
        if self.bits > 64:
            graph.limits.refuse(f"{self.bits} bits a watched total state; at most 64 fit")

    def moves(self, words: Words) -> tuple[Places, Words]:
        """Every move; at each change of the environment one of the signals may begin to be followed."""
        plain = np.flatnonzero(words <= self.low)
        source, target = self.graph.moves(words[plain])
        changed, after = self.graph.changes(words[plain])
        began, first = self.followed(words[plain][changed], after)
        place, further = self.steps(words)
        return (
            np.concatenate([plain[source], plain[changed[began]], place]),
            np.concatenate([target, first, further]),
        )

    def followed(self, before: Words, after: Words) -> tuple[Places, Words]:
        """Each change from `before` to `after` with one of the signals followed from now on: (which change, word)."""
        value = self.watch(before)
        tags = [
            after | (value >> np.uint64(i) & ONE) << self.tag | np.uint64(i + 1) << self.number for i in self.chosen
        ]
        return np.tile(np.arange(len(after)), len(tags)), np.concatenate([np.zeros(0, np.uint64), *tags])

    def steps(self, words: Words) -> tuple[Places, Words]:
        """Steps of the response from the words that are followed and not yet back, marked when the signal is back."""
        place = np.flatnonzero((words > self.low) & ~self.flagged(words))
        source, target = self.graph.steps(words[place] & self.low)
        before = words[place][source]
        tagged = target | before & ~self.low
        back = self._differs(before) & ~self._differs(tagged)
        return place[source], tagged | back.astype(np.uint64) << self.back

    def flagged(self, words: Words) -> Bits:
        """Whether the signal is back at its old value."""
        return words >> self.back & ONE != 0

    def plain(self, run: list[int]) -> list[int]:
        """The run without tags."""
        return [word & int(self.low) for word in run]

    def signal(self, word: int) -> int:
        """The position of the signal that is followed."""
        return (word >> int(self.number)) - 1

    def numbers(self, words: Words) -> Places:
        """The positions of the signals that are followed."""
        return (words >> self.number).astype(np.int64) - 1

    def _differs(self, tagged: Words) -> Bits:
        value = self.watch(tagged & self.low) >> ((tagged >> self.number) - ONE)
        return (value ^ tagged >> self.tag) & ONE != 0
