"""The two events that race where a response has two ends.

A run is *decided* from its first state on from which only one end can be reached; the step into it decides, and of its
events the least part that decides by itself (the fewest, then the first by name). The event `x`
that decides one run by itself *races* with the event `z` of the other run that comes before it there: up to `z`, `x`
alone still leaves only the one end; after `z` it no longer does. Where neither run shows this (as when the order of
inputs has changed the states on the way), the events that decide the runs are the two that race. Wherever several would
do, the first by name is taken, and only what can act on the two is looked at: a cause stays the same when the lines of
a circuit change places or something is added beside it.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from itertools import combinations
from typing import Any, NamedTuple

import numpy as np

from settled.encodings.packed import Packed, Places, TooWide, Words
from settled.models.circuit import Circuit
from settled.models.logic import support
from settled.models.states import Behaviour, Situation, members, value
from settled.verify.causes.history import Event, History
from settled.verify.explicit.graph import MANY, Graph
from settled.verify.limits import LimitReached, Limits


class Response(Graph):
    """Everything that can follow on the first move of a change."""

    def moves(self, vertices: Words) -> tuple[Places, Words]:
        """Steps of the response only."""
        return self.steps(vertices)


@dataclass(frozen=True)
class Decision:
    """The step that decides a run: its number, the open vertex before it, the least part of it that decides."""

    step: int
    vertex: int
    part: tuple[int, ...]


class Pair(NamedTuple):
    """The events that race, that of each run in turn: as a bit, with a run in which it is due and the step there."""

    bits: tuple[int, int]
    runs: tuple[int, int]
    steps: tuple[int, int]


class Race:
    """Two runs of one response with different ends, from position `begin` on."""

    def __init__(self, behaviour: Behaviour, graph: Graph, runs: Sequence[Sequence[int]], begin: int) -> None:
        self.behaviour, self.circuit, self.graph = behaviour, behaviour.circuit, graph
        self.begin, self.runs = begin, runs
        self.histories = [History(behaviour, states, begin) for states in runs]
        self.ends = [self.outcome(self.vertex(states[-1], states[-1])) for states in runs]
        self.decisions = [self._decision(states) for states in runs]

    def vertex(self, state: int, end: int) -> int:
        """The vertex of a state on a run with this end: in a burst, the inputs that have yet to change are marked."""
        packed = self.graph.packed
        return state | ((state ^ end) & self.circuit.input_mask) << packed.state_bits if packed.burst else state

    def outcome(self, vertex: int) -> int | None:
        """The one end that can be reached from a vertex of the response, `MANY`, or None for no such vertex."""
        place = int(self.graph.index(np.array([vertex], np.uint64))[0])
        return None if place < 0 else int(self.graph.outcome[place])

    def after(self, vertex: int, part: Sequence[int]) -> int:
        """The vertex that is reached when just these bits switch."""
        flipped = sum(part)
        low = self.circuit.input_mask if self.graph.packed.burst else 0
        return vertex ^ flipped ^ (flipped & low) << self.graph.packed.state_bits

    def due(self, vertex: int) -> Iterator[int]:
        """The bits that may switch alone, by name."""
        waiting = vertex >> self.graph.packed.state_bits
        state = vertex & int(self.graph.packed.state_mask)
        for bit in self.by_name(self.behaviour.excited(state) | waiting):
            if self.outcome(self.after(vertex, [bit])) is not None:
                yield bit

    def name(self, bit: int) -> str:
        """The signal of a bit."""
        return self.circuit.signals[bit.bit_length() - 1]

    def by_name(self, signals: int) -> list[int]:
        """The bits of a packed set in the order of their names."""
        return sorted(members(signals), key=self.name)

    def _decision(self, states: Sequence[int]) -> Decision:
        vertices = [self.vertex(state, states[-1]) for state in states]
        step = next(i for i in range(self.begin + 1, len(states)) if self.outcome(vertices[i]) != MANY)
        whole = self.by_name(states[step] ^ states[step - 1])
        for size in (1, 2):
            for part in combinations(whole, size):
                if self.outcome(self.after(vertices[step - 1], part)) == self.outcome(vertices[step]):
                    return Decision(step, vertices[step - 1], part)
        return Decision(step, vertices[step - 1], tuple(whole))

    def pair(self) -> Pair:
        """The two events that race."""
        found = [pair for pair in map(self._overtaken, (0, 1)) if pair is not None]
        if found:
            return min(found, key=lambda pair: (pair.steps, sorted(map(self.name, pair.bits))))
        one = self.decisions[0].part[0]
        others = [*self.decisions[1].part, *self.due(self.decisions[0].vertex)]
        bits = one, next(bit for bit in others if bit != one)
        steps = self.decisions[0].step, self.decisions[1].step
        return Pair(bits, (0, 1), steps)

    def _overtaken(self, number: int) -> Pair | None:
        """The event that decides run `number` by itself, and the event that comes before it in the other run."""
        if len(self.decisions[number].part) > 1:
            return None
        (own,), states = self.decisions[number].part, self.runs[1 - number]
        vertices = [self.vertex(state, states[-1]) for state in states]

        def decides(vertex: int) -> bool:
            return own in self.due(vertex) and self.outcome(self.after(vertex, [own])) == self.ends[number]

        for step in range(self.begin + 1, len(states)):
            if decides(vertices[step - 1]) and not decides(vertices[step]):
                others = [bit for bit in self.by_name(states[step] ^ states[step - 1]) if bit != own]
                alone = [bit for bit in others if not decides(self.after(vertices[step - 1], [bit]))]
                rival = (alone or others)[0]
                bits = (own, rival) if number == 0 else (rival, own)
                return Pair(bits, (1 - number, 1 - number), (step, step))
        return None

    def facts(self) -> dict[str, Any]:
        """`decided_at` and `race` of the facts about a critical race."""
        pair = self.pair()
        events = [Event(self.name(bit), step) for bit, step in zip(pair.bits, pair.steps, strict=True)]
        histories = [self.histories[number] for number in pair.runs]
        back = [history.ancestors(event) for history, event in zip(histories, events, strict=True)]
        common = [event for event in back[0] if event in back[1]]
        fork = min(common, key=lambda e: (-e.step, e.name), default=None)
        far = [ways[fork] if fork else max(ways.values()) for ways in back]
        signs = [history.sign(event) for history, event in zip(histories, events, strict=True)]
        early = self._early([event.name for event in events], far)
        race = {
            "fork": fork.name.removesuffix(">") if fork else "/".join(self._roots(back)),
            "early": events[early].name,
            "late": events[1 - early].name,
            "events": {"early": signs[early], "late": signs[1 - early]},
            "trace": early,
            "step": pair.steps[early] if pair.runs[early] == early else self.decisions[early].step,
        }
        return {"decided_at": [decision.step for decision in self.decisions], "race": race}

    def _early(self, names: Sequence[str], far: Sequence[int]) -> int:
        """The run that is the fault: its event comes too early, that of the other run too late.

        A connection should be fast, so it is the late one of the two. Else the run counts as the fault that changes
        more outputs, else more nodes, of those that can act on the two events; else the one whose event is at the end
        of the longer path from the fork; else the one whose event comes first by name.
        """
        circuit, before = self.circuit, self.runs[0][self.begin]
        near = _cone(circuit, names)
        outputs = [e for e in circuit.resolve(*map(circuit.signal, circuit.outputs)) if near.issuperset(support(e))]
        nodes = sum(1 << circuit.place[n] for n in circuit.nodes if n in near)
        ranks = []
        for name, distance, states in zip(names, far, self.runs, strict=True):
            pairs = zip(value(circuit, outputs, before), value(circuit, outputs, states[-1]), strict=True)
            changed = ((states[-1] ^ before) & nodes).bit_count()
            wire = circuit.delay == "wire" and ">" in name
            ranks.append((wire, -sum(a != b for a, b in pairs), -changed, -distance, name))
        return 0 if ranks[0] < ranks[1] else 1

    def _roots(self, back: Sequence[Mapping[Event, int]]) -> list[str]:
        names = {e.name for ways in back for e in ways if e.name in self.circuit.inputs}
        return sorted(names, key=self.circuit.place.__getitem__)


def _cone(circuit: Circuit, names: Sequence[str]) -> set[str]:
    """Everything that can act on these signals, directly or through others, and the signals themselves."""
    found, fresh = set(names), list(names)
    for name in fresh:
        reads = [s for s in support(circuit.excitation[name]) if s not in found] if name in circuit.excitation else []
        found.update(reads)
        fresh += reads
    return found


def race_cause(behaviour: Behaviour, runs: Sequence[Sequence[int]], begin: int, limits: Limits) -> dict[str, Any]:
    """For two runs of one response with different ends: `decided_at` and `race`. Empty where the response is too large.

    `begin`: the position of the stable state before the change.
    """
    try:
        packed = Packed(behaviour.circuit, behaviour.environment)
        graph = Response(packed, limits, np.array(list(firsts(behaviour, runs, begin, packed)), np.uint64))
    except (TooWide, LimitReached):
        return {}
    return {} if graph.unfinished else Race(behaviour, graph, runs, begin).facts()


def firsts(behaviour: Behaviour, runs: Sequence[Sequence[int]], begin: int, packed: Packed) -> Iterator[int]:
    """The vertices right after the first move of a change: in a burst there are several."""
    before = runs[0][begin]
    if not packed.burst:
        yield runs[0][begin + 1]
        return
    picked = (before ^ runs[0][-1]) & behaviour.circuit.input_mask
    for bit, rest in behaviour.arrivals(Situation(before, picked)):
        yield before ^ bit | rest << packed.state_bits
