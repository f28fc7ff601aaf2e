"""The graph of reachable total states, explored layer by layer, and what is read off it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import cached_property
from itertools import islice

import numpy as np
import numpy.typing as npt

from settled.encodings.packed import Bits, Packed, Places, Words
from settled.verify.explicit.edges import Edges, fair_components
from settled.verify.explicit.normal_form import Ways
from settled.verify.explicit.search import Key, Moves, Search, blocks, distinct
from settled.verify.explicit.starts import starts
from settled.verify.limits import LimitReached, Limits

NONE, MANY = -1, -2


class Graph:
    """All reachable vertices of a circuit in its environment (see `Packed` for what a vertex is).

    `vertices` is sorted; `excited`, `key` (round, steps) and `end` (stable, nothing outstanding) run beside it.
    `sources`: where runs begin (default: the start states); `most`: how many input changes deep the search goes. When
    a limit ended the search, `unfinished` says which; the vertices found are reachable all the same, so that whatever
    is found wrong among them is wrong.
    """

    def __init__(self, packed: Packed, limits: Limits, sources: Words | None = None, most: int | None = None) -> None:
        self.packed, self.limits = packed, limits
        self.search = Search(packed, packed.bits, self.moves, limits, most=most)
        self.search.begin(starts(packed, limits) if sources is None else sources)
        self.explore(limits)

    def explore(self, limits: Limits) -> None:
        """Go on with a search that was not finished, under new limits."""
        derived = [n for n in self.__dict__ if isinstance(getattr(type(self), n, None), cached_property)]
        for name in derived:
            del self.__dict__[name]
        self.limits = self.search.limits = limits
        self.unfinished: str | None = None
        try:
            self.search.run()
        except LimitReached as reached:
            self.unfinished = str(reached)
        if self.search.cut and self.unfinished is None:
            self.unfinished = f"no run with more than {self.search.most} input changes was looked at"
        self._sort()

    def _sort(self) -> None:
        self.keys = list(self.search.layers)
        joined = np.concatenate([*self.search.layers.values(), np.zeros(0, np.uint64)])
        order = np.argsort(joined)
        self.vertices: Words = joined[order]
        self.layer = np.repeat(np.arange(len(self.keys)), [len(w) for w in self.search.layers.values()])[order]
        self.excited: Words = self.packed.excited(self.vertices)
        self.end: Bits = self.packed.ends(self.vertices, self.excited)

    @property
    def starts(self) -> Words:
        """The vertices from which the search began."""
        return self.search.layers[0, 0]

    def limits_for(self, copies: int) -> Limits:
        """Limits for a search through the known vertices in several copies."""
        return replace(self.limits, states=copies * len(self))

    def __len__(self) -> int:
        return len(self.vertices)

    def key(self, index: int) -> Key:
        """(changes, steps) of the shortest run to a vertex."""
        return self.keys[int(self.layer[index])]

    def lengths(self, indices: Places) -> tuple[Places, Places]:
        """Changes and steps of the shortest run to each vertex."""
        table = np.array(self.keys, np.int64)[self.layer[indices]]
        return table[:, 0], table[:, 1]

    def by_key(self, indices: Places) -> dict[Key, Words]:
        """The vertices at `indices` by the length of the shortest run to them."""
        numbers = self.layer[indices]
        return {self.keys[n]: self.vertices[indices[numbers == n]] for n in np.unique(numbers).tolist()}

    def ways(self, indices: Places) -> Ways:
        """The least runs to each of these vertices."""
        return Ways(self.search, self.by_key(indices))

    def least_runs(self, indices: Places, most: int = 1) -> list[list[int]]:
        """Runs from a start state, as vertices, to those `most` of `indices` whose least runs come first."""
        goals, ways = self.by_key(indices), self.ways(indices)
        return [ways.run(*goal) for goal in islice(ways.ordered(goals), most)]

    def least_to(self, indices: Places) -> dict[int, tuple[int, list[int]]]:
        """For each of several vertices the switchings of nodes on the least run to it, and that run, as vertices."""
        ways = self.ways(indices)
        return {i: ways.found(self.key(i), int(self.vertices[i])) for i in indices.tolist()}

    def index(self, words: Words) -> Places:
        """Positions of words in `vertices`; -1 for those that were not reached."""
        place = np.searchsorted(self.vertices, words)
        place[place == len(self)] = 0
        return np.where(self.vertices[place] == words, place, -1) if len(self) else place - 1

    def known(self, source: Places, target: Words) -> tuple[Places, Words]:
        """Those of some moves that lead to vertices: of an unfinished search not all do."""
        kept = np.flatnonzero(self.index(target) >= 0)
        return source[kept], target[kept]

    def moves(self, vertices: Words) -> tuple[Places, Words]:
        """Every move: steps, and changes that the environment makes of its own accord."""
        excited = self.packed.excited(vertices)
        parts = self.steps(vertices, excited), self.changes(vertices, excited)
        return np.concatenate([parts[0][0], parts[1][0]]), np.concatenate([parts[0][1], parts[1][1]])

    def steps(self, vertices: Words, excited: Words | None = None) -> tuple[Places, Words]:
        """Steps of the response (in input-output mode: every step); `excited`: if known, what is in each vertex."""
        movers = self.packed.movers(self.packed.excited(vertices) if excited is None else excited)
        if not self.packed.fundamental:
            movers = movers | self.packed.allowed(vertices)
        return self._blockwise(self.packed.steps, vertices, movers)

    def held(self, vertices: Words) -> tuple[Places, Words]:
        """Steps of the nodes alone, the inputs held."""
        return self._blockwise(self.packed.held, vertices, self.packed.movers(self.packed.excited(vertices)))

    def changes(self, vertices: Words, excited: Words | None = None) -> tuple[Places, Words]:
        """Changes that the environment may make in the vertices among `vertices` that admit one."""
        excited = self.packed.excited(vertices) if excited is None else excited
        place = np.flatnonzero(self.packed.ends(vertices, excited))
        stable = vertices[place]
        source, target = self._blockwise(lambda v, _: self.packed.changes(v), stable, self.packed.allowed(stable))
        return place[source], target

    def _blockwise(
        self, moves: Callable[[Words, Words], tuple[Places, Words]], vertices: Words, movers: Words
    ) -> tuple[Places, Words]:
        sources, targets = [np.zeros(0, np.int64)], [np.zeros(0, np.uint64)]
        for part in blocks(vertices, movers, self.limits, self.packed.circuit.winners):
            source, target = moves(vertices[part], movers[part])
            sources.append(source + part.start)
            targets.append(target)
        return np.concatenate(sources), np.concatenate(targets)

    @cached_property
    def step_edges(self) -> Edges:
        """Edges of the responses."""
        return self._edges(self.steps)

    @cached_property
    def held_edges(self) -> Edges:
        """Edges of the nodes alone."""
        return self.step_edges if self.packed.fundamental and not self.packed.burst else self._edges(self.held)

    @cached_property
    def change_edges(self) -> Edges:
        """Edges from stable vertices to what a change of the environment makes of them."""
        return self._edges(self.changes)

    def _edges(self, moves: Moves) -> Edges:
        sources, targets = [np.zeros(0, np.int64)], [np.zeros(0, np.int64)]
        for start in range(0, len(self.vertices), 1 << 16):
            self.limits.check(f"among the moves of {len(self):,} total states")
            source, target = moves(self.vertices[start : start + (1 << 16)])
            place = self.index(target)
            sources.append(source[place >= 0] + start)
            targets.append(place[place >= 0])
        return Edges(len(self), np.concatenate(sources), np.concatenate(targets))

    @cached_property
    def outcome(self) -> npt.NDArray[np.int64]:
        """For each vertex the index of the one end that its response can reach, `NONE` or `MANY`."""
        low = np.full(len(self), len(self), np.int64)
        high = np.full(len(self), -1, np.int64)
        fresh = np.flatnonzero(self.end)
        low[fresh] = high[fresh] = fresh
        while len(fresh):
            before, after = self.step_edges.into(fresh)
            touched = distinct(before)
            old_low, old_high = low[touched], high[touched]
            np.minimum.at(low, before, low[after])
            np.maximum.at(high, before, high[after])
            several = touched[low[touched] < high[touched]]
            low[several], high[several] = -1, len(self)
            fresh = touched[(low[touched] != old_low) | (high[touched] != old_high)]
        return np.where(high < 0, NONE, np.where(low < 0, MANY, low))

    @cached_property
    def restless(self) -> Places:
        """Vertices from which, with the inputs held, no run reaches a stable total state."""
        settling = self.excited == 0
        fresh = np.flatnonzero(settling)
        while len(fresh):
            before = distinct(self.held_edges.into(fresh)[0])
            fresh = before[~settling[before]]
            settling[fresh] = True
        return np.flatnonzero(~settling)

    @cached_property
    def cores(self) -> list[Places]:
        """The sustained oscillations: strongly connected sets that a fair run can go round with the inputs held."""
        return fair_components(self.held_edges, self.vertices, self.excited)
