"""Which nodes of two cuts go together: classes of nodes that are split as long as equal values lead to unequal ones.

All members of a class are given the same random value, up to inversion, under inputs that were seen; those that are
then excited to different values part (van Eijk, "Sequential equivalence checking based on structural similarities",
2000, recalled). This tells nodes apart that were never seen to move.
"""

from __future__ import annotations

from collections.abc import Mapping
from random import Random

from settled.models.logic import Program
from settled.verify.limits import Limits
from settled.verify.matching.cuts import Pairs
from settled.verify.matching.guesses import Partner, Seen, Sides

Node = tuple[int, str]
"""A node of the cut of side 0 or 1."""

SAMPLES = 24


class Classes:
    """The nodes of both cuts by class. `inverse`: whether a node has the inverse of the value of its class."""

    def __init__(self, sides: Sides, seen: Seen) -> None:
        self.sides, self.seen = sides, seen
        self._rng = Random(2)
        self._next = [Program([side.follows[k] for k in side.cut]) for side in sides]
        self.label: dict[Node, int] = {}
        self.inverse: dict[Node, bool] = {}
        names: dict[int, int] = {}
        mask = seen.mask
        first = mask & -mask
        for at, side in enumerate(sides):
            for k in side.cut:
                bits = seen.bits(at, k)
                self.inverse[at, k] = bool(bits & first)
                self.label[at, k] = names.setdefault(bits ^ mask if bits & first else bits, len(names))

    def refine(self, limits: Limits) -> None:
        """Split classes until many samples have shown no more differences."""
        calm = 0
        while calm < SAMPLES:
            limits.check("while nodes are matched")
            before = len(set(self.label.values()))
            self._split(self._rng.choice(self.seen.moments)[0])
            calm = calm + 1 if len(set(self.label.values())) == before else 0

    def _split(self, seen: Mapping[str, int]) -> None:
        one = (1 << self.seen.width) - 1
        value = {label: self._rng.getrandbits(self.seen.width) for label in sorted(set(self.label.values()))}
        names: dict[tuple[int, int], int] = {}
        for at, side in enumerate(self.sides):
            now = {x: seen[x] for x in side.circuit.inputs}
            now |= {k: value[self.label[at, k]] ^ one * self.inverse[at, k] for k in side.cut}
            for k, target in zip(side.cut, self._next[at].run(now, one), strict=True):
                sign = self.label[at, k], target ^ one * self.inverse[at, k]
                self.label[at, k] = names.setdefault(sign, len(names))

    def pairs(self) -> Pairs:
        """By node of the original its partner, where a class has as many members on both sides; like-named first."""
        members: dict[int, tuple[set[str], set[str]]] = {}
        for (at, k), label in self.label.items():
            members.setdefault(label, (set(), set()))[at].add(k)
        found = {}
        for left, right in members.values():
            if len(left) == len(right):
                alike = ((n, n) for n in sorted(left & right))
                rest = zip(sorted(left - right), sorted(right - left), strict=True)
                for n, p in (*alike, *rest):
                    found[n] = Partner(p, self.inverse[0, n] != self.inverse[1, p])
        return found
