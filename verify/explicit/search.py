"""Layered search over packed vertices.

Layers are ordered by (steps in which an input changes, steps): the first vertex found that satisfies a condition
has a run to it with the fewest input changes and, among those, the fewest steps.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass, field
from heapq import heappop, heappush
from typing import TypeVar

import numpy as np
import numpy.typing as npt

from settled.encodings.packed import Bits, Packed, Places, Words
from settled.verify.limits import Limits

Key = tuple[int, int]
T = TypeVar("T", bound=np.generic)
Moves = Callable[[Words], tuple[Places, Words]]

BLOCK = 1 << 21


def blocks(vertices: Words, movers: Words, limits: Limits, winners: str = "any") -> Iterator[slice]:
    """Slices of `vertices` small enough that all steps of a slice fit into memory."""
    count = np.bitwise_count(movers).astype(np.float64)
    rows = np.exp2(count) if winners == "any" else count
    if len(rows) and rows.max() > 4 * BLOCK:
        limits.refuse(f"{int(count.max())} signals can switch in one step, in more combinations than fit into memory")
    start, total = 0, np.cumsum(rows)
    while start < len(rows):
        limits.check(f"within a layer of {len(vertices):,} total states")
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
    """A layered search along `moves`; `flagged` ends it. Its words are vertices of `packed`, marks above them.

    `bits`: how many a word has, with its marks. After `run`, `layers` holds the words by key (input changes, steps),
    least first, and `hit` those of the first layer that are flagged, with its key, or None. A search that a limit
    ended goes on where it was when `run` is called again. `most`: how many input changes deep it goes; `cut` says that
    there was more.
    """

    packed: Packed
    bits: int
    moves: Moves
    limits: Limits
    flagged: Callable[[Words], Bits] | None = None
    layers: dict[Key, Words] = field(default_factory=dict)
    hit: tuple[Key, Words] | None = None
    size: int = 0
    most: int | None = None
    cut: bool = False

    def __post_init__(self) -> None:
        self._known = Known(self.bits)
        self._waiting: dict[Key, list[Words]] = {}
        self._queue: list[Key] = []

    @property
    def done(self) -> bool:
        """Whether nothing is left to explore, as deep as it goes."""
        return not self._queue

    def begin(self, sources: Words) -> Search:
        """Put in words to explore from."""
        self._enqueue((0, 0), sources)
        return self

    def run(self) -> Search:
        """Explore until nothing is left or something is flagged. Raises `LimitReached`."""
        while self._queue and self.hit is None:
            self.limits.tick(self.size, self._queue[0][0])
            self._layer(self._queue[0])
            heappop(self._queue)
        return self

    def _layer(self, key: Key) -> None:
        fresh = self._known.missing(distinct(np.concatenate(self._waiting[key])))
        source, target = self.moves(fresh)
        del self._waiting[key]
        if not len(fresh):
            return
        self._known.add(fresh)
        self.layers[key] = fresh
        self.size += len(fresh)
        if self.flagged is not None and (bad := fresh[self.flagged(fresh)]).size:
            self.hit = (key, bad)
        changed = self.changed(fresh[source], target)
        self._enqueue((key[0], key[1] + 1), target[~changed])
        self._enqueue((key[0] + 1, key[1] + 1), target[changed])

    def _enqueue(self, key: Key, words: Words) -> None:
        if not len(words):
            return
        if self.most is not None and key[0] > self.most:
            self.cut = True
            return
        if key not in self._waiting:
            heappush(self._queue, key)
        self._waiting.setdefault(key, []).append(distinct(words))

    def changed(self, before: Words, after: Words) -> Bits:
        """Whether an input changes in each move."""
        return (before ^ after) & self.packed.input_mask != 0
