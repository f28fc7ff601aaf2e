"""The product of two circuits that get the same changes: which pairs of stable total states are good.

A pair is bad when its outputs differ, when some change lets a side fail to settle (or brings a new hazard), or when
some change can lead to a bad pair. All other pairs together are the greatest set of good pairs.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import NamedTuple, Protocol

from settled.models.circuit import Circuit
from settled.verify.explicit.replies import Reply
from settled.verify.limits import Limits
from settled.verify.pairing import Schedule, by_vector

Pair = tuple[int, int]


class Facing(Protocol):
    """One side: its responses. A stable total state is a number with the input vector lowest."""

    circuit: Circuit

    def prepare(self, changes: Iterable[tuple[int, Schedule]]) -> None:
        """Make replies to changes ready."""

    def reply(self, state: int, schedule: Schedule) -> Reply:
        """The response to a change that has been prepared."""

    def hazards(self, state: int, schedule: Schedule) -> int:
        """The packed set of compared outputs that change twice in some run of the response to a change."""

    def evaluate(self, states: Iterable[int]) -> None:
        """Make values of the compared outputs ready."""

    def value(self, state: int) -> int:
        """The packed values of the compared outputs."""

    def run_to(self, state: int, schedule: Schedule, end: int) -> list[int]:
        """The shortest run of a response to one of its ends, the state before the change first."""

    def lasso(self, state: int, schedule: Schedule) -> tuple[list[int], int]:
        """The shortest run of a response that never settles, and the position at which its last state goes on."""


class Original(Facing, Protocol):
    """The side that the environment looks at."""

    def care(self, state: int) -> int:
        """The packed set of compared outputs whose value matters."""

    def changes(self, states: Sequence[int]) -> Mapping[int, Sequence[Schedule]]:
        """For each stable total state the changes that the environment may make."""


class Row(NamedTuple):
    """A start state that needs a partner: side 0 (original) or 1, the state, its pairs with start states."""

    side: int
    state: int
    pairs: tuple[Pair, ...]


def rows(lefts: Sequence[int], rights: Sequence[int], mask: int, needs: tuple[bool, bool], limits: Limits) -> list[Row]:
    """The start states of the sides that need partners, each with its pairs: those under the same input vector."""
    left, right = by_vector(lefts, mask), by_vector(rights, mask)
    limits.tick(sum(len(states) * len(right.get(v, ())) for v, states in left.items()), 0)
    found = [Row(0, a, tuple((a, b) for b in right.get(a & mask, ()))) for a in lefts if needs[0]]
    return found + [Row(1, b, tuple((a, b) for a in left.get(b & mask, ()))) for b in rights if needs[1]]


class Fault(NamedTuple):
    """Why a pair is bad by itself: how many changes away that is, which change, and what goes wrong.

    `what`: `outputs`, `unsettled` or `hazard`.
    """

    changes: int
    schedule: Schedule
    what: str


@dataclass
class Found:
    """A start state without a good partner, its best pair, and the fewest changes that show it to be bad."""

    row: Row
    pair: Pair | None
    changes: int


class PairSearch:
    """All pairs that are reachable from pairs of start states, layer by layer; each layer is one change more."""

    def __init__(self, original: Original, other: Facing, limits: Limits, transients: bool = False) -> None:
        self.original, self.other, self.limits, self.transients = original, other, limits, transients
        self.faults: dict[Pair, Fault] = {}
        self.seen: set[Pair] = set()
        self.before: dict[Pair, list[Pair]] = {}
        self.lawful: dict[int, Sequence[Schedule]] = {}
        self.level: dict[Pair, int] = {}
        self.changes = 0

    def run(self, rows: Sequence[Row]) -> Found | None:
        """Search until some start state is known to have no good partner, or until nothing new is found."""
        alone = next((row for row in rows if not row.pairs), None)
        if alone is not None:
            return Found(alone, None, 0)
        layer = sorted({pair for row in rows for pair in row.pairs})
        self.seen.update(layer)
        depth = 0
        while layer:
            self.limits.tick(len(self.seen), depth)
            layer = self._expand(layer)
            if self.faults and (found := self._failing(rows)) is not None:
                return found
            depth += 1
        return None

    def _expand(self, layer: list[Pair]) -> list[Pair]:
        """Judge the pairs of a layer; the new pairs that changes lead to from those without a fault of their own."""
        self.original.evaluate(a for a, _ in layer)
        self.other.evaluate(b for _, b in layer)
        apart = [pair for pair in layer if self.differ(pair)]
        self.faults.update(dict.fromkeys(apart, Fault(0, (), "outputs")))
        agreeing = [pair for pair in layer if pair not in self.faults]
        self._prepare(agreeing)
        fresh: set[Pair] = set()
        for number, pair in enumerate(agreeing):
            if number % 4096 == 0:
                self.limits.tick(len(self.seen) + len(fresh), 0)
            fault = self._fault(pair)
            if fault is not None:
                self.faults[pair] = fault
                continue
            for after in self._after(pair):
                if after not in self.seen:
                    fresh.add(after)
                self.before.setdefault(after, []).append(pair)
        self.seen |= fresh
        return sorted(fresh)

    def _prepare(self, pairs: Sequence[Pair]) -> None:
        new = sorted({a for a, _ in pairs if a not in self.lawful})
        self.lawful.update(self.original.changes(new))
        self.original.prepare((a, s) for a in new for s in self.lawful[a])
        self.other.prepare((b, s) for a, b in pairs for s in self.lawful[a])
        self.changes += sum(len(self.lawful[a]) for a, _ in pairs)

    def differ(self, pair: Pair) -> int:
        """The packed set of outputs on which a pair differs."""
        a, b = pair
        return (self.original.value(a) ^ self.other.value(b)) & self.original.care(a)

    def _fault(self, pair: Pair) -> Fault | None:
        a, b = pair
        for schedule in self.lawful[a]:
            if self.original.reply(a, schedule).ends is None or self.other.reply(b, schedule).ends is None:
                return Fault(1, schedule, "unsettled")
            if self.transients and self.new_hazards(pair, schedule):
                return Fault(1, schedule, "hazard")
        return None

    def new_hazards(self, pair: Pair, schedule: Schedule) -> int:
        """The outputs that flicker in the response of the other circuit and not in that of the original."""
        a, b = pair
        return self.other.hazards(b, schedule) & ~self.original.hazards(a, schedule)

    def _after(self, pair: Pair) -> Iterator[Pair]:
        for schedule in self.lawful[pair[0]]:
            yield from self.ends(pair, schedule)

    def ends(self, pair: Pair, schedule: Schedule) -> Iterator[Pair]:
        """Every pair of ends of the responses to one change, under which both sides settle."""
        a, b = pair
        lefts, rights = self.original.reply(a, schedule).ends, self.other.reply(b, schedule).ends
        return ((p, q) for p in lefts or () for q in rights or ())

    # ---- what is bad ---------------------------------------------------------------------------------------------

    def _failing(self, rows: Sequence[Row]) -> Found | None:
        """The start state whose best pair is bad after the fewest changes, if one has no good pair left."""
        self.level = self._levels()
        failing = [row for row in rows if all(pair in self.level for pair in row.pairs)]
        found = [Found(row, self._best(row), self.level[self._best(row)]) for row in failing]
        return min(found, key=lambda f: f.changes, default=None)

    def _best(self, row: Row) -> Pair:
        return max(row.pairs, key=lambda pair: (self.level[pair], -pair[0], -pair[1]))

    def _levels(self) -> dict[Pair, int]:
        """For each pair that is known to be bad the fewest changes that show it."""
        level: dict[Pair, int] = {}
        fresh = [pair for pair, fault in self.faults.items() if fault.changes == 0]
        later = [pair for pair, fault in self.faults.items() if fault.changes == 1]
        changes = 0
        while fresh or later:
            level.update(dict.fromkeys(fresh, changes))
            before = {p for pair in fresh for p in self.before.get(pair, ())}
            fresh = [p for p in {*before, *later} if p not in level]
            later, changes = [], changes + 1
        return level

    def good(self) -> list[Pair]:
        """The relation found: every pair that was reached and is not bad."""
        return sorted(pair for pair in self.seen if pair not in self.level)
