"""Fair runs that go on for ever: the hull that holds them all, and one of them.

The hull is the greatest set from each state of which, for every condition, a state that meets it can be reached
within the set (Emerson and Lei 1986, "Efficient model checking in fragments of the propositional mu-calculus",
recalled). Moves may include that nothing moves: a run that stands still for ever meets all conditions only where
nothing presses.
"""

from __future__ import annotations

from collections.abc import Sequence

from settled.verify.diagrams.closure import Closure
from settled.verify.diagrams.manager import Diagrams, Set
from settled.verify.diagrams.moves import Moves


def conditions(diagrams: Diagrams, pressing: Sequence[tuple[str, Set]]) -> list[Set]:
    """What a fair run meets again and again: each variable does not press with value 0, does not press with 1."""
    found = []
    for name, presses in pressing:
        value = diagrams.manager.var(name)
        found += [~(presses & value), ~(presses & ~value)]
    return [c for c in dict.fromkeys(found) if c != diagrams.true]


def hull(diagrams: Diagrams, moves: Moves, region: Set, met: Sequence[Set]) -> Set:
    """The states of `region` from which a run within it meets all conditions again and again."""
    left = region
    while True:
        before = left
        for condition in met:
            if left == diagrams.false:
                return left
            left = Closure(diagrams, moves, left & condition, backwards=True, within=left).reached
        if left == before:
            return left


def endless(diagrams: Diagrams, moves: Moves, region: Set) -> Set:
    """The states of `region` from which some run within it, fair or not, moves for ever: none if it has no cycle."""
    left = region
    while True:
        diagrams.check("among the runs that may have no end")
        before = left
        left = left & diagrams.union(move.strict_preimage(left) for move in moves.all)
        if left == before:
            return left


class Core:
    """A strongly connected part of a hull from which no move within the hull leads out: it meets all conditions."""

    def __init__(self, diagrams: Diagrams, moves: Moves, inside: Set, met: Sequence[Set]) -> None:
        self.diagrams, self.moves, self.met = diagrams, moves, met
        self.states = self._last(inside)

    def cycle(self, entry: int) -> list[int]:
        """A closed run from `entry` that meets all conditions, without the return to it."""
        d = self.diagrams
        path, left = [entry], [c for c in self.met if not d.holds(c, entry)]
        while left:
            path += self._way(path[-1], left[0])
            left = [c for c in left if not any(d.holds(c, state) for state in path)]
        if path[-1] != entry:
            path += self._way(path[-1], d.point(entry))
        return path[:-1]

    def _way(self, start: int, wanted: Set) -> list[int]:
        """From a state to one that is wanted, the first left out."""
        d = self.diagrams
        closure = Closure(d, self.moves, d.point(start), within=self.states, until=wanted)
        return closure.path(closure.earliest(wanted, start))[1:]

    def _last(self, inside: Set) -> Set:
        d = self.diagrams
        state = d.nearest(inside, 0)
        while True:
            after = Closure(d, self.moves, d.point(state), within=inside).reached
            both = Closure(d, self.moves, d.point(state), backwards=True, within=after).reached
            if both == after:
                return both
            state = d.nearest(after & ~both, state)
