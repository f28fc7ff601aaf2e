"""Whether runs that are shown, in the shape of the result document, really are lawful and really refute a check.

`unlawful` and `offending` return None when all is well, and else a sentence that says what is wrong.
"""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from itertools import pairwise
from typing import Any

from oracle import Options, hazard_kind, power_up
from oracle_world import Situation, State, World, components, reach, world_of

from settled.models.circuit import Circuit
from settled.models.environment import Environment

Trace = Mapping[str, Any]


class Complaint(Exception):
    """What is wrong with a refutation."""


def demand(condition: object, text: str) -> None:
    """Complain unless the condition holds."""
    if not condition:
        raise Complaint(text)


def complaint(judge: Callable[[], None]) -> str | None:
    """The complaint that `judge` raises, if any."""
    try:
        judge()
    except Complaint as found:
        return str(found)
    return None


def unlawful(
    circuit: Circuit, environment: Environment, states: Sequence[Mapping[str, int]], loop: int | None = None
) -> str | None:
    """Why these states (values by name; defined signals may be among them) are no run from a start state, if so."""
    world = world_of(circuit, environment)
    return complaint(lambda: Run(world, [packed(world, s) for s in states], loop).begin_at_start())


def offending(
    circuit: Circuit,
    environment: Environment,
    check: str,
    options: Options,
    traces: Sequence[Trace],
    facts: Mapping[str, Any] | None = None,
) -> str | None:
    """Why these traces do not refute the check, if so. `facts`: with a `hazard`, its signal, class and kind."""
    world = world_of(circuit, environment)

    def judge() -> None:
        runs = [read(world, trace) for trace in traces]
        JUDGES[check](world, options, runs, facts or {})

    return complaint(judge)


# ---- reading ---------------------------------------------------------------------------------------------------------


def packed(world: World, values: Mapping[str, int]) -> State:
    """The total state with these values; all defined signals given must agree with it."""
    circuit = world.circuit
    demand(all(s in values for s in circuit.inputs + circuit.nodes), "a state leaves an input or node out")
    demand(all(type(v) is int and v in (0, 1) for v in values.values()), "a value is neither 0 nor 1")
    state = frozenset(s for s in circuit.inputs + circuit.nodes if values[s])
    for name, v in values.items():
        demand(world.signal(name, state) == bool(v), f"`{name}` has another value in this state")
    return state


def trace(
    circuit: Circuit, states: Sequence[State], loop: int | None = None, title: str = "one ordering"
) -> dict[str, Any]:
    """A trace in the shape of the result document, for runs worked by hand."""
    world = World(circuit, Environment())
    names = dict.fromkeys(circuit.inputs + circuit.nodes + circuit.outputs)
    steps = []
    for before, state in pairwise([states[0], *states]):
        steps.append(
            {
                "state": {s: int(world.signal(s, state)) for s in names},
                "excited": [n for n in circuit.nodes if n in world.excited(state)],
                "switched": [s for s in circuit.inputs + circuit.nodes if s in before ^ state],
                "stable": world.stable(state),
            }
        )
    return {"title": title, "circuit": circuit.name, "steps": steps, "loop": loop}


def read(world: World, given: Trace) -> Run:
    """The run of a trace, once everything that the trace says of its states has been found true."""
    demand(given["circuit"] == world.circuit.name, "the trace is of another circuit")
    demand(given["steps"], "the trace is empty")
    states = [packed(world, step["state"]) for step in given["steps"]]
    for step, before, state in zip(given["steps"], [states[0], *states], states, strict=False):
        demand(all(s in step["state"] for s in world.circuit.outputs), "a state leaves an output out")
        demand(sorted(step["excited"]) == sorted(world.excited(state)), "`excited` is wrong")
        demand(sorted(step["switched"]) == sorted(before ^ state), "`switched` is wrong")
        demand(step["stable"] is world.stable(state), "`stable` is wrong")
    return Run(world, states, given["loop"])


