"""Two circuits driven side by side by the same random input changes, many runs at a time: what could correspond.

Nothing is believed of what is seen here. Every run follows one ordering: the nodes outside a cut of the loops first,
then all excited nodes of the cut at once. A run that does not come to rest is left out from there on.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from random import Random

from settled.models.environment import Environment
from settled.models.logic import Program
from settled.verify.limits import Limits
from settled.verify.settled_states import Settled

CHANGES = 120
ROUNDS = 40
CALM = 20

Words = dict[str, int]


class Runs:
    """Runs of one circuit, a bit each in the word of every signal."""

    def __init__(self, settled: Settled, states: Sequence[int]) -> None:
        self.settled, circuit = settled, settled.circuit
        self.one = (1 << len(states)) - 1
        self.now: Words = {}
        for i, s in enumerate(circuit.signals):
            self.now[s] = sum((state >> i & 1) << lane for lane, state in enumerate(states))
        self._next = Program([settled.follows[k] for k in settled.cut])
        self._rest = Program([settled.value[n] for n in settled.order])

    def change(self, moved: Mapping[str, int]) -> int:
        """Change inputs, each in a word of runs, and let the circuit settle; the word of the runs that come to rest."""
        for x, word in moved.items():
            self.now[x] ^= word
        restless = self.one
        for _ in range(ROUNDS):
            after = dict(zip(self.settled.cut, self._next.run(self.now, self.one), strict=True))
            restless = 0
            for k, word in after.items():
                restless |= word ^ self.now[k]
            self.now |= after
            if not restless:
                break
        self.now.update(zip(self.settled.order, self._rest.run(self.now, self.one), strict=True))
        return self.one ^ restless


class Lockstep:
    """Both circuits from pairs of start states; guards and assumptions are those of the original's environment.

    For some changes at a time an input keeps still in half of the runs, so that a reset leaves the others alone.
    """

    def __init__(
        self,
        sides: tuple[Settled, Settled],
        environment: Environment,
        pairs: Sequence[tuple[int, int]],
        outputs: Sequence[str],
    ) -> None:
        one = sides[0].circuit
        self.sides = Runs(sides[0], [a for a, _ in pairs]), Runs(sides[1], [b for _, b in pairs])
        self.inputs, self.changes = one.inputs, environment.changes
        self.alive = self.one = (1 << len(pairs)) - 1
        self._width, self._rng, self._taken = len(pairs), Random(1), 0
        self._outputs = [Program([s.circuit.resolve(s.circuit.signal(z))[0] for z in outputs]) for s in sides]
        guards = [environment.guard(x) for x in one.inputs]
        self._guards = Program(one.resolve(*(e for g in guards for e in (g.rises, g.falls))))
        self._assume = Program(one.resolve(*environment.assume))

    def run(self, limits: Limits) -> Iterator[int]:
        """Drive both circuits, change by change. `alive`: the runs in which both sides have always come to rest."""
        for number in range(CHANGES):
            limits.check("in random simulation")
            moved = self._choice()
            for side in self.sides:
                self.alive &= side.change(moved)
            yield number

    def apart(self) -> int:
        """The runs in which the outputs differ."""
        left, right = (p.run(side.now, self.one) for p, side in zip(self._outputs, self.sides, strict=True))
        found = 0
        for a, b in zip(left, right, strict=True):
            found |= a ^ b
        return found

    def _choice(self) -> Words:
        """For each input the runs in which it changes."""
        if self._taken % CALM == 0:
            self._lively = {x: self._rng.getrandbits(self._width) for x in self.inputs}
        self._taken += 1
        allowed, several = self._allowed(), self.changes != "single" and self._rng.random() < 0.5
        chosen, taken = {}, 0
        for x in self._rng.sample(self.inputs, len(self.inputs)):
            word = self._rng.getrandbits(self._width) & allowed[x] & self._lively[x]
            chosen[x] = word if several else word & ~taken
            taken |= word
        now = self.sides[0].now
        lawful = self.alive
        for word in self._assume.run(now | {x: now[x] ^ w for x, w in chosen.items()}, self.one):
            lawful &= word
        return {x: word & lawful for x, word in chosen.items()}

    def _allowed(self) -> Words:
        now = self.sides[0].now
        values = self._guards.run(now, self.one)
        rises, falls = values[::2], values[1::2]
        return {x: r & ~now[x] | f & now[x] for x, r, f in zip(self.inputs, rises, falls, strict=True)}
