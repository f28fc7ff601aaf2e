"""Runs found the hard way are brought into normal form: as if exhaustive search had found them."""

from __future__ import annotations

from collections.abc import Callable, Iterator

import pytest
from random_circuits import random_question

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.states import Behaviour, Run, Situation, members, value, walk
from settled.verify import shorten
from settled.verify.engines import attempt, exhaustive
from settled.verify.limits import Limits
from settled.verify.properties import kinds
from settled.verify.questions import Answer, Diverges, Question, Reaches, Task
from settled.verify.replay import replay


def wandering(at: Situation, moves: Callable[[Situation], Iterator[Situation]]) -> Iterator[list[Situation]]:
    """Long ways round: the runs along which a depth-first search first comes to each situation."""
    seen, path = {at}, [(at, moves(at))]
    yield [at]
    while path:
        after = next((s for s in path[-1][1] if s not in seen), None)
        if after is None:
            path.pop()
        else:
            seen.add(after)
            path.append((after, moves(after)))
            yield [s for s, _ in path]


def starts(behaviour: Behaviour) -> list[int]:
    return [s for s in range(1 << len(behaviour.circuit.signals)) if behaviour.may_start(s)]


def clumsy(circuit: Circuit, environment: Environment, question: Question) -> Answer | None:
    """A refutation by runs that are as they come."""
    behaviour = Behaviour(circuit, environment)
    for start in reversed(starts(behaviour)):
        for path in wandering(Situation(start), behaviour.moves):
            before = tuple(s.state for s in path)
            if isinstance(question, Reaches) and value(circuit, [question.bad], before[-1])[0]:
                return Answer("refuted", "walking about", runs=(Run("found", before, circuit=circuit.name),))
            if isinstance(question, Diverges):
                for change in behaviour.changes(path[-1]):
                    ways = list(wandering(change, behaviour.responses))
                    ends = {w[-1].state: w for w in ways if behaviour.is_stable(w[-1].state) and not w[-1].outstanding}
                    if len(ends) > 1:
                        found = [before + tuple(s.state for s in way) for way in list(ends.values())[:2]]
                        runs = tuple(Run(f"way {i}", states, circuit=circuit.name) for i, states in enumerate(found))
                        return Answer("refuted", "walking about", runs=runs)
    return None


def cases(check: str) -> Iterator[tuple[Task, Question, Answer]]:
    for seed in range(100):
        circuit, environment, options = random_question(f"long {seed}", check, nodes=4, inputs=2)
        question = kinds()[check].question(circuit, options)
        found = clumsy(circuit, environment, question)
        if found is not None and not getattr(question, "only_stable", False):
            yield Task(circuit, environment, Limits()), question, found


def length(answer: Answer) -> int:
    return sum(len(run.states) for run in answer.runs)


@pytest.mark.parametrize("check", ["never", "race-free"])
def test_a_run_found_by_walking_about_becomes_the_one_that_exhaustive_search_finds(check: str) -> None:
    shorter = []
    for task, question, found in cases(check):
        least = attempt(exhaustive.ENGINE, task, question)
        again = shorten.shortened(Task(task.circuit, task.environment, Limits()), question, found)
        assert [run.states for run in again.runs] == [run.states for run in least.runs]
        assert again.method == "walking about"
        shorter.append(length(again) < length(found))
    assert any(shorter)


@pytest.mark.parametrize("check", ["never", "race-free"])
def test_out_of_reach_of_the_search_only_what_moves_in_the_runs_is_moved(
    check: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    shorter = []
    for task, question, found in cases(check):
        whole = len(exhaustive.explored(task))
        monkeypatch.setattr(shorten, "STATES", whole - 1)
        again = shorten.shortened(Task(task.circuit, task.environment, Limits()), question, found)
        replay(kinds()[check], Behaviour(task.circuit, task.environment), question, again)
        assert length(again) <= length(found)
        shorter.append(length(again) < length(found))
    assert any(shorter)


def test_what_is_held_is_still_excited() -> None:
    """The nodes that are not moved count for stability all the same."""
    for task, question, found in cases("race-free"):
        behaviour = Behaviour(task.circuit, task.environment)
        moving = 0
        for run in found.runs:
            for state in run.states:
                moving |= state ^ run.states[0]
        for bit in members(moving & ~task.circuit.input_mask):
            packed = shorten.Moving(task.circuit, task.environment, moving & ~bit)
            graph = exhaustive.Graph(packed, Limits())
            again = attempt(
                exhaustive.ENGINE, Task(task.circuit, task.environment, Limits(), {"graph": graph}), question
            )
            for run in again.runs:
                walk(behaviour, run)
                assert not any((state ^ run.states[0]) & bit for state in run.states)
                assert behaviour.is_stable(run.states[-1])
