"""Concrete delays under which a run happens: the order of its events as linear arithmetic over times and delays.

A node that is excited from one event to another and then switches has exactly that delay; one whose excitation is
withdrawn, or still there at the end, has a longer one. Events of one step share their time, other steps are at least
one unit apart. The system is a cone, so a solution over the reals scales to whole numbers (z3 solves it).
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from fractions import Fraction
from itertools import pairwise
from math import lcm
from typing import Any

from settled.verify.result import Trace

ROUNDS = 3
"""How often a loop is gone round: once to enter it, then with rounds of one length."""

KINDS = ("gate", "edge", "firing")
"""One delay for each node; one for its rising and one for its falling edge; one for every single firing."""

EFFORT = 3_000_000
"""z3's resource limit for one search for smaller numbers; a count of its steps, so results do not vary."""

Key = tuple[Any, ...]


@dataclass(frozen=True)
class Spell:
    """A node is excited from the event at position `begun` to that at `ended`; `fired`: there it switches itself.

    `number` counts the earlier firings of the same edge.
    """

    node: str
    rises: bool
    begun: int
    ended: int
    fired: bool
    number: int

    def key(self, kind: str) -> Key:
        """Whose delay it is."""
        whole = (self.node, self.rises, self.number)
        return whole[: 1 + KINDS.index(kind)]


@dataclass(frozen=True)
class Schedule:
    """When the steps of a run happen, and with which delays; whole numbers in units that mean nothing by themselves.

    * `kind`: one of `KINDS`, the first under which the run is possible; those before it are proved impossible.
    * `positions`: the step of the trace at each position, loops gone round `ROUNDS` times and closed.
    * `times`: of the event that enters each position; the first is 0, the moment in which the start state is let go.
    * `delays`: by node, node and edge, or node, edge and number of the firing.
    """

    kind: str
    positions: tuple[int, ...]
    times: tuple[int, ...]
    delays: Mapping[Key, int]

    def delay(self, node: str, rises: bool) -> tuple[int, ...]:
        """The delays of one edge of a node, firing by firing, the last for all that follow; 1 where none is needed."""
        found = [v for k, v in sorted(self.delays.items()) if k[0] == node and k[1:2] in ((), (rises,))]
        while len(found) > 1 and found[-1] == found[-2]:
            found.pop()
        return tuple(found) or (1,)


def unroll(trace: Trace, rounds: int) -> tuple[int, ...]:
    """Indices of steps along a run: its loop `rounds` times, then the step that closes it; without one, all steps."""
    indices = tuple(range(len(trace.steps)))
    if trace.loop is None:
        return indices
    return (*indices, *(rounds - 1) * indices[trace.loop :], trace.loop)


def schedule(trace: Trace, nodes: Sequence[str], least: int | None = None) -> Schedule:
    """Times and delays for a run: one delay a node if that is possible, else one an edge, else one a firing.

    `least`: the step up to which the run matters; rather than more delays, only that much of it is kept.
    """
    whole = unroll(trace, ROUNDS)
    parts = [whole] if least is None or trace.loop is not None else [whole, whole[: least + 1]]
    for kind in KINDS:
        for positions in parts:
            found = _solve(trace, positions, list(excitations(trace, positions, nodes)), kind)
            if found is not None:
                return Schedule(kind, positions, *found)
    raise AssertionError("a delay for every firing is always possible")


def excitations(trace: Trace, positions: Sequence[int], nodes: Sequence[str]) -> Iterator[Spell]:
    """The spells of excitation along a run; one that lasts to the end counts as withdrawn there."""
    begun: dict[str, int] = {}
    fired: dict[tuple[str, bool], int] = {}
    last = len(positions) - 1
    for place, (old, new) in enumerate(pairwise([positions[0], *positions])):
        before, step = trace.steps[old], trace.steps[new]
        for node in nodes:
            moved = before.state[node] != step.state[node]
            waiting = node in step.excited
            if node in begun and (moved or not waiting):
                yield _spell(node, before.state[node], begun.pop(node), place, moved, fired)
            if waiting:
                begun.setdefault(node, place)
    for node, place in begun.items():
        yield _spell(node, trace.steps[positions[-1]].state[node], place, last, False, fired)


def _spell(node: str, value: int, begun: int, ended: int, moved: bool, fired: dict[tuple[str, bool], int]) -> Spell:
    edge = node, value == 0
    number = fired.get(edge, 0)
    fired[edge] = number + moved
    return Spell(*edge, begun, ended, moved, number)


@dataclass
class _System:
    """The order of events as z3 constraints over `sort` (`z3.Real` or `z3.Int`), in a given solver."""

    solver: Any
    sort: Any
    times: list[Any] = field(default_factory=list)
    delays: dict[Key, Any] = field(default_factory=dict)

    def pose(self, trace: Trace, positions: Sequence[int], spells: Sequence[Spell], kind: str) -> None:
        """Add everything that is known."""
        keys = sorted({spell.key(kind) for spell in spells})
        self.delays = {key: self.sort(f"d{i}") for i, key in enumerate(keys)}
        self.times = [self.sort(f"t{i}") for i in range(len(positions))]
        add = self.solver.add
        add(self.times[0] == 0, *(after - before >= 1 for before, after in pairwise(self.times)))
        add(*(delay >= 1 for delay in self.delays.values()))
        for spell in spells:
            length, delay = self.times[spell.ended] - self.times[spell.begun], self.delays[spell.key(kind)]
            add(delay == length if spell.fired else delay >= length + 1)
        if trace.loop is not None:
            self._repeat(trace.loop, len(trace.steps) - trace.loop)

    def _repeat(self, begin: int, length: int) -> None:
        """From the second round of the loop on, all rounds take the same time."""
        later = [self.times[i + length] - self.times[i] for i in range(begin + length, len(self.times) - length)]
        self.solver.add(*(a == b for a, b in pairwise(later)))

    def numbers(self) -> tuple[tuple[int, ...], dict[Key, int]]:
        """The times and delays of the model found, scaled to whole numbers."""
        model = self.solver.model()
        values = (model.eval(v, model_completion=True) for v in (*self.times, *self.delays.values()))
        found = [Fraction(value.as_string()) for value in values]
        scale = lcm(*(number.denominator for number in found))
        whole = [int(number * scale) for number in found]
        return tuple(whole[: len(self.times)]), dict(zip(self.delays, whole[len(self.times) :], strict=True))


def _solve(
    trace: Trace, positions: Sequence[int], spells: Sequence[Spell], kind: str
) -> tuple[tuple[int, ...], dict[Key, int]] | None:
    """Times and delays, or None where z3 proves that there are none."""
    import z3

    exact = _System(z3.SolverFor("QF_LRA"), z3.Real)
    exact.pose(trace, positions, spells, kind)
    if exact.solver.check() == z3.unsat:
        return None
    small = _System(z3.Optimize(), z3.Int)
    small.pose(trace, positions, spells, kind)
    small.solver.set("rlimit", EFFORT)
    longest = z3.Int("longest")
    small.solver.add(*(delay <= longest for delay in small.delays.values()))
    for smallest in (longest, z3.Sum(*small.delays.values(), z3.IntVal(0)), small.times[-1]):
        small.solver.minimize(smallest)
    return (small if small.solver.check() == z3.sat else exact).numbers()
