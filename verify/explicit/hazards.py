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
from settled.verify.explicit.search import Search

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
    tagged = Tagged(graph, watch, [i for i in range(len(watch.signals)) if bad >> i & 1])
    limits = graph.limits_for(1 + 2 * bad.bit_count())
    search = Search(graph.packed, tagged.bits, tagged.moves, limits, tagged.flagged)
    hit = search.begin(graph.starts).run().hit
    if hit is None:
        return None
    run = least_run(search, dict([hit]))
    return tagged.plain(run), tagged.signal(run[-1])


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

    Signals are numbered from 1 on here; number 0 is a vertex that is not followed.
    """

    def __init__(self, graph: Graph, watch: Watch, chosen: list[int]) -> None:
        self.graph, self.watch, self.chosen = graph, watch, chosen
        bits = graph.packed.bits
        self.low = np.uint64((1 << bits) - 1)
        self.tag, self.back, self.number = (np.uint64(bits + i) for i in range(3))
        self.bits = bits + 2 + len(watch.signals).bit_length()
        if self.bits > 64:
            graph.limits.refuse(f"{self.bits} bits a watched total state; at most 64 fit")

    def moves(self, words: Words) -> tuple[Places, Words]:
        """Every move; at each change of the environment one of the signals may begin to be followed."""
        followed = words > self.low
        plain, tagged = np.flatnonzero(~followed), np.flatnonzero(followed)
        source, target = self.graph.moves(words[plain])
        sources, targets = [plain[source]], [target]
        changed, after = self.graph.changes(words[plain])
        before = self.watch(words[plain])[changed]
        for i in self.chosen:
            sources.append(plain[changed])
            tag = (before >> np.uint64(i) & ONE) << self.tag
            targets.append(after | tag | np.uint64(i + 1) << self.number)
        source, target = self.graph.steps(words[tagged] & self.low)
        sources.append(tagged[source])
        targets.append(self._follow(words[tagged][source], target))
        return np.concatenate(sources), np.concatenate(targets)

    def flagged(self, words: Words) -> Bits:
        """Whether the signal is back at its old value."""
        return words >> self.back & ONE != 0

    def plain(self, run: list[int]) -> list[int]:
        """The run without tags."""
        return [word & int(self.low) for word in run]

    def signal(self, word: int) -> str:
        """The signal that is followed."""
        return self.watch.signals[(word >> int(self.number)) - 1]

    def _follow(self, before: Words, after: Words) -> Words:
        """Steps of the response, the tag kept, the mark set when the signal is back."""
        tagged = after | before & ~self.low & ~(ONE << self.back)
        back = self._differs(before) & ~self._differs(tagged)
        return tagged | back.astype(np.uint64) << self.back

    def _differs(self, tagged: Words) -> Bits:
        value = self.watch(tagged & self.low) >> ((tagged >> self.number) - ONE)
        return (value ^ tagged >> self.tag) & ONE != 0
