"""Answers to questions about one task, read off its reached set. One function a kind of question."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from dataclasses import replace
from functools import cached_property, reduce
from typing import Any

from settled.encodings.dead_ends import dead_end
from settled.encodings.system import outstanding
from settled.models.logic import Expr, and_, not_, var
from settled.models.states import Run
from settled.verify.diagrams.certificate import confirmed
from settled.verify.diagrams.closure import Closure
from settled.verify.diagrams.fairness import Core, conditions, endless, hull
from settled.verify.diagrams.manager import Set, out_of_memory
from settled.verify.diagrams.moves import Moves, Plain
from settled.verify.diagrams.world import World
from settled.verify.questions import (
    Answer,
    Deadlocks,
    Diverges,
    Evades,
    Flickers,
    Oscillates,
    Question,
    Reaches,
    Task,
    Withdraws,
)

NAME = "decision diagrams, re-checked by z3"
CONFLUENT = "In responses from the reached set no excitation is withdrawn, and all are finite: each has one end."


class Reading:
    """One task: its world and what is reachable in it."""

    def __init__(self, task: Task) -> None:
        self.world = World(task.circuit, task.environment, task.limits)
        self.d = self.world.diagrams

    def reach(self, until: Set | None = None) -> Closure:
        """What is reachable, at least as far as a state of `until`."""
        return Closure(self.d, self.world.moves, self.world.start, until=until)

    @cached_property
    def all(self) -> Closure:
        """All that is reachable."""
        return self.reach()

    @cached_property
    def exercised(self) -> bool:
        """Whether the environment can begin a change in a reachable state."""
        return self.some(self.all.reached & self.world.may_change)

    def some(self, f: Set) -> bool:
        """Whether a set has a state."""
        return bool(f != self.d.false)

    def of(self, e: Any) -> Set:
        """The set of an expression of a property."""
        return self.d.of(self.world.circuit.resolve(e)[0])

    def before(self, moves: Iterable[Plain], f: Set) -> Set:
        """The states of which one of the moves makes a state of `f`."""
        return self.d.union(move.preimage(f) for move in moves)

    def after(self, moves: Iterable[Plain], f: Set) -> Set:
        """What the moves make of `f`."""
        return self.d.union(move.image(f) for move in moves)

    def run(self, title: str, states: Sequence[int], loop: int | None = None) -> Run:
        """The run through packed states; where only something outstanding differs, a state counts once."""
        mask = (1 << len(self.world.circuit.signals)) - 1
        words: list[int] = []
        start = None
        for i, state in enumerate(states):
            if not words or words[-1] != state & mask:
                words.append(state & mask)
            if i == loop:
                start = len(words) - 1
        if start is not None and words[-1] == words[start] and len(words) - 1 > start:
            words.pop()
        return Run(title, tuple(words), start, self.world.circuit.name)

    def proved(self, rule: str, exercised: bool, bad: Expr | None = None) -> Answer:
        """The answer when nothing wrong was found. Its certificate is the reached set, which excludes `bad`; `rule`:
        how that leads to the verdict."""
        reached = self.all.reached
        scripts = confirmed(self.world, reached, bad)
        states = self.d.count(reached, self.d.variables)
        certificate = {"kind": "reached set", "rule": rule, "nodes": len(reached), "states": states}
        ranged = self._ranged()
        return Answer("proved", NAME, ranged=ranged, exercised=exercised, certificate=certificate, scripts=scripts)

    def refuted(self, *runs: Run, facts: Mapping[str, Any] | None = None) -> Answer:
        """The answer when something wrong was found."""
        return Answer("refuted", NAME, runs=runs, facts=facts or {})

    def _ranged(self) -> dict[str, int]:
        signals = self.world.circuit.signals
        states = self.d.without(self.all.reached, set(self.d.variables) - set(signals))
        stable = states & self.world.stable
        return {"total_states": self.d.count(states, signals), "stable_states": self.d.count(stable, signals)}


def reaches(reading: Reading, question: Reaches) -> Answer:
    """Look for a reachable state with `bad` true."""
    circuit = reading.world.circuit
    (bad,) = circuit.resolve(question.bad)
    found = _path_to(reading, and_(bad, circuit.is_stable) if question.only_stable else bad)
    if found.verdict == "proved" and question.only_stable:
        return replace(found, exercised=reading.some(reading.all.reached & reading.world.stable))
    return found


def deadlocks(reading: Reading, _: Deadlocks) -> Answer:
    """Look for a dead end."""
    world = reading.world
    quiet = [not_(var(outstanding(x))) for x in world.waiting]
    return _path_to(reading, and_(dead_end(world.circuit, world.environment), *quiet))


def _path_to(reading: Reading, bad: Expr) -> Answer:
    wanted = reading.d.of(bad)
    closure = reading.reach(until=wanted)
    if reading.some(closure.hit):
        return reading.refuted(reading.run("the run to it", closure.path(closure.earliest(wanted))))
    reading.all = closure
    return reading.proved("The reached set has no such state.", True, bad)


def withdrawals(reading: Reading, nodes: Iterable[str], region: Set) -> Iterator[tuple[str, Set]]:
    """Nodes of which a move takes the excitation away, and the states of `region` in which one does."""
    for node in nodes:
        excited = reading.world.excited[node]
        bad = reading.before(reading.world.disturbing(node), ~excited) & excited & region
        if reading.some(bad):
            yield node, bad


def withdraws(reading: Reading, question: Withdraws) -> Answer:
    """Look for a step that takes away an excitation, node by node."""
    world = reading.world
    counted = [n for n in world.circuit.nodes if n not in question.excepted]
    for node, bad in withdrawals(reading, counted, reading.all.reached):
        state = reading.all.earliest(bad)
        after = reading.after(world.disturbing(node), reading.d.point(state)) & ~world.excited[node]
        then = reading.d.nearest(after, state)
        return reading.refuted(reading.run("the run to it", [*reading.all.path(state), then]))
    return reading.proved("No move from a state of the reached set takes away an excitation.", True)


def serial(reading: Reading, region: Set) -> bool:
    """Whether no move from a state of `region`, which steps of the nodes do not leave, takes an excitation away.

    A step of several nodes is then one of single switches one after the other, all in `region`.
    """
    return next(withdrawals(reading, reading.world.circuit.nodes, region), None) is None


def oscillates(reading: Reading, _: Oscillates) -> Answer:
    """Look for a fair run of the nodes alone that does not end; first for one in which they switch one by one."""
    world, reached = reading.world, reading.all.reached
    found = _goes_round(reading, world.held.serial)
    if found is None and world.held.joint and not serial(reading, reached):
        found = _goes_round(reading, world.held)
    if found is None:
        exercised = reading.exercised or reading.some(reached & ~world.stable)
        return reading.proved("No part of the reached set keeps a fair run with the inputs held.", exercised)
    settling = Closure(reading.d, world.held, reached & world.stable, backwards=True, within=reached).reached
    return reading.refuted(found, facts={"some_run_settles": not reading.some(reached & ~settling)})


def _goes_round(reading: Reading, moves: Moves) -> Run | None:
    """A run into a sustained oscillation and once round it, made of `moves`."""
    world, d = reading.world, reading.d
    met = conditions(d, list(world.excited.items()))
    inside = hull(d, moves, endless(d, moves, reading.all.reached & ~world.stable), met)
    if not reading.some(inside):
        return None
    core = Core(d, moves, inside, met)
    entry = reading.all.earliest(core.states)
    before = reading.all.path(entry)
    return reading.run("once round the oscillation", [*before[:-1], *core.cycle(entry)], len(before) - 1)


def diverges(reading: Reading, _: Diverges) -> Answer:
    """Look, node by node, for a change after which it can end with either value; first by single switches."""
    world = reading.world
    changed = reading.after(world.changes.all, reading.all.reached)
    region = Closure(reading.d, world.response, changed).reached
    if confluent(reading, region):
        return reading.proved(CONFLUENT, reading.exercised)
    found = _parts(reading, changed, region, world.response.serial)
    if found is None and world.response.joint:
        found = _parts(reading, changed, region, world.response)
    rule = "After no change from a stable state of the reached set can a node end with either value."
    return reading.refuted(*found) if found else reading.proved(rule, reading.exercised)


def _parts(reading: Reading, changed: Set, region: Set, moves: Moves) -> tuple[Run, Run] | None:
    """Two runs from one change, the last of whose responses are made of `moves` and end apart."""
    world, d = reading.world, reading.d
    ends = region & world.rest
    for node in world.circuit.nodes:
        high = Closure(d, moves, ends & d.manager.var(node), backwards=True, within=region)
        wanted = changed & high.reached
        low = Closure(d, moves, ends & ~d.manager.var(node), backwards=True, within=region, until=wanted)
        if reading.some(low.hit):
            state, begun = _change(reading, low.hit)
            common = reading.all.path(state)
            one, other = ([*common, *closure.path(begun)] for closure in (high, low))
            return reading.run("one ordering", one), reading.run("another ordering", other)
    return None


def confluent(reading: Reading, region: Set) -> bool:
    """Whether each response in `region` has one end, because it is finite and no excitation is withdrawn in it.

    Two moves of a state then lead on to a common state, by way of each other, and steps of several nodes are single
    switches one after the other; so all runs from a state end alike (Newman 1942, recalled). The case that `assume`
    lets an arrival prevent another is left out.
    """
    world = reading.world
    if (world.waiting and world.environment.assume) or not serial(reading, region):
        return False
    return not reading.some(endless(reading.d, world.held.serial, region & ~world.stable))


def _change(reading: Reading, begun: Set) -> tuple[int, int]:
    """An early stable state and what a change makes of it, which is in `begun`."""
    changes = reading.world.changes.all
    state = reading.all.earliest(reading.before(changes, begun) & reading.all.reached)
    return state, reading.d.nearest(reading.after(changes, reading.d.point(state)) & begun, state)


def flickers(reading: Reading, question: Flickers) -> Answer:
    """Look, signal by signal and old value by old value, for a step of a response that brings the old value back."""
    for signal in question.signals:
        one = reading.of(reading.world.circuit.signal(signal))
        for old in (one, ~one):
            found = _flicker(reading, signal, old)
            if found is not None:
                return found
    rule = "In no response from the reached set does a signal that has changed come back to its value before it."
    return reading.proved(rule, reading.exercised)


def _flicker(reading: Reading, signal: str, old: Set) -> Answer | None:
    """A response to a change from a state in `old` that leaves `old` and comes back."""
    world, d = reading.world, reading.d
    steps = world.response.all
    begun = reading.after(world.changes.all, reading.all.reached & old)
    response = Closure(d, world.response, begun)
    bad = response.reached & ~old & reading.before(steps, old)
    if not reading.some(bad):
        return None
    last = response.earliest(bad)
    inner = response.path(last)
    back = d.nearest(reading.after(steps, d.point(last)) & old, last)
    state = reading.all.earliest(reading.before(world.changes.all, d.point(inner[0])) & reading.all.reached & old)
    states = [*reading.all.path(state), *inner, back]
    rest = Closure(d, world.response, d.point(back), until=world.rest)
    settles = reading.some(rest.hit)
    more = rest.path(rest.earliest(world.rest))[1:] if settles else []
    offending = len(reading.run("", states).states) - 1
    facts = {"signal": signal, "offending_step": offending, "settles": settles}
    return reading.refuted(reading.run("the run through the hazard", states + more), facts=facts)


def evades(reading: Reading, question: Evades) -> Answer:
    """Look for a fair run from a state with `source` that ends or goes on for ever without `target`."""
    world, d = reading.world, reading.d
    source, avoiding = reading.of(question.source), ~reading.of(question.target)
    region = Closure(d, world.moves, reading.all.reached & source & avoiding, within=avoiding)
    quiet = reduce(lambda f, presses: f & ~presses[1], world.pressing, region.reached)
    if reading.some(quiet):
        path = _through(reading, region, region.earliest(quiet))
        return reading.refuted(reading.run("the run without the goal", path))
    met = conditions(d, world.pressing)
    inside = hull(d, world.moves, endless(d, world.moves, region.reached), met)
    if not reading.some(inside):
        exercised = reading.some(reading.all.reached & source)
        return reading.proved("No fair run from the reached set evades the goal.", exercised)
    core = Core(d, world.moves, inside, met)
    entry = region.earliest(core.states)
    before = _through(reading, region, entry)
    run = reading.run("the run without the goal", [*before[:-1], *core.cycle(entry)], len(before) - 1)
    return reading.refuted(run)


def _through(reading: Reading, region: Closure, state: int) -> list[int]:
    inner = region.path(state)
    return [*reading.all.path(inner[0])[:-1], *inner]


ANSWERS: dict[type[Question], Callable[[Reading, Any], Answer]] = {
    Reaches: reaches,
    Deadlocks: deadlocks,
    Withdraws: withdraws,
    Oscillates: oscillates,
    Diverges: diverges,
    Flickers: flickers,
    Evades: evades,
}


def _reading(task: Task) -> Reading:
    """What an earlier question about the task has left, under the limits of this one."""
    reading: Reading = task.memory.get("diagrams") or Reading(task)
    task.memory["diagrams"] = reading
    reading.world.limits = reading.d.limits = task.limits
    return reading


def answered(task: Task, question: Question) -> Answer:
    """The answer to a question. Raises `LimitReached`, also when the diagrams have no memory left."""
    try:
        return ANSWERS[type(question)](_reading(task), question)
    except (ValueError, RuntimeError) as error:
        if not out_of_memory(error):
            raise
        most = f"{task.limits.megabytes:,} MB"
        task.limits.refuse(f"memory limit of {most} reached by the decision diagrams; raise it with --memory N")
        raise
