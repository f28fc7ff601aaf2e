"""Hazards on the graph: which signals can change more than once in one response, and the shortest run that shows it.

A response is followed with one tag a signal: the value that the signal had in the stable state before the change.
A signal whose value is not the tag has changed; back at the tag it has changed twice.
"""

from __future__ import annotations

import numpy as np

from settled.encodings.packed import Bits, Places, Words
from settled.models.logic import Program
from settled.verify.explicit.graph import Graph
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


def shortest_flicker(graph: Graph, watch: Watch, bad: int) -> tuple[list[int], str] | None:
    """The shortest run (as indices) up to the second change of one of the signals in the packed set `bad`."""
    tagged = Tagged(graph, watch, [i for i in range(len(watch.signals)) if bad >> i & 1])
    moves = Search(tagged.bits, graph.packed.input_mask, tagged.steps, graph.limits, tagged.flagged)
    search = moves.begin(tagged.sources()).run()
    if search.hit is None:
        return None
    path = search.path(*search.hit)
    plain = [int(graph.index(tagged.plain(np.array([v], np.uint64)))[0]) for _, v in path]
    before = tagged.before(path[0])
    return graph.path_to(before) + plain, watch.signals[tagged.number(path[0][1])]


class Tagged:
    """Vertices with the watched signal's number, its value before the change, and whether it came back to it."""

    def __init__(self, graph: Graph, watch: Watch, chosen: list[int]) -> None:
        self.graph, self.watch, self.chosen = graph, watch, chosen
        self.low = graph.packed.bits
        self.bits = self.low + 2 + max(1, len(watch.signals).bit_length())
        if self.bits > 64:
            graph.limits.refuse(f"{self.bits} bits a watched total state; at most 64 fit")

    def plain(self, tagged: Words) -> Words:
        """The vertices without their tags."""
        return tagged & np.uint64((1 << self.low) - 1)

    def number(self, tagged: int) -> int:
        """The position of the watched signal."""
        return tagged >> (self.low + 2)

    def sources(self) -> dict[Key, Words]:
        """What every change makes of every stable vertex, tagged, by the key of the run to it."""
        edges, value = self.graph.change_edges, self.watch(self.graph.vertices)
        rounds, steps = self.graph.lengths(edges.source)
        found: dict[Key, list[Words]] = {}
        for key in sorted(set(zip(rounds.tolist(), steps.tolist(), strict=True))):
            here = (rounds == key[0]) & (steps == key[1])
            vertices = self.graph.vertices[edges.target[here]]
            tags = [
                vertices | (value[edges.source[here]] >> np.uint64(i) & ONE) << np.uint64(self.low)
                | np.uint64(i << (self.low + 2))
                for i in self.chosen
            ]
            found[key[0] + 1, key[1] + 1] = tags
        return {key: np.concatenate(tags) for key, tags in found.items()}

    def steps(self, tagged: Words) -> tuple[Places, Words]:
        """Steps of the response, the tag kept, the mark set when the signal is back."""
        plain = self.plain(tagged)
        source, target = self.graph.steps(plain)
        tag = tagged[source] ^ plain[source]
        left = self._differs(tagged)[source]
        back = left & ~self._differs(target | tag)
        return source, target | tag | back.astype(np.uint64) << np.uint64(self.low + 1)

    def flagged(self, tagged: Words) -> Bits:
        """Whether the signal is back at its old value."""
        return tagged >> np.uint64(self.low + 1) & ONE != 0

    def before(self, first: tuple[Key, int]) -> int:
        """The earliest stable vertex whose change gave the first vertex of a tagged run."""
        (rounds, steps), tagged = first
        edges = self.graph.change_edges
        target = int(self.graph.index(np.array([tagged & (1 << self.low) - 1], np.uint64))[0])
        source, _ = edges.into(np.array([target]))
        value = self.watch(self.graph.vertices[source]) >> np.uint64(self.number(tagged)) & ONE
        at_rounds, at_steps = self.graph.lengths(source)
        fits = (value == tagged >> self.low & 1) & (at_rounds == rounds - 1) & (at_steps == steps - 1)
        return int(source[fits].min())

    def _differs(self, tagged: Words) -> Bits:
        number = tagged >> np.uint64(self.low + 2)
        value = self.watch(self.plain(tagged)) >> number
        return (value ^ tagged >> np.uint64(self.low)) & ONE != 0
