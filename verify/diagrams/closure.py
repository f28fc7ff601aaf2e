"""What can be reached from a set, forwards or backwards, in rings from which single runs are read off.

Single moves are applied one after the other, each to all that has been found, until they find nothing more; joint
moves, which leave out nothing, then have the last word (chaining: Burch, Clarke and Long 1991, recalled). What is
found is reached by lawful moves; what is complete is complete under all moves.
"""

from __future__ import annotations

from bisect import bisect_left
from collections.abc import Iterator
from itertools import pairwise

from settled.verify.diagrams.manager import Diagrams, Set
from settled.verify.diagrams.moves import Cluster, Move, Moves, Plain

KEPT = 100


class Closure:
    """All states that moves lead to from `sources`; or, `backwards`, from which they lead there.

    `within`: only moves between states of this set. `until`: the search may end once a state of it is found.
    `rings`: what had been found now and then, after moves were applied one after the other; `rounds`: the moves
    applied since the ring before. Only so many are kept: every diagram that is kept makes reordering slower.
    """

    def __init__(
        self,
        diagrams: Diagrams,
        moves: Moves,
        sources: Set,
        backwards: bool = False,
        within: Set | None = None,
        until: Set | None = None,
    ) -> None:
        self.diagrams, self.moves, self.backwards = diagrams, moves, backwards
        self.within = diagrams.true if within is None else within
        confined = backwards or within is not None
        self.chained = moves.single if confined else moves.fast
        self.until = diagrams.false if until is None else until
        self.rings = [sources & self.within]
        self.rounds: list[tuple[Move, ...]] = [()]
        self._done: dict[Move, Set] = {}
        self._number = 0
        self._close()

    @property
    def reached(self) -> Set:
        """All that was found."""
        return self.rings[-1]

    @property
    def hit(self) -> Set:
        """The states of `until` that were found."""
        return self.reached & self.until

    def path(self, state: int) -> list[int]:
        """The states of a run between a source and a reached `state`, in the order of the run: its first is a source
        or, backwards, its last."""
        found, number = [state], self._ring(self.diagrams.point(state))
        while number:
            found += self._through(number, found[-1])
            number = self._ring(self.diagrams.point(found[-1]))
        return found if self.backwards else found[::-1]

    def earliest(self, wanted: Set, near: int = 0) -> int:
        """A state of `wanted`, some of which was reached, in the first ring that has one."""
        return self.diagrams.nearest(self.rings[self._ring(wanted)] & wanted, near)

    def _close(self) -> None:
        while self.hit == self.diagrams.false:
            if not self._round(self.chained) and not self._round(self.moves.joint):
                break

    def _round(self, moves: tuple[Move, ...]) -> bool:
        """Apply moves one after the other; whether they found anything."""
        reached = self.reached
        self._number += 1
        for move in moves:
            self.diagrams.check(f"in round {self._number:,} of the decision diagrams")
            fresh = reached & ~self._done[move] if move in self._done else reached
            if fresh != self.diagrams.false:
                self._done[move] = reached
                reached = reached | self._moved(move, fresh) & self.within
        if reached == self.reached:
            return False
        self.rings.append(reached)
        self.rounds.append(moves)
        if len(self.rings) > KEPT:
            self._thin()
        return True

    def _thin(self) -> None:
        """Keep the first ring, the last and every second one between them."""
        last = len(self.rings) - 1
        kept = [*range(0, last, 2), last]
        joined = [tuple(m for part in self.rounds[a + 1 : b + 1] for m in part) for a, b in pairwise(kept)]
        self.rings = [self.rings[i] for i in kept]
        self.rounds = [(), *joined]

    def _moved(self, move: Move, f: Set) -> Set:
        if isinstance(move, Cluster):
            return move.image(f)
        return move.preimage(f) if self.backwards else move.image(f)

    def _spelt_out(self, number: int) -> Iterator[tuple[Set, Plain | None]]:
        """What had been found in the course of a round, and the move that found it last, clusters taken apart."""
        reached = self.rings[number - 1]
        yield reached, None
        for move in self.rounds[number]:
            before = self.diagrams.false
            while reached != before:
                before = reached
                for part in move.parts if isinstance(move, Cluster) else (move,):
                    reached = reached | self._moved(part, reached) & self.within
                    yield reached, part
                if not isinstance(move, Cluster):
                    break

    def _ring(self, wanted: Set) -> int:
        """The number of the first ring that has a state of `wanted`."""
        empty = self.diagrams.false
        return bisect_left(self.rings, True, key=lambda ring: ring & wanted != empty)

    def _through(self, number: int, state: int) -> list[int]:
        """From a state that ring `number` is the first to have, to one of a ring before it: the states after it."""
        d = self.diagrams
        inner = list(self._spelt_out(number))
        found = [state]
        while (at := next(i for i, (ring, _) in enumerate(inner) if d.holds(ring, found[-1]))) > 0:
            move, here = inner[at][1], d.point(found[-1])
            assert move is not None, "only the first set was not found by a move"
            near = move.image(here) if self.backwards else move.preimage(here)
            sets = [*self.rings[: number - 1], *(ring for ring, _ in inner[:at])]
            best = next(ring & near for ring in sets if ring & near != d.false)
            found.append(d.nearest(best, found[-1]))
        return found[1:]
