"""Which nodes of two circuits could correspond: those that had the same, or the inverse, value in all that was seen."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from random import Random

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import evaluate, rename, var, xor
from settled.models.states import pack
from settled.verify.limits import Limits
from settled.verify.matching.lockstep import CHANGES, Lockstep, Runs, Words
from settled.verify.never import Never
from settled.verify.settled_states import Settled
from settled.verify.stable_states import start_conditions

LANES = 64
VECTORS = 32


@dataclass(frozen=True)
class Partner:
    """A node of the other circuit; `inverse`: its value is the inverse."""

    node: str
    inverse: bool


Guesses = dict[str, list[Partner]]
Sides = tuple[Settled, Settled]
Rules = tuple[Environment, Environment]


class Different(Exception):
    """The circuits are not equivalent, as far as simulation can tell."""


@dataclass
class Seen:
    """Stable states of both sides, after one input change and the next, a run in each bit of the words.

    `good`: the runs that count.
    """

    width: int
    moments: list[tuple[Words, Words]] = field(default_factory=list)
    good: int = 0

    def bits(self, side: int, node: str) -> int:
        """All that was seen of a node, in one word."""
        found = 0
        for moment in self.moments:
            found = found << self.width | moment[side][node] & self.good
        return found

    @property
    def mask(self) -> int:
        """The bits of such a word that count."""
        found = 0
        for _ in self.moments:
            found = found << self.width | self.good
        return found

    def partners(self, circuits: tuple[Circuit, Circuit]) -> Guesses:
        """For each node of the original the nodes of the other circuit that may correspond to it, like-named first."""
        alike: dict[int, list[Partner]] = {}
        mask = self.mask
        for node in circuits[1].nodes:
            bits = self.bits(1, node)
            alike.setdefault(bits, []).append(Partner(node, False))
            alike.setdefault(bits ^ mask, []).append(Partner(node, True))
        return {n: sorted(alike.get(self.bits(0, n), []), key=lambda p: p.node != n) for n in circuits[0].nodes}


def watch(sides: Sides, rules: Rules, outputs: Sequence[str], limits: Limits, strict: bool = True) -> Seen:
    """Drive both sides from pairs of states that go together.

    These are start states where each has only one partner; else states in which all random states have ended under
    some inputs; else any start states, and runs count from a time when they may have become alike. Runs in which the
    outputs then differ do not count. `rules`: the environment of each side. Raises `Different` when no start state has
    a partner, and, if `strict`, when runs from only partners come to differ.
    """
    pairs = start_pairs(sides, rules, outputs, limits)
    if not pairs:
        raise Different("no start state has a partner")
    sure = only_partners(sides[1].circuit, rules[1], limits)
    forced = [] if sure else forced_pairs(sides, rules[0], limits)
    lockstep, apart = Lockstep(sides, rules[0], forced or pairs, outputs), 0
    seen = Seen(LANES)
    for number in lockstep.run(limits):
        if not sure and not forced and number < CHANGES // 2:
            continue
        apart |= lockstep.apart() & lockstep.alive
        if sure and apart and strict:
            raise Different(f"the outputs differ after {number + 1} random input changes")
        seen.moments.append((dict(lockstep.sides[0].now), dict(lockstep.sides[1].now)))
        seen.good = lockstep.alive & ~apart
    return seen


def start_pairs(sides: Sides, rules: Rules, outputs: Sequence[str], limits: Limits) -> list[tuple[int, int]]:
    """Start states of the original chosen at random, each with a start state of the other circuit, if it has one.

    A partner with the same outputs is taken where there is one.
    """
    rng = Random(1)
    circuits = [side.circuit for side in sides]
    lefts, rights = (Never(c.resolve(*start_conditions(c, e)), limits) for c, e in zip(circuits, rules, strict=True))
    shown = [c.resolve(*map(c.signal, outputs)) for c in circuits]
    found: list[tuple[int, int]] = []
    for _ in range(LANES):
        for side, c in zip((lefts, rights), circuits, strict=True):
            side.prefer({s: rng.getrandbits(1) for s in c.signals})
        if not lefts.solve([]):
            break
        left = lefts.model(circuits[0].signals)
        inputs = [rights.literal(var(x), left[x]) for x in circuits[0].inputs]
        values = evaluate(shown[0], left)
        same = [rights.literal(e, v) for e, v in zip(shown[1], values, strict=True)]
        if rights.solve([*inputs, *same]) or rights.solve(inputs):
            found.append((pack(circuits[0], left), pack(circuits[1], rights.model(circuits[1].signals))))
    return found


def forced_pairs(sides: Sides, environment: Environment, limits: Limits) -> list[tuple[int, int]]:
    """Pairs of states in which both sides have ended from all of many random states under the same inputs."""
    rng = Random(2)
    vectors = Never(sides[0].circuit.resolve(*environment.assume), limits)
    found = []
    for _ in range(VECTORS):
        vectors.prefer({x: rng.getrandbits(1) for x in sides[0].circuit.inputs})
        vectors.solve([])
        inputs = vectors.model(sides[0].circuit.inputs)
        ends = [only_end(side, inputs, rng) for side in sides]
        if ends[0] is not None and ends[1] is not None:
            found.append((ends[0], ends[1]))
    return [rng.choice(found) for _ in range(LANES)] if found else []


def only_end(side: Settled, inputs: Mapping[str, int], rng: Random) -> int | None:
    """The one state in which runs from many random states end, if it is one."""
    circuit = side.circuit
    vector = pack(circuit, {**dict.fromkeys(circuit.nodes, 0), **inputs})
    states = [vector | rng.getrandbits(len(circuit.nodes)) << len(circuit.inputs) for _ in range(LANES)]
    runs = Runs(side, states)
    if runs.change({}) != runs.one or any(runs.now[n] not in (0, runs.one) for n in circuit.nodes):
        return None
    return pack(circuit, {s: word & 1 for s, word in runs.now.items()})


def only_partners(circuit: Circuit, environment: Environment, limits: Limits) -> bool:
    """Whether no two start states of a circuit have the same inputs."""
    begin = circuit.resolve(*start_conditions(circuit, environment))
    again = rename(begin, {n: var(f"{n} again") for n in circuit.nodes})
    return Never([*begin, *again], limits)([xor(var(n), var(f"{n} again")) for n in circuit.nodes])