class Run:
    """A sequence of total states, perhaps with a loop, and the situations that each can be in."""

    def __init__(self, world: World, states: list[State], loop: int | None = None) -> None:
        demand(loop is None or 0 <= loop < len(states), "the loop begins at no step")
        self.world, self.states, self.loop = world, states, loop
        self.last = states[-1]

    def begin_at_start(self) -> None:
        """Demand a run of the circuit in its environment that begins in a start state."""
        demand(self.states[0] in self.world.starts(), "the run does not begin in a start state")
        self.where = self.follow({Situation(self.states[0])}, self.states[1:], self.world.moves)
        if self.loop is not None:
            demand(self.rounds(), "no lawful move closes the loop")

    @staticmethod
    def follow(
        now: set[Situation], states: Iterable[State], moves: Callable[[Situation], Iterable[Situation]]
    ) -> list[set[Situation]]:
        """The situations that each state of a run can be in."""
        seen = [now]
        for i, state in enumerate(states, 1):
            now = {after for at in now for after in moves(at) if after.state == state}
            demand(now, f"no lawful move leads to step {i}")
            seen.append(now)
        return seen

    def rounds(self) -> list[set[tuple[int, Situation]]]:
        """The ways to go round the loop for ever: strongly connected sets of steps with their situations."""
        assert self.loop is not None
        first, length = self.loop, len(self.states)

        def after(at: tuple[int, Situation]) -> list[tuple[int, Situation]]:
            step = at[0] + 1 if at[0] + 1 < length else first
            return [(step, s) for s in self.world.moves(at[1]) if s.state == self.states[step]]

        graph = reach([(first, s) for s in self.where[first]], after)
        return components(graph, after)

    def straight(self) -> None:
        """Demand a run from a start state without a loop."""
        demand(self.loop is None, "the run has a loop")
        self.begin_at_start()

    def held_loop(self) -> None:
        """Demand a fair loop with the inputs held."""
        demand(self.loop is not None, "the run has no loop")
        circle = self.states[self.loop :]
        for state, after in pairwise([*circle, circle[0]]):
            demand(after in self.world.held(state), "a step of the loop is no step of the circuit with its inputs held")
        demand(self.world.goes_round(circle, self.world.excited), "the loop is not fair")

    def resting_at(self, k: int) -> bool:
        """Whether the environment may begin a change at step `k`."""
        return self.world.ended(Situation(self.states[k])) and Situation(self.states[k]) in self.where[k]

    def response_from(self, k: int, end: int | None = None) -> set[tuple[frozenset[str], Situation]]:
        """The changes whose response the run shows from step `k` up to `end`, with the situation there."""
        world, start = self.world, self.states[k]
        shown = self.states[k + 1 : end]
        now = {
            (change, world.begin(start, schedule))
            for change, schedules in world.changes(start).items()
            for schedule in schedules
        }
        now = {(change, at) for change, at in now if shown[:1] == [at.state]}
        for state in shown[1:]:
            now = {(change, after) for change, at in now for after in world.respond(at) if after.state == state}
        return now


# ---- judges ----------------------------------------------------------------------------------------------------------

Facts = Mapping[str, Any]


def only(runs: Sequence[Run]) -> Run:
    """The one run that there must be."""
    demand(len(runs) == 1, "one run was expected")
    return runs[0]


def forks(runs: Sequence[Run]) -> Iterator[tuple[int, Run, Run]]:
    """The steps at which two runs with a common beginning rest and may go on differently."""
    demand(len(runs) == 2, "two runs were expected")
    one, two = runs
    one.straight()
    two.straight()
    for k, (a, b) in enumerate(zip(one.states, two.states, strict=False)):
        if a != b:
            return
        if one.resting_at(k):
            yield k, one, two


