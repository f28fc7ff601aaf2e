"""The naive oracle for `equivalent`: the greatest set of good pairs, by throwing out bad pairs until none is left."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import cache
from math import inf

from oracle import Verdict
from oracle_traces import Run, Trace, complaint, demand, read
from oracle_world import Schedule, Situation, State, Unaskable, World, world_of

from settled.models.circuit import Circuit
from settled.models.environment import Environment

Pair = tuple[State, State]


def equivalent(
    original: Circuit, other: Circuit, environment: Environment, outputs: Sequence[str] | None = None
) -> Verdict:
    """Whether two circuits agree on `outputs` (default: all outputs of the original) under one environment.

    `fewest_changes` in the facts of a refutation: for the start state whose best partner fails first, the number of
    changes of the environment (a burst counts once) up to the difference or the run that does not settle.
    """
    pairing = Pairing(original, other, environment, outputs)
    bad = pairing.bad_pairs()
    best = [max((bad.get(pair, inf) for pair in row), default=0) for row in pairing.rows()]
    failing = [changes for changes in best if changes < inf]
    facts = {"fewest_changes": min(failing)} if failing else {}
    vacuous = not failing and not any(pairing.left.schedules(a) for a, _ in pairing.start_pairs())
    return Verdict("refuted" if failing else "proved", vacuous, facts)


class Pairing:
    """Two circuits side by side. Guards are evaluated on the original, `left`."""

    def __init__(
        self, original: Circuit, other: Circuit, environment: Environment, outputs: Sequence[str] | None = None
    ) -> None:
        if environment.mode != "fundamental":
            raise Unaskable("`equivalent` is a property of fundamental mode")
        if set(original.inputs) != set(other.inputs):
            raise Unaskable("the circuits have different inputs")
        self.outputs = tuple(original.outputs if outputs is None else outputs)
        shared = {x: v for x, v in environment.start.items() if x in (*original.inputs, *self.outputs)}
        self.left = world_of(original, environment)
        self.right = World(other, replace(environment, start=shared, guards={}))
        self.both_must_pair = len(shared) == len(environment.start)
        for world in (self.left, self.right):
            self.agree_on(world)
        self.left_reply, self.right_reply = cache(self._reply(self.left)), cache(self._reply(self.right))

    def agree_on(self, world: World) -> None:
        """Demand that the compared outputs exist."""
        for name in self.outputs:
            world.signal(name, frozenset())

    def same_inputs(self, a: State, b: State) -> bool:
        """Whether two total states have the same input vector."""
        return self.left.inputs(a) == self.right.inputs(b)

    def agree(self, a: State, b: State) -> bool:
        """Whether the compared outputs have the same values."""
        return all(self.left.signal(name, a) == self.right.signal(name, b) for name in self.outputs)

    @staticmethod
    def _reply(world: World) -> Callable[[State, Schedule], set[State] | None]:
        """The ends of the response to a change from a stable state; None when some run does not settle."""

        def reply(state: State, schedule: Schedule) -> set[State] | None:
            response = world.response(state, [schedule])
            if world.oscillations(at.state for at in response if not at.waiting):
                return None
            return {at.state for at in response if world.ended(at)}

        return reply

    def stable_pairs(self) -> set[Pair]:
        """All pairs of stable total states with the same, allowed, inputs."""
        found = set()
        for vector in self.left.vectors():
            rights = [s for s in self.right.completions(vector) if self.right.stable(s)]
            found |= {(a, b) for a in self.left.completions(vector) if self.left.stable(a) for b in rights}
        return found

    def fails(self, a: State, b: State, bad: dict[Pair, int]) -> bool:
        """Whether some change leads to a run that does not settle or to a pair of ends that is bad."""
        for schedule in self.left.schedules(a):
            lefts, rights = self.left_reply(a, schedule), self.right_reply(b, schedule)
            if lefts is None or rights is None or any((p, q) in bad for p in lefts for q in rights):
                return True
        return False

    def bad_pairs(self) -> dict[Pair, int]:
        """Every pair that is not good, with the fewest changes to the difference."""
        pairs = self.stable_pairs()
        bad = {p: 0 for p in pairs if not self.agree(*p)}
        for changes in range(1, len(pairs) + 2):
            more = [p for p in pairs if p not in bad and self.fails(*p, bad)]
            bad |= dict.fromkeys(more, changes)
            if not more:
                break
        return bad

    def start_pairs(self) -> list[Pair]:
        """The pairs of start states with the same inputs."""
        return [(a, b) for a in self.left.starts() for b in self.right_starts() if self.same_inputs(a, b)]

    def right_starts(self) -> set[State]:
        """The start states of the other circuit; there may be none."""
        try:
            return self.right.starts()
        except Unaskable:
            return set()

    def rows(self) -> list[list[Pair]]:
        """For each start state that must find a partner, its pairs."""
        pairs = self.start_pairs()
        found = [[p for p in pairs if p[0] == a] for a in self.left.starts()]
        if self.both_must_pair:
            found += [[p for p in pairs if p[1] == b] for b in self.right_starts()]
        return found


# ---- refutations -----------------------------------------------------------------------------------------------------

History = tuple[Schedule, ...]


def offending_pair(
    original: Circuit,
    other: Circuit,
    environment: Environment,
    outputs: Sequence[str] | None,
    traces: Sequence[Trace],
) -> str | None:
    """Why these traces (the original's first) do not refute the equivalence, if so.

    Two runs in step, from a pair of start states of which one has no good partner, through the same changes to
    different outputs or to a fair loop on either side; or one state that no start state of the other side matches.
    """
    pairing = Pairing(original, other, environment, outputs)

    def judge() -> None:
        demand(1 <= len(traces) <= 2, "one or two runs were expected")
        if len(traces) == 1:
            lonely(pairing, traces[0])
        else:
            apart(pairing, read(pairing.left, traces[0]), read(pairing.right, traces[1]))

    return complaint(judge)


def lonely(pairing: Pairing, given: Trace) -> None:
    """Demand a single start state that must find a partner, and has none with the same inputs."""
    ours = given["circuit"] == pairing.left.circuit.name
    demand(ours or pairing.both_must_pair, "this start state need not find a partner")
    run = read(pairing.left if ours else pairing.right, given)
    run.straight()
    demand(len(run.states) == 1, "a single state was expected")
    demand(all(pair[0 if ours else 1] != run.last for pair in pairing.start_pairs()), "the start state has partners")


def apart(pairing: Pairing, left: Run, right: Run) -> None:
    """Demand two runs through the same changes that show a bad pair of start states."""
    begins = left.states[0], right.states[0]
    bad = pairing.bad_pairs()
    demand(begins in pairing.start_pairs(), "the runs do not begin in a pair of start states")
    rows = [row for row in pairing.rows() if begins in row]
    demand(any(all(pair in bad for pair in row) for row in rows), "both start states have good partners")
    lefts, rights = histories(left), histories(right)
    for run in (left, right):
        if run.loop is not None:
            run.held_loop()
    together = [(a, b) for past, a in lefts for other_past, b in rights if past == other_past]
    demand(together, "the runs do not go through the same changes")
    if left.loop is not None or right.loop is not None:
        looping = [a if left.loop is not None else b for a, b in together]
        demand(any(not at.waiting for at in looping), "the loop never finishes its burst")
        return
    ended = any(pairing.left.ended(a) and pairing.right.ended(b) for a, b in together)
    demand(ended, "the runs do not end in stable states")
    demand(not pairing.agree(left.last, right.last), "the outputs agree")


def histories(run: Run) -> set[tuple[History, Situation]]:
    """The changes that a run can have gone through, with where it then stands."""
    world = run.world
    now: set[tuple[History, Situation]] = {((), Situation(run.states[0]))}
    for i, state in enumerate(run.states[1:], 1):
        steps = {(past, after) for past, at in now for after in world.respond(at)}
        for past, at in now:
            if world.ended(at):
                steps |= {((*past, s), world.begin(at.state, s)) for s in world.schedules(at.state)}
        now = {(past, at) for past, at in steps if at.state == state}
        demand(now, f"no lawful move leads to step {i}")
    return now
