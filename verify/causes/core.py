"""The part of a circuit in which a race is decided, by itself: from it a race has the identity that lasts.

Two stable states with the same inputs differ in some loop. Of the loops in which the two ends differ, those count that
no other such loop acts on; the core is what can act on these. It is taken with its signals in the order of their
names, so that neither the order of the lines nor what is added beside or behind it changes the race found there.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from typing import Any

import numpy as np

from settled.encodings.packed import Packed
from settled.models.circuit import Circuit
from settled.models.components import components
from settled.models.environment import Environment
from settled.models.logic import support
from settled.models.states import Behaviour, pack, unpack
from settled.verify.causes.racing_events import Race, Response, firsts
from settled.verify.explicit.normal_form import measure
from settled.verify.limits import LimitReached, Limits

States = Sequence[int]


class Cores:
    """The cores of the races of one circuit."""

    def __init__(self, behaviour: Behaviour, limits: Limits) -> None:
        self.circuit, self.environment, self.limits = behaviour.circuit, behaviour.environment, limits
        self.reads = {node: support(e) for node, e in self.circuit.excitation.items()}
        self.loops = [part for part in components(self.reads) if len(part) > 1 or part[0] in self.reads[part[0]]]
        self._cut: dict[tuple[str, ...], Packed] = {}
        self._known: dict[tuple[object, ...], tuple[str, ...]] = {}

    def events(self, runs: Sequence[States], begin: int) -> tuple[str, ...]:
        """What the race is about that two runs of one response show: where both paths start from, early, late.

        `begin`: the position of the stable state before the change. Raises `LimitReached` and `TooWide`.
        """
        core, packed, ways = self._project(runs, begin)
        behaviour = Behaviour(packed.circuit, packed.environment)
        begun = sorted(firsts(behaviour, ways, 0, packed))
        key = (core, ways[0][0], *begun, *sorted(way[-1] for way in ways))
        if key not in self._known:
            graph = self._response(packed, begun)
            race = Race(behaviour, graph, _least(graph, ways), 0).facts()["race"]
            self._known[key] = (*sorted(race["fork"].split("/")), race["early"], race["late"])
        return self._known[key]

    def facts(self, runs: Sequence[States], begin: int) -> dict[str, Any]:
        """`decided_at` and `race` as far as the core is concerned, for circuits that are too wide as a whole."""
        _, packed, ways = self._project(runs, begin)
        behaviour = Behaviour(packed.circuit, packed.environment)
        graph = self._response(packed, list(firsts(behaviour, ways, 0, packed)))
        found = Race(behaviour, graph, ways, 0).facts()
        race = found["race"] | {"step": found["race"]["step"] + begin}
        return {"decided_at": [step + begin for step in found["decided_at"]], "race": race}

    def _project(self, runs: Sequence[States], begin: int) -> tuple[tuple[str, ...], Packed, list[list[int]]]:
        """The core of a race, the circuit of it alone, and the runs from `begin` on as that circuit sees them."""
        one, two = (unpack(self.circuit, states[-1]) for states in runs)
        core = self._core({n for n in self.circuit.nodes if one[n] != two[n]})
        packed = self._cut[core] = self._cut.get(core) or Packed(*self._cut_out(core))
        ways = [[pack(packed.circuit, unpack(self.circuit, state)) for state in states[begin:]] for states in runs]
        return core, packed, ways

    def _response(self, packed: Packed, begun: Sequence[int]) -> Response:
        graph = Response(packed, self.limits, np.array(begun, np.uint64))
        if graph.unfinished:
            raise LimitReached(graph.unfinished)
        return graph

    def _core(self, differing: set[str]) -> tuple[str, ...]:
        """The nodes that can act on the first loops in which two ends differ, by name."""
        loops = [frozenset(loop) for loop in self.loops if differing.intersection(loop)]
        acting = {loop: self._acting(loop) for loop in loops}
        first = [acting[loop] for loop in loops if not any(o != loop and o <= acting[loop] for o in loops)]
        return tuple(sorted(frozenset().union(*first)))

    def _acting(self, loop: frozenset[str]) -> frozenset[str]:
        """The nodes of a loop and all that act on them, directly or through others."""
        found, fresh = set(loop), sorted(loop)
        for node in fresh:
            more = [n for n in self.reads[node] if n in self.reads and n not in found]
            found.update(more)
            fresh += more
        return frozenset(found)

    def _cut_out(self, core: tuple[str, ...]) -> tuple[Circuit, Environment]:
        """The circuit of these nodes alone; which changes may be picked does not matter any more."""
        c, known = self.circuit, {*self.circuit.inputs, *core}
        outputs = tuple(o for o in c.outputs if known.issuperset(support(*c.resolve(c.signal(o)))))
        circuit = replace(
            c,
            inputs=tuple(sorted(c.inputs)),
            nodes=core,
            excitation={node: c.excitation[node] for node in core},
            outputs=outputs,
            defined={o: c.defined[o] for o in outputs if o in c.defined},
            exclusive=tuple(pair for pair in c.exclusive if known.issuperset(pair)),
        )
        return circuit, replace(self.environment, guards={}, start={})


def _least(graph: Response, ways: Sequence[States]) -> list[list[int]]:
    """The least runs to the ends of two, the lesser run first."""
    places = graph.index(np.array([way[-1] for way in ways], np.uint64))
    paths = [path for place in places for path in graph.least_runs(place[np.newaxis])]
    mask = int(graph.packed.state_mask)
    paths.sort(key=lambda path: measure(graph.packed, [path]))
    return [[ways[0][0], *(vertex & mask for vertex in path)] for path in paths]
