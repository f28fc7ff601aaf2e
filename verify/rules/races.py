"""Races: whether the response to a change has more than one end."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace

from settled.encodings.system import outstanding, waiting_inputs
from settled.encodings.twins import PARTED, twin, twins
from settled.models.states import Behaviour, Run, Situation, members
from settled.verify.questions import Diverges, Oscillates, Question
from settled.verify.rules import Established, Failure, Outcome, Rule, rings, settling
from settled.verify.symbolic.certificates import Proof
from settled.verify.symbolic.reach import Reacher, Trail, without_repeats

SITUATIONS = 20_000


def no_disabling_ring(reacher: Reacher, _: Diverges) -> Outcome:
    """If no reachable total state has a disabling ring, and every run settles, each change has one end.

    Why it holds: without rings the members of a set that may switch at once may also switch one after the other, so
    single switches decide. Two excited nodes i, j of a state then join again: by switching the other, or, when j
    disables i, because i after j goes back. By induction along the strongly connected parts of what a response can
    reach, all exits of a part have the same end: either the part is a single state, or, since runs settle, some node
    is excited in all of its states and leaves it from each, and neighbouring exits join (compare Newman 1942).
    The case that `assume` lets an arrival prevent another is left out.
    """
    waiting = waiting_inputs(reacher.circuit, reacher.environment)
    if waiting and reacher.environment.assume:
        return None
    found = rings.search(reacher)
    if isinstance(found, Trail):
        return None
    settled = settles(reacher)
    if settled is None:
        return None
    rule = f"No disabling ring is reachable, and every run settles, so each change has one end. {settled.rule}"
    return Established(rule, (found, *settled.proofs))


def settles(reacher: Reacher) -> Established | None:
    """The first rule that shows that every run settles."""
    for rule in settling.RULES[Oscillates]:
        found = rule(reacher, Oscillates())
        if isinstance(found, Established):
            return found
        if found is not None:
            return None
    return None


def two_ends_after_a_ring(reacher: Reacher, _: Diverges) -> Outcome:
    """Where a ring can be reached the response often has two ends; they are looked for step by step from there."""
    found = rings.search(reacher)
    if isinstance(found, Proof):
        return None
    trail = reacher.shortest(found)
    last, packed = trail.states[-1], trail.run("").states
    left = sum(1 << i for i, x in enumerate(reacher.circuit.inputs) if last.get(outstanding(x)))
    forks = two_ends(reacher, Situation(packed[-1], left))
    if forks is None:
        return None
    name = reacher.circuit.name
    titles = ("one ordering", "another ordering")
    runs = (Run(title, (*packed, *rest), None, name) for title, rest in zip(titles, forks, strict=True))
    return Failure(tuple(runs))


def two_ends(reacher: Reacher, begin: Situation) -> tuple[list[int], list[int]] | None:
    """Two runs of the response from a situation that end in different stable states, as the states after it."""
    behaviour = Behaviour(reacher.circuit, reacher.environment)
    before: dict[Situation, Situation | None] = {begin: None}
    ends: list[Situation] = []
    for at in (queue := [begin]):
        reacher.progress.tick()
        if not at.outstanding and behaviour.is_stable(at.state):
            ends.append(at)
            if len(ends) == 2:
                return _back(before, ends[0]), _back(before, ends[1])
        if len(queue) < SITUATIONS:
            for then in _one_by_one(behaviour, at):
                if then not in before:
                    before[then] = at
                    queue.append(then)
    return None


def _one_by_one(behaviour: Behaviour, at: Situation) -> Iterator[Situation]:
    for bit in members(behaviour.excited(at.state)):
        yield Situation(at.state ^ bit, at.outstanding)
    for bit, rest in behaviour.arrivals(at):
        yield Situation(at.state ^ bit, rest)


def _back(before: Mapping[Situation, Situation | None], end: Situation) -> list[int]:
    path = []
    at: Situation | None = end
    while at is not None:
        path.append(at.state)
        at = before[at]
    return path[-2::-1]


def two_runs(reacher: Reacher, _: Diverges) -> Outcome:
    """Exact: two runs that part in a stable state and end in different ones, searched side by side."""
    made, apart = twins(reacher.circuit, reacher.environment)
    found = reacher.reach(made, apart, "no two runs that part in a stable state end in different ones")
    if isinstance(found, Proof):
        return Established(
            "Two runs side by side that part at a change never end in different stable states.", (found,)
        )
    return _failure(reacher, reacher.shortest(found))


def _failure(reacher: Reacher, trail: Trail) -> Failure:
    first = trail.run("one ordering")
    names: Mapping[str, str] = {v: twin(v) for v in reacher.circuit.signals if twin(v) in trail.states[0]}
    parted = next(i for i, s in enumerate(trail.states) if s[PARTED])
    common = replace(trail, states=trail.states[:parted]).run("").states
    own = replace(trail, states=trail.states[parted:]).run("another ordering", names)
    second = replace(own, states=without_repeats([*common, *own.states]))
    return Failure((first, second))


RULES: dict[type[Question], list[Rule]] = {Diverges: [no_disabling_ring, two_ends_after_a_ring, two_runs]}
