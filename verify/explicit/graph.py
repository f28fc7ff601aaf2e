"""The graph of reachable total states, explored layer by layer, and what is read off it.

Layers are ordered by (steps in which an input changes, steps): the first vertex found that satisfies a condition
has a run to it with the fewest input changes and, among those, the fewest steps.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from functools import cached_property
from heapq import heappop, heappush
from typing import TypeVar

import numpy as np
import numpy.typing as npt

from settled.encodings.packed import Bits, Packed, Places, Words
from settled.models.components import components
from settled.verify.explicit.starts import starts
from settled.verify.limits import LimitReached, Limits

Key = tuple[int, int]
T = TypeVar("T", bound=np.generic)
Moves = Callable[[Words], tuple[Places, Words]]

BLOCK = 1 << 21
LARGE = 50_000
NONE, MANY = -1, -2


def blocks(vertices: Words, movers: Words, limits: Limits, winners: str = "any") -> Iterator[slice]:
    """Slices of `vertices` small enough that all steps of a slice fit into memory."""
    count = np.bitwise_count(movers).astype(np.float64)
    rows = np.exp2(count) if winners == "any" else count
    if len(rows) and rows.max() > 4 * BLOCK:
        limits.refuse(f"{int(count.max())} signals can switch in one step, in more combinations than fit into memory")
    start, total = 0, np.cumsum(rows)
    while start < len(rows):
        base = total[start - 1] if start else 0.0
        stop = max(start + 1, int(np.searchsorted(total, base + BLOCK, side="right")))
        yield slice(start, stop)
        start = stop


def distinct(words: npt.NDArray[T]) -> npt.NDArray[T]:
    """The values in increasing order, each once (several times faster than numpy's `unique` on integers)."""
    ordered = np.sort(words)
    first = np.ones(len(ordered), bool)
    first[1:] = ordered[1:] != ordered[:-1]
    return ordered[first]


class Known:
    """A growing set of words: a table of flags where that fits, else sorted runs that are merged as they grow."""

    def __init__(self, bits: int) -> None:
        self._table = np.zeros(1 << bits, bool) if bits <= 24 else None
        self._runs: list[Words] = []

    def missing(self, words: Words) -> Words:
        """Those of `words` (sorted, distinct) that are not in the set."""
        if self._table is not None:
            return words[~self._table[words.astype(np.int64)]]
        for run in self._runs:
            at = np.searchsorted(run, words)
            at[at == len(run)] = 0
            words = words[run[at] != words]
        return words

    def add(self, words: Words) -> None:
        """Put in words (sorted, distinct) that are missing."""
        if self._table is not None:
            self._table[words.astype(np.int64)] = True
            return
        self._runs.append(words)
        while len(self._runs) > 1 and len(self._runs[-1]) * 2 > len(self._runs[-2]):
            last = self._runs.pop()
            self._runs[-1] = np.sort(np.concatenate([self._runs[-1], last]))


@dataclass
class Search:
    """A layered search along `moves`; `flagged` ends it. The bits of `inputs` tell changes from mere steps.

    After `run`, `layers` holds the vertices by key (input changes, steps), least first, and `hit` the least flagged
    vertex of the first layer that has one, with its key, or None.
    """

    bits: int
    inputs: np.uint64
    moves: Moves
    limits: Limits
    flagged: Callable[[Words], Bits] | None = None
    layers: dict[Key, Words] = field(default_factory=dict)
    hit: tuple[Key, int] | None = None
    size: int = 0

    def run(self, sources: dict[Key, Words]) -> Search:
        """Explore from `sources`, vertices by the key that they have already reached."""
        known = Known(self.bits)
        waiting: dict[Key, list[Words]] = {key: [words] for key, words in sources.items()}
        queue = sorted(waiting)
        while queue:
            key = heappop(queue)
            fresh = known.missing(distinct(np.concatenate(waiting.pop(key))))
            if not len(fresh):
                continue
            known.add(fresh)
            self.layers[key] = fresh
            self.size += len(fresh)
            self.limits.tick(self.size, key[0])
            if self.flagged is not None and (bad := fresh[self.flagged(fresh)]).size:
                self.hit = (key, int(bad[0]))
                return self
            source, target = self.moves(fresh)
            changed = self.changed(fresh[source], target)
            for after, found in (((key[0], key[1] + 1), target[~changed]), ((key[0] + 1, key[1] + 1), target[changed])):
                if len(found):
                    if after not in waiting:
                        heappush(queue, after)
                    waiting.setdefault(after, []).append(distinct(found))
        return self

    def changed(self, before: Words, after: Words | np.uint64) -> Bits:
        """Whether an input changes in each move."""
        return (before ^ after) & self.inputs != 0

    def path(self, key: Key, target: int) -> list[tuple[Key, int]]:
        """The vertices from a source to `target` in layer `key`, the least predecessor chosen at each step."""
        back = [(key, target)]
        while (found := self._before(*back[-1])) is not None:
            back.append(found)
        return back[::-1]

    def _before(self, key: Key, target: int) -> tuple[Key, int] | None:
        rounds, steps = key
        for before in ((rounds, steps - 1), (rounds - 1, steps - 1)):
            layer = self.layers.get(before)
            if layer is None:
                continue
            source, reached = self.moves(layer)
            origin = layer[source[reached == np.uint64(target)]]
            origin = origin[self.changed(origin, np.uint64(target)) == (before[0] < rounds)]
            if len(origin):
                return before, int(origin.min())
        return None


class Graph:
    """All reachable vertices of a circuit in its environment (see `Packed` for what a vertex is).

    `vertices` is sorted; `excited`, `key` (round, steps) and `end` (stable, nothing outstanding) run beside it.
    `sources`: where runs begin (default: the start states). When a limit ended the search, `unfinished` says which;
    the vertices found are reachable all the same, so that whatever is found wrong among them is wrong.
    """

    def __init__(self, packed: Packed, limits: Limits, sources: Words | None = None) -> None:
        self.packed, self.limits = packed, limits
        self.search = Search(packed.bits, packed.input_mask, self.moves, limits)
        self.unfinished: str | None = None
        try:
            self.search.run({(0, 0): starts(packed, limits) if sources is None else sources})
        except LimitReached as reached:
            self.unfinished = str(reached)
        keys = list(self.search.layers)
        joined = np.concatenate([*self.search.layers.values(), np.zeros(0, np.uint64)])
        order = np.argsort(joined)
        self.vertices: Words = joined[order]
        layer = np.repeat(np.arange(len(keys)), [len(w) for w in self.search.layers.values()])[order]
        self.keys, self.layer = keys, layer
        self.excited: Words = packed.excited(self.vertices)
        self.end: Bits = packed.ends(self.vertices, self.excited)

    def __len__(self) -> int:
        return len(self.vertices)

    def key(self, index: int) -> Key:
        """(changes, steps) of the shortest run to a vertex."""
        return self.keys[int(self.layer[index])]

    def earliest(self, indices: Places) -> Places:
        """`indices` ordered by the length of the shortest run to them, then by value."""
        return indices[np.lexsort((indices, self.layer[indices]))]

    def lengths(self, indices: Places) -> tuple[Places, Places]:
        """Changes and steps of the shortest run to each vertex."""
        table = np.array(self.keys, np.int64)[self.layer[indices]]
        return table[:, 0], table[:, 1]

    def path_to(self, index: int) -> list[int]:
        """A shortest run from a start state to a vertex, as indices."""
        words = [v for _, v in self.search.path(self.key(index), int(self.vertices[index]))]
        return self.index(np.array(words, np.uint64)).tolist()

    def index(self, words: Words) -> Places:
        """Positions of words in `vertices`; -1 for those that were not reached."""
        place = np.searchsorted(self.vertices, words)
        place[place == len(self)] = 0
        return np.where(self.vertices[place] == words, place, -1) if len(self) else place - 1

    def moves(self, vertices: Words) -> tuple[Places, Words]:
        """Every move: steps, and changes that the environment makes of its own accord."""
        parts = self.steps(vertices), self.changes(vertices)
        return np.concatenate([parts[0][0], parts[1][0]]), np.concatenate([parts[0][1], parts[1][1]])

    def steps(self, vertices: Words) -> tuple[Places, Words]:
        """Steps of the response (in input-output mode: every step)."""
        movers = self.packed.excited(vertices)
        return self._blockwise(lambda v, m: self.packed.steps(v, m), vertices, movers)

    def held(self, vertices: Words) -> tuple[Places, Words]:
        """Steps of the nodes alone, the inputs held."""
        return self._blockwise(self.packed.held, vertices, self.packed.excited(vertices))

    def changes(self, vertices: Words) -> tuple[Places, Words]:
        """Changes that the environment may make in the vertices among `vertices` that admit one."""
        place = np.flatnonzero(self.packed.ends(vertices, self.packed.excited(vertices)))
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
            self.limits.tick(len(self), self.keys[-1][0])
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


class Edges:
    """Edges between vertices 0 to size - 1, looked up from either side."""

    def __init__(self, size: int, source: Places, target: Places) -> None:
        self.size = size
        self.source, self.target = source, target

    @cached_property
    def _by_target(self) -> tuple[Places, Places]:
        order = np.argsort(self.target, kind="stable")
        return self.source[order], np.searchsorted(self.target[order], np.arange(self.size + 1))

    @cached_property
    def _by_source(self) -> tuple[Places, Places]:
        order = np.argsort(self.source, kind="stable")
        return self.target[order], np.searchsorted(self.source[order], np.arange(self.size + 1))

    def into(self, targets: Places) -> tuple[Places, Places]:
        """All edges into `targets`: (source, target) of each."""
        other, first = self._by_target
        place, owner = _ranges(first, targets)
        return other[place], owner

    def out_of(self, sources: Places) -> tuple[Places, Places]:
        """All edges out of `sources`: (source, target) of each."""
        other, first = self._by_source
        place, owner = _ranges(first, sources)
        return owner, other[place]


def _ranges(first: Places, rows: Places) -> tuple[Places, Places]:
    """Positions first[r] to first[r + 1] - 1 of every row in one array, and the row that each belongs to."""
    count = first[rows + 1] - first[rows]
    skip = np.repeat(np.cumsum(count) - count, count)
    return np.repeat(first[rows], count) + np.arange(len(skip)) - skip, np.repeat(rows, count)


def fair_components(edges: Edges, vertices: Words, excited: Words) -> list[Places]:
    """The strongly connected sets with an edge inside in which no node is excited with one value throughout."""
    left = _with_successors(edges)
    if not len(left):
        return []
    place = np.full(edges.size, -1, np.int64)
    place[left] = np.arange(len(left))
    source, target = place[edges.source], place[edges.target]
    inside = (source >= 0) & (target >= 0)
    label = _components(len(left), source[inside], target[inside])
    order = np.argsort(label, kind="stable")
    parts = np.split(left[order], np.flatnonzero(np.diff(label[order])) + 1)
    found = [part for part in parts if len(part) > 1 and not stuck(vertices[part], excited[part])]
    return sorted(found, key=lambda part: int(part[0]))


def _components(size: int, source: Places, target: Places) -> Places:
    """A number for each vertex, the same for those that reach one another. scipy costs an import, and wins if large."""
    if len(source) > LARGE:
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import connected_components

        matrix = coo_array((np.ones(len(source), np.int8), (source, target)), shape=(size, size))
        return np.asarray(connected_components(matrix, directed=True, connection="strong")[1], np.int64)
    successors: dict[int, list[int]] = {v: [] for v in range(size)}
    for v, w in zip(source.tolist(), target.tolist(), strict=True):
        successors[v].append(w)
    label = np.zeros(size, np.int64)
    for number, part in enumerate(components(successors)):
        label[part] = number
    return label


def stuck(vertices: Words, excited: Words) -> int:
    """Whether some node is excited with the same value in all of these states (0 if none is)."""
    high = np.bitwise_and.reduce(excited & vertices)
    low = np.bitwise_and.reduce(excited & ~vertices)
    return int(high | low)


def _with_successors(edges: Edges) -> Places:
    """What is left when vertices without successors are taken away again and again."""
    degree = np.bincount(edges.source, minlength=edges.size)
    fresh = np.flatnonzero(degree == 0)
    while len(fresh):
        before, _ = edges.into(fresh)
        np.subtract.at(degree, before, 1)
        touched = distinct(before)
        fresh = touched[degree[touched] == 0]
    return np.flatnonzero(degree > 0)
