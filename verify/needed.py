"""Runs of circuits too wide for exhaustive search, without the switchings that the failure does not need.

One switching after the other is left out, the last first, as long as what remains is a run and fails as before. What
was left out of a response stays due; after the failure the circuit settles with everything that is due at once.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from itertools import pairwise

from settled.models.circuit import Circuit
from settled.models.states import Behaviour, Run, members, value, walk
from settled.verify.limits import LimitReached, Limits
from settled.verify.questions import Answer, Flickers, Question, Reaches

LONGEST = 200
"""Steps in which a circuit is expected to settle."""

States = list[int]
Fails = Callable[[States], bool]


def only_needed(behaviour: Behaviour, question: Question, answer: Answer, limits: Limits) -> Answer:
    """A refutation along one run with as few switchings as can be left out one by one; others as they are."""
    if isinstance(question, Reaches) and not question.only_stable:
        (run,) = answer.runs

        def bad(states: States) -> bool:
            return bool(value(behaviour.circuit, [question.bad], states[-1])[0])

        return replace(answer, runs=(replace(run, states=tuple(_lean(behaviour, run.states, bad, limits))),))
    return _hazard(behaviour, answer, limits) if isinstance(question, Flickers) else answer


def _hazard(behaviour: Behaviour, answer: Answer, limits: Limits) -> Answer:
    """The same for the run up to the second change of a signal, and on from there to a stable state."""
    (run,), circuit = answer.runs, behaviour.circuit
    last, signal = answer.facts["offending_step"], circuit.signal(answer.facts["signal"])
    if any((a ^ b) & circuit.input_mask for a, b in pairwise(run.states[last:])):
        return answer
    begin = _begin(behaviour, run.states[: last + 1])

    def twice(states: States) -> bool:
        wave = [value(circuit, [signal], state)[0] for state in states[begin:]]
        return wave[-1] != wave[-2] and sum(a != b for a, b in pairwise(wave)) == 2

    if not twice(list(run.states[: last + 1])):
        return answer
    lean = _lean(behaviour, run.states[: last + 1], twice, limits)
    rest = _rest(behaviour, lean[-1])
    if rest is None:
        return answer
    facts = {**answer.facts, "offending_step": len(lean) - 1}
    return replace(answer, runs=(replace(run, states=(*lean, *rest)),), facts=facts)


def _lean(behaviour: Behaviour, states: Sequence[int], fails: Fails, limits: Limits) -> States:
    """The run with as few switchings of nodes in its last response as can be left out one by one."""
    found: States = []
    less = list(states)
    while less != found:
        found = less
        try:
            less = _pass(behaviour, found, fails, limits)
        except LimitReached:
            break
    return found


def _pass(behaviour: Behaviour, states: States, fails: Fails, limits: Limits) -> States:
    """Every switching of nodes in the last response tried once."""
    found, begin, nodes = states, _begin(behaviour, states), ~behaviour.circuit.input_mask
    for step in range(len(found) - 1, begin, -1):
        for bit in members((found[step] ^ found[step - 1]) & nodes):
            limits.check("while a run is made plainer")
            less = _without(found, step, bit)
            if fails(less) and _walks(behaviour, less):
                found = less
    return _moving(found)


def _begin(behaviour: Behaviour, states: Sequence[int]) -> int:
    """The position of the last stable state before the last one; in input-output mode the first position."""
    if behaviour.environment.mode == "input-output":
        return 0
    return max((i for i, state in enumerate(states[:-1]) if behaviour.is_stable(state)), default=0)


def _without(states: States, step: int, bit: int) -> States:
    """The states without the switching of a node in a step; the next one of the node, if any, is left out as well."""
    end = next((i for i in range(step + 1, len(states)) if (states[i] ^ states[i - 1]) & bit), len(states))
    return [state ^ bit if step <= i < end else state for i, state in enumerate(states)]


def _walks(behaviour: Behaviour, states: States) -> bool:
    try:
        walk(behaviour, Run("", tuple(_moving(states))))
    except ValueError:
        return False
    return True


def _moving(states: States) -> States:
    """The states without steps in which nothing switches."""
    return [state for i, state in enumerate(states) if i == 0 or state != states[i - 1]]


def _rest(behaviour: Behaviour, state: int) -> States | None:
    """The states from one on until it is stable, everything that is due switching at once; None if it never is."""
    found: States = []
    while (due := _together(behaviour.circuit, behaviour.excited(state))) and len(found) < LONGEST:
        state ^= due
        found.append(state)
    return None if due else found


def _together(circuit: Circuit, due: int) -> int:
    """What switches in one step when as much as possible does."""
    if circuit.winners == "one":
        return due & -due
    for pair in circuit.pairs:
        if due & pair == pair:
            due ^= pair & -pair
    return due
