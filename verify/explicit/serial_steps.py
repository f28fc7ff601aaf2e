"""Steps that do for all steps when it only matters what can be reached: one node, or nodes that read one another.

Under `winners = "any"` a set of excited nodes may switch at once. If the nodes of the set can be put in an order in
which none comes after a node that reads it, they may as well switch one after the other in that order: each still sees
what it saw before. So only sets in which every node is read, directly or through others of the set, by every other need
a step of their own. What is reached, where runs end and what they can go round for ever are the same; only the number
of steps is not.
"""

from __future__ import annotations

from functools import cache

import numpy as np

from settled.encodings.packed import Places, Words
from settled.models.circuit import Circuit
from settled.models.components import components
from settled.models.logic import support
from settled.models.states import members, subsets
from settled.verify.limits import Limits

LARGEST = 14


class SerialSteps:
    """The steps of a circuit with its inputs held, sets that can be taken apart left out."""

    def __init__(self, circuit: Circuit, limits: Limits) -> None:
        self.circuit, self.limits = circuit, limits
        place = {n: 1 << circuit.place[n] for n in circuit.nodes}
        self._reads = {
            place[n]: sum({place[s] for s in support(circuit.excitation[n]) if s in place}) for n in circuit.nodes
        }
        self._readers = {bit: sum(other for other, reads in self._reads.items() if reads & bit) for bit in self._reads}
        self.choices, self._together = cache(self._choices), cache(self._reading_one_another)

    def _choices(self, movers: int) -> Words:
        """The sets to be switched when the nodes in a packed set are excited."""
        found = list(members(movers))
        if self.circuit.winners == "any":
            found += self._together(self._knot(movers))
        return np.array(found, np.uint64)

    def _knot(self, movers: int) -> int:
        """What is left of a packed set without nodes that read nothing of it or that nothing of it reads."""
        left, before = movers, 0
        while left != before:
            before = left
            for bit in members(left):
                if not self._reads[bit] & ~bit & left or not self._readers[bit] & ~bit & left:
                    left ^= bit
        return left

    def _reading_one_another(self, knot: int) -> tuple[int, ...]:
        """The sets of at least two nodes that read one another, none with both nodes of an exclusive pair."""
        found = []
        for part in self._loops(knot):
            if len(part) > LARGEST:
                self.limits.refuse(f"{len(part)} nodes that read one another can switch in one step")
            for chosen in subsets(sum(part)):
                whole = any(len(loop) == chosen.bit_count() for loop in self._loops(chosen))
                if whole and not any(chosen & pair == pair for pair in self.circuit.pairs):
                    found.append(chosen)
        return tuple(found)

    def _loops(self, movers: int) -> list[list[int]]:
        """The sets of at least two nodes, within a packed set, that read one another."""
        found = components({n: list(members(self._reads[n] & movers)) for n in members(movers)})
        return [part for part in found if len(part) > 1]

    def steps(self, vertices: Words, movers: Words) -> tuple[Places, Words]:
        """(index of the source, target) of each step; `movers`: the excited nodes of each vertex."""
        kinds, kind = np.unique(movers, return_inverse=True)
        sets = [self.choices(m) for m in kinds.tolist()]
        size = np.array([len(s) for s in sets], np.int64)
        first = np.cumsum(size) - size
        count = size[kind]
        source = np.repeat(np.arange(len(vertices)), count)
        within = np.arange(len(source)) - np.repeat(np.cumsum(count) - count, count)
        flat = np.concatenate([np.zeros(0, np.uint64), *sets])
        return source, vertices[source] ^ flat[np.repeat(first[kind], count) + within]
