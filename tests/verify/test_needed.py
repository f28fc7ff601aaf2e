"""Runs without what a failure does not need: they walk and fail all the same, and nothing is left out of least ones."""

from __future__ import annotations

from collections.abc import Iterator
from itertools import pairwise
from random import Random

import pytest
from random_circuits import random_question

from settled.models.logic import const
from settled.models.states import Behaviour, Run, Situation, value
from settled.verify import check
from settled.verify.engines import attempt, exhaustive
from settled.verify.limits import Limits
from settled.verify.needed import only_needed
from settled.verify.properties import kinds
from settled.verify.questions import Answer, Question, Reaches, Task
from settled.verify.renderers.page import Page
from settled.verify.renderers.trace_text import tables
from settled.verify.replay import replay


def questions(name: str) -> Iterator[tuple[Task, Behaviour, Question]]:
    for seed in range(150):
        circuit, environment, options = random_question(f"plain {seed}", name, nodes=4, inputs=2)
        question = kinds()[name].question(circuit, options)
        if not getattr(question, "only_stable", False):
            yield Task(circuit, environment, Limits()), Behaviour(circuit, environment), question


def switchings(behaviour: Behaviour, answer: Answer) -> int:
    """How many nodes switch up to the failure."""
    states = answer.runs[0].states
    moved = [(a ^ b) & ~behaviour.circuit.input_mask for a, b in pairwise(states)]
    return sum(m.bit_count() for m in moved[: answer.facts.get("offending_step")])


def walk_about(rng: Random, behaviour: Behaviour, bad: Reaches) -> Answer | None:
    """A run of moves at random from a start state to a bad one."""
    states = [rng.choice([s for s in range(1 << len(behaviour.circuit.signals)) if behaviour.may_start(s)])]
    at = Situation(states[0])
    while not value(behaviour.circuit, [bad.bad], states[-1])[0]:
        moves = sorted(behaviour.moves(at))
        if len(states) > 20 or not moves:
            return None
        at = rng.choice(moves)
        states.append(at.state)
    return Answer("refuted", "walking", runs=(Run("a walk", tuple(states), circuit=behaviour.circuit.name),))


def test_less_switches_and_it_fails_all_the_same() -> None:
    fewer = []
    for seed, (_, behaviour, question) in enumerate(questions("never")):
        assert isinstance(question, Reaches)
        rng = Random(seed)
        for found in filter(None, (walk_about(rng, behaviour, question) for _ in range(4))):
            less = only_needed(behaviour, question, found, Limits())
            replay(kinds()["never"], behaviour, question, less)
            fewer.append(switchings(behaviour, found) - switchings(behaviour, less))
            assert only_needed(behaviour, question, less, Limits()) == less
    assert min(fewer) == 0 and sum(n > 0 for n in fewer) > 10


@pytest.mark.parametrize("name", ["never", "hazard-free"])
def test_of_the_least_runs_nothing_is_left_out(name: str) -> None:
    seen = 0
    for task, behaviour, question in questions(name):
        least = attempt(exhaustive.ENGINE, task, question)
        if least.verdict == "refuted":
            again = only_needed(behaviour, question, least, Limits())
            replay(kinds()[name], behaviour, question, again)
            assert switchings(behaviour, again) == switchings(behaviour, least)
            seen += 1
    assert seen > 20


def test_what_fails_from_the_beginning_needs_nothing() -> None:
    (_, behaviour, _), *_ = questions("never")
    always = Reaches(const(1))
    states = [s for s in range(1 << len(behaviour.circuit.signals)) if behaviour.may_start(s)]
    found = Answer("refuted", "", runs=(Run("a walk", (states[0],), circuit=behaviour.circuit.name),))
    assert only_needed(behaviour, always, found, Limits()) == found


def test_of_a_wide_circuit_only_the_gates_that_matter_switch_before_the_failure() -> None:
    stage = 'n{i} = "~{g}"\ntake{i} = "{d} & {g}"\nkeep{i} = "s{i} & n{i}"\ns{i} = "take{i} | keep{i}"\n'
    names = [(f"s{i - 1}" if i else "d", "gn" if i % 2 else "g") for i in range(20)]
    row = "".join(stage.format(i=i, d=d, g=g) for i, (d, g) in enumerate(names))
    text = f'[circuit]\ninputs = ["d", "g"]\noutputs = ["s19"]\n[circuit.excitation]\ngn = "~g"\n{row}'
    report = check("row.toml", text=f'{text}[[property]]\ncheck = "hazard-free"\n')
    (result,) = report.results
    (trace,) = result.traces
    switched = {s for step in trace.steps[: result.facts["offending_step"] + 1] for s in step.switched}
    assert len(trace.steps[0].state) > 63
    assert result.claim.startswith("After g+ from d=") and "(80 nodes more in the run)" in result.claim
    assert switched <= {"g", "gn", "n18", "take18", "keep18", "s18", "n19", "take19", "keep19", "s19"}
    shown = tables(result, report.circuit, Page(120), "")
    assert shown[-1].endswith(" more nodes do not switch before the failure.") and len(shown[-1].split()[0]) == 2
