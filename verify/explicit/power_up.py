"""Power-up on the graph: from every internal state whatever, through a sequence of input vectors.

A vertex is a total state with, above it, how many vectors of the sequence have been applied before the present one.
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from settled.encodings.packed import WIDTH, Packed, Places, TooWide, Words
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.states import Behaviour, Situation
from settled.verify.explicit.graph import Graph
from settled.verify.limits import Limits

SAMPLE = 2_000


class Sequenced(Packed):
    """A circuit to which `vectors` are applied in turn, each in one instant, once it has settled under the one before.

    The only environment that takes part is this sequence. Raises `TooWide` beyond 63 bits a vertex.
    """

    def __init__(self, circuit: Circuit, vectors: Sequence[int]) -> None:
        super().__init__(circuit, Environment())
        self.vectors: Words = np.array(vectors, np.uint64)
        self.bits = self.state_bits + (len(vectors) - 1).bit_length()
        if self.bits > WIDTH:
            raise TooWide(f"{self.bits} bits a total state; at most {WIDTH} fit")

    def applied(self, vertices: Words) -> Places:
        """The position in the sequence of the vector that each vertex stands under."""
        return (vertices >> np.uint64(self.state_bits)).astype(np.int64)

    def allowed(self, vertices: Words) -> Words:
        """No input changes of its own accord."""
        return np.zeros_like(vertices)

    def changes(self, stable: Words) -> tuple[Places, Words]:
        """The next vector is applied."""
        following = self.applied(stable) + 1
        place = np.flatnonzero(following < len(self.vectors))
        internal = stable[place] & self.state_mask & ~self.input_mask
        number = following[place].astype(np.uint64) << np.uint64(self.state_bits)
        return place, internal | self.vectors[following[place]] | number

    def first(self) -> Words:
        """Every internal state under the first vector."""
        internal = np.arange(1 << self.nodes, dtype=np.uint64) << np.uint64(self.inputs)
        return internal | self.vectors[0]


class PowerUp(Graph):
    """All vertices from power-up on."""

    packed: Sequenced

    def __init__(self, packed: Sequenced, limits: Limits) -> None:
        if 1 << packed.nodes > limits.states:
            limits.refuse(
                f"{packed.nodes} nodes can power up in {1 << packed.nodes:,} internal states, more than the limit of "
                f"{limits.states:,} total states; raise it with --states N"
            )
        super().__init__(packed, limits, packed.first())

    @property
    def ends(self) -> Places:
        """The stable vertices under the last vector."""
        last = self.packed.applied(self.vertices) == len(self.packed.vectors) - 1
        return np.flatnonzero(self.end & last)

    def run_states(self, path: Sequence[int]) -> tuple[int, ...]:
        """The total states along vertices; a vector that changes nothing leaves no step."""
        states = [word & int(self.packed.state_mask) for word in path]
        return tuple(s for i, s in enumerate(states) if i == 0 or s != states[i - 1])

    def escaping(self, behaviour: Behaviour) -> int | None:
        """A total state with a step, by the executable meaning, out of the explored set; None if there is none.

        Looks at all states of small graphs, at an evenly spaced sample of large ones.
        """
        low = np.uint64(self.packed.state_bits)
        for word in self.vertices[:: max(1, len(self) // SAMPLE)]:
            state = int(word & self.packed.state_mask)
            if behaviour.excited(state).bit_count() <= 12:
                after = [s.state for s in behaviour.held(Situation(state))]
                if (self.index(np.array(after, np.uint64) | (word >> low << low)) < 0).any():
                    return state
        return None
