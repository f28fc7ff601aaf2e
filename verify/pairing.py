"""Two circuits side by side under one environment: what the environment is for each, and who needs a partner."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from functools import cache
from itertools import permutations

from settled.models.environment import Environment
from settled.models.states import Behaviour, Situation, choices, members, value
from settled.verify.limits import Limits
from settled.verify.questions import Departs, Differs

Schedule = tuple[int, ...]
"""A change of the environment: the packed sets of inputs that change, one set an instant."""

MOST_ORDERS = 8


def environment_of_other(environment: Environment, question: Differs) -> Environment:
    """What holds for the other circuit alone: guards are the original's affair, and so are most values of `start`."""
    shared = {s: v for s, v in environment.start.items() if s in question.other.inputs or s in question.outputs}
    return replace(environment, start=shared, guards={})


def both_need_partners(environment: Environment, question: Differs) -> bool:
    """Whether each start state of the other circuit must have a partner too: `start` speaks of both circuits alike."""
    return len(environment_of_other(environment, question).start) == len(environment.start)


def environments_with_table(environment: Environment, question: Departs) -> tuple[Environment, Environment]:
    """What holds for a flow table, the original, and for the circuit that is to realise it.

    Values of `start` that the table cannot have are the circuit's affair.
    """
    shared = {s: v for s, v in environment.start.items() if s in question.table.inputs or s in question.outputs}
    return replace(environment, start=shared), replace(environment, guards={})


def table_needs_partners(environment: Environment, question: Departs) -> bool:
    """Whether each start state of the table must have a partner: `start` speaks of both sides alike."""
    return len(environments_with_table(environment, question)[0].start) == len(environment.start)


def schedules(
    changes: str, admits: Callable[[int], bool], limits: Limits
) -> Callable[[int, int], tuple[Schedule, ...]]:
    """For an input vector and the inputs that may change, the changes that the environment may make; remembered.

    `changes`: how inputs change; `admits`: whether a vector satisfies the assumptions. Under `burst` every order
    through admitted vectors is a change of its own.
    """

    def lawful(vector: int, schedule: Schedule) -> bool:
        for instant in schedule:
            vector ^= instant
            if not admits(vector):
                return False
        return True

    @cache
    def of(vector: int, allowed: int) -> tuple[Schedule, ...]:
        found: list[Schedule] = []
        for chosen in choices(allowed, "one" if changes == "single" else "any"):
            if changes == "burst" and chosen.bit_count() > MOST_ORDERS:
                limits.refuse(f"a burst of {chosen.bit_count()} inputs has more orders than can be compared one by one")
            found += permutations(members(chosen)) if changes == "burst" else [(chosen,)]
        return tuple(s for s in found if lawful(vector, s))

    return of


def by_vector(states: Sequence[int], mask: int) -> dict[int, list[int]]:
    """Total states by their input vector."""
    found: dict[int, list[int]] = {}
    for state in states:
        found.setdefault(state & mask, []).append(state)
    return found


Doing = tuple[int, Schedule]
"""A total state and the instants of a change that are still to come."""


def _respond(behaviour: Behaviour, at: Doing) -> set[Doing]:
    """One step of the response to a change, by the executable meaning."""
    here, rest = at
    steps = [s.state for s in behaviour.held(Situation(here))]
    after = {(s, rest) for s in steps}
    if rest:
        together = steps if behaviour.circuit.winners == "any" else []
        after |= {(s ^ rest[0], rest[1:]) for s in [here, *together]}
    return after


def ends_one_by_one(behaviour: Behaviour, state: int, schedule: Schedule, most: int) -> set[int] | None:
    """The stable total states in which the response to a change can end, by the executable meaning alone.

    None when the response has more than `most` total states.
    """
    seen = {(state ^ schedule[0], schedule[1:])}
    todo = list(seen)
    while todo:
        at = todo.pop()
        if behaviour.excited(at[0]).bit_count() > 12 or len(seen) > most:
            return None
        fresh = _respond(behaviour, at) - seen
        todo += fresh
        seen |= fresh
    return {s for s, rest in seen if not rest and behaviour.is_stable(s)}


def flickers_one_by_one(behaviour: Behaviour, state: int, schedule: Schedule, signal: str, most: int = 5_000) -> bool:
    """Whether a signal changes twice in some run of a response, by the executable meaning alone.

    A response of more than `most` total states is not looked at to the end.
    """
    watched = [behaviour.circuit.signal(signal)]

    def now(total: int) -> int:
        return value(behaviour.circuit, watched, total)[0]

    first = (state ^ schedule[0], schedule[1:])
    seen = {(first, int(now(first[0]) != now(state)))}
    todo = list(seen)
    while todo and len(seen) <= most:
        at, changes = todo.pop()
        fresh = {(s, changes + (now(s[0]) != now(at[0]))) for s in _respond(behaviour, at)} - seen
        if any(count > 1 for _, count in fresh):
            return True
        todo += fresh
        seen |= fresh
    return False
