"""Responses of a circuit without feedback in random orders, many at a time: does a signal change twice in one of them?

Nodes are looked at in one random order after the other, and each that is excited switches: a lawful fair run in every
bit of the words. Only nodes that the watched signal depends on switch; the others do when it is over.
"""

from __future__ import annotations

from collections.abc import Sequence
from random import Random

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, Program, support
from settled.models.states import excited
from settled.verify.explicit.scheduled_replies import turned
from settled.verify.limits import Limits
from settled.verify.never import Never
from settled.verify.settled_states import Settled
from settled.verify.stable_states import start_conditions

Words = dict[str, int]
Event = tuple[str, int]
"""A node, and the word of the cases in which it has switched."""

ORDERS = 3
"""How many responses to the same changes are tried."""


class RandomOrders:
    """The responses of a circuit to random changes from given stable states, one in each bit of the words."""

    def __init__(self, circuit: Circuit, environment: Environment, signal: Expr, seed: int = 0) -> None:
        self.circuit, self.environment, self._rng = circuit, environment, Random(seed)
        self._watched = Program([signal])
        self._reads = {n: support(e) for n, e in circuit.excitation.items()}
        self._programs = {n: Program([e]) for n, e in circuit.excitation.items()}
        guards = [environment.guard(x) for x in circuit.inputs]
        self._guards = Program(circuit.resolve(*(e for g in guards for e in (g.rises, g.falls))))
        self._assume = Program(circuit.resolve(*environment.assume))
        self.cone = self._cone(signal)

    def _cone(self, signal: Expr) -> list[str]:
        known, todo = set[str](), [s for s in support(signal) if s in self._reads]
        while todo:
            node = todo.pop()
            if node not in known:
                known.add(node)
                todo += [s for s in self._reads[node] if s in self._reads]
        return [n for n in self.circuit.nodes if n in known]

    def search(self, states: Sequence[int], limits: Limits) -> list[int] | None:
        """A run from one of the states through a change, up to the second change of the signal; None when none shows.

        One input changes in each case, or several where they may change in one instant.
        """
        one = (1 << len(states)) - 1
        signals = self.circuit.signals
        rest = {s: sum((state >> i & 1) << k for k, state in enumerate(states)) for i, s in enumerate(signals)}
        moved = self._change(rest, one)
        for _ in range(ORDERS):
            now = rest | {x: rest[x] ^ word for x, word in moved.items()}
            events: list[Event] = []
            twice = self._respond(now, one, self._watched.run(rest, one)[0], events, limits)
            if twice:
                lane = twice.bit_length() - 1
                change = sum(1 << i for i, x in enumerate(self.circuit.inputs) if moved[x] >> lane & 1)
                return self._run(states[lane], change, [n for n, word in events if word >> lane & 1])
        return None

    def _change(self, rest: Words, one: int) -> Words:
        """For each input the cases in which it changes."""
        values = self._guards.run(rest, one)
        guarded = zip(self.circuit.inputs, values[::2], values[1::2], strict=True)
        allowed = {x: rises & ~rest[x] | falls & rest[x] for x, rises, falls in guarded}
        moved = dict.fromkeys(self.circuit.inputs, 0)
        for lane in range(one.bit_length()):
            may = [x for x, word in allowed.items() if word >> lane & 1]
            most = len(may) if self.environment.changes == "simultaneous" else 1
            for x in self._rng.sample(may, self._rng.randint(1, most)) if may else ():
                moved[x] |= 1 << lane
        lawful = one
        for word in self._assume.run(rest | {x: rest[x] ^ w for x, w in moved.items()}, one):
            lawful &= word
        return {x: word & lawful for x, word in moved.items()}

    def _respond(self, now: Words, one: int, before: int, events: list[Event], limits: Limits) -> int:
        """Let the nodes of the cone come to rest; the cases in which the signal has changed twice by then."""
        left = self._watched.run(now, one)[0] ^ before
        calm = False
        while not calm:
            limits.check("in random orders")
            calm = True
            for node in self._rng.sample(self.cone, len(self.cone)):
                moved = self._programs[node].run(now, one)[0] ^ now[node]
                if not moved:
                    continue
                calm = False
                now[node] ^= moved
                events.append((node, moved))
                away = self._watched.run(now, one)[0] ^ before if node in self._watched.reads else left
                if left & ~away:
                    return left & ~away
                left |= away
        return 0

    def _run(self, state: int, change: int, switched: Sequence[str]) -> list[int]:
        run = [state, state ^ change]
        for node in self._causes(switched):
            run.append(run[-1] ^ 1 << self.circuit.place[node])
        return run

    def _causes(self, switched: Sequence[str]) -> list[str]:
        """Of a sequence of switchings those that the last one, and the one that it takes back, follow from."""
        needed = set(self._watched.reads)
        kept: list[str] = []
        for node in reversed(switched):
            if node in needed:
                kept.append(node)
                needed.update(self._reads[node])
        return kept[::-1]


def some_starts(circuit: Circuit, environment: Environment, count: int, limits: Limits, seed: int) -> list[int]:
    """So many start states of a circuit without feedback, chosen at random; fewer where it has no more."""
    settled, rng = Settled(circuit), Random(seed)
    begins = Never([settled.in_rest(e) for e in start_conditions(circuit, environment)], limits)
    vectors = set()
    for _ in range(count):
        begins.prefer({x: rng.getrandbits(1) for x in circuit.inputs})
        if begins.solve([]):
            vectors.add(tuple(begins.model(circuit.inputs).values()))
    words = [sum(v[i] << k for k, v in enumerate(sorted(vectors))) for i in range(len(circuit.inputs))]
    values = Program([settled.value[s] for s in circuit.signals]).run(
        dict(zip(circuit.inputs, words, strict=True)), (1 << len(vectors)) - 1
    )
    return turned(values, len(vectors))


def to_rest(circuit: Circuit, state: int) -> list[int]:
    """The states from there to rest: all excited nodes at once, or one by one where only one may win."""
    run = [state]
    while moving := excited(circuit, run[-1]):
        run.append(run[-1] ^ (moving & -moving if circuit.winners == "one" else moving))
    return run