def stable_states(world: World, options: Options, runs: Sequence[Run], _facts: Facts) -> None:
    vectors = {world.inputs(s) for run in runs for s in run.states}
    demand(len(vectors) == 1, "the runs do not show one input vector")
    (vector,) = vectors
    count = sum(map(world.stable, world.completions(vector)))
    most = options.get("at-most")
    demand(world.admits(vector), "the input vector violates `assume`")
    demand(count < options.get("at-least", 1) or (most is not None and count > most), "the bounds are kept")
    for run in runs:
        for state, after in pairwise(run.states):
            demand(after in world.held(state), "a step is no step of the circuit")
    if count == 0:
        only(runs).held_loop()


def settles(_world: World, _options: Options, runs: Sequence[Run], _facts: Facts) -> None:
    run = only(runs)
    run.begin_at_start()
    run.held_loop()


def race_free(world: World, _options: Options, runs: Sequence[Run], _facts: Facts) -> None:
    for k, one, two in forks(runs):
        demand(one.last != two.last, "both runs end in the same state")
        changes = [{change for change, at in run.response_from(k) if world.ended(at)} for run in (one, two)]
        if changes[0] & changes[1]:
            return
    raise Complaint("the runs are not two complete responses to one change from one state")


def hazard_free(world: World, options: Options, runs: Sequence[Run], facts: Facts) -> None:
    run = only(runs)
    run.straight()
    watched = options.get("signals", world.circuit.outputs)
    if "hazard" in facts:
        demand(facts["hazard"]["signal"] in watched, "the signal is not watched")
        watched = [facts["hazard"]["signal"]]
    responses = [(k, change) for k in range(len(run.states)) if run.resting_at(k) for change, _ in run.response_from(k)]
    shown = [(name, k, change) for k, change in responses for name in watched if second_change(run, name, k)]
    demand(shown, "no watched signal changes twice in one response")
    if "hazard" in facts:
        said = facts["hazard"]["class"], facts["hazard"]["kind"]
        demand(any(said == labels(run, *one) for one in shown), "class or kind of the hazard is wrong")


def second_change(run: Run, name: str, k: int) -> int | None:
    """The step at which a signal changes for the second time, counted from step `k`."""
    values = [run.world.signal(name, s) for s in run.states]
    changed = [i for i in range(k + 1, len(values)) if values[i] != values[i - 1]]
    return changed[1] if len(changed) > 1 else None


def labels(run: Run, name: str, k: int, change: frozenset[str]) -> tuple[str | None, str | None]:
    """Class and kind of the hazard that a run shows in the response to `change` from step `k` on."""
    world, start = run.world, run.states[k]
    kind = hazard_kind(world, start, change, name)
    if (change, Situation(run.last)) in run.response_from(k) and world.stable(run.last):
        before = world.signal(name, start)
        return (f"static-{before:d}" if world.signal(name, run.last) == before else "dynamic"), kind
    offending_step = second_change(run, name, k)
    assert offending_step is not None
    after = [at for c, at in run.response_from(k, offending_step + 1) if c == change]
    endless = any(not any(map(world.ended, reach([at], world.respond))) for at in after)
    return (None if endless else "unfinished"), kind


def essential_hazard_free(world: World, _options: Options, runs: Sequence[Run], _facts: Facts) -> None:
    for k, one, two in forks(runs):
        rows = [run.last - world.inputs(run.last) for run in runs]
        demand(rows[0] != rows[1], "both runs end in the same internal state")
        if toggled(one, k) & toggled(two, k):
            return
    raise Complaint("the runs are not one or three changes of one input from one state")


def toggled(run: Run, k: int) -> set[str]:
    """The input that changes once or three times from step `k` on, with settling between and at the end."""
    world, states = run.world, run.states
    moves = [(i, world.inputs(a ^ b)) for i, (a, b) in enumerate(pairwise(states)) if i >= k and world.inputs(a ^ b)]
    names = {x for _, moved in moves for x in moved}
    settled = all(world.stable(states[i]) for i, _ in moves) and world.stable(run.last)
    return names if settled and len(names) == 1 and len(moves) in (1, 3) and moves[0][0] == k else set()


def invariant(world: World, options: Options, runs: Sequence[Run], wanted: bool) -> None:
    run = only(runs)
    run.straight()
    demand(world.value(options["expr"], run.last) != wanted, "the last state keeps the property")
    demand(options.get("when", "always") == "always" or world.stable(run.last), "the last state is not stable")


def deadlock_free(world: World, _options: Options, runs: Sequence[Run], _facts: Facts) -> None:
    run = only(runs)
    run.straight()
    demand(not all(map(world.moves, run.where[-1])), "the last state is no dead end")


def speed_independent(world: World, options: Options, runs: Sequence[Run], _facts: Facts) -> None:
    run = only(runs)
    run.straight()
    demand(len(run.states) > 1, "nothing switches")
    before = run.states[-2]
    lost = world.excited(before) - (before ^ run.last) - world.excited(run.last) - set(options.get("except", ()))
    demand(lost, "no node loses its excitation in the last step")


def leads_to(world: World, options: Options, runs: Sequence[Run], _facts: Facts) -> None:
    run = only(runs)
    run.begin_at_start()
    concerned = [i for i, s in enumerate(run.states) if world.value(options["from"], s)]
    demand(concerned, "`from` is never true")
    since = concerned[-1] if run.loop is None else min(concerned[-1], run.loop)
    demand(not any(world.value(options["to"], s) for s in run.states[since:]), "`to` is true afterwards")
    if run.loop is None:
        resting = any(not at.waiting for at in run.where[-1])
        demand(resting and not world.pressing(run.last), "a run may not end in the last state")
        return
    demand(world.goes_round(run.states[run.loop :], world.pressing), "the loop is not fair")
    demand(any(not at.waiting for way in run.rounds() for _, at in way), "the loop never finishes its burst")


# ---- power-up --------------------------------------------------------------------------------------------------------


def initialises(world: World, options: Options, runs: Sequence[Run], _facts: Facts) -> None:
    sequence = power_up(world, options)
    if len(runs) == 1:
        places(runs[0], sequence)
        runs[0].held_loop()
        return
    demand(len(runs) == 2, "two runs or one oscillation were expected")
    for run in runs:
        demand(run.loop is None and world.stable(run.last), "a run does not end in a stable state")
        demand(len(sequence) - 1 in places(run, sequence), "a run ends before the whole sequence has been applied")
    demand(runs[0].last != runs[1].last, "both runs end in the same state")


def places(run: Run, sequence: Sequence[State]) -> set[int]:
    """How many vectors of the sequence, less one, can have been applied when the run ends.

    The run begins in any internal state with the first vector applied, or just before that.
    """
    world = run.world

    def after(at: tuple[State, int]) -> Iterator[tuple[State, int]]:
        state, done = at
        yield from ((s, done) for s in world.held(state) if done >= 0)
        if done + 1 < len(sequence) and (done < 0 or world.stable(state)):
            yield state - world.inputs(state) | sequence[done + 1], done + 1

    def with_idle(found: set[tuple[State, int]]) -> set[tuple[State, int]]:
        return reach(found, lambda at: (s for s in after(at) if s[0] == at[0]))

    now = with_idle({(run.states[0], -1)})
    for i, state in enumerate(run.states[1:], 1):
        now = with_idle({s for at in now for s in after(at) if s[0] == state})
        demand(now, f"no lawful move leads to step {i}")
    return {done for _, done in now}


JUDGES: dict[str, Callable[[World, Options, Sequence[Run], Facts], None]] = {
    "stable-states": stable_states,
    "settles": settles,
    "race-free": race_free,
    "hazard-free": hazard_free,
    "essential-hazard-free": essential_hazard_free,
    "always": lambda world, options, runs, _facts: invariant(world, options, runs, True),
    "never": lambda world, options, runs, _facts: invariant(world, options, runs, False),
    "deadlock-free": deadlock_free,
    "speed-independent": speed_independent,
    "leads-to": leads_to,
    "initialises": initialises,
}
