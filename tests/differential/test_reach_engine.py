"""The reach engine, and each of its rules by itself, against the naive oracle on random circuits."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable, Iterator
from dataclasses import replace

import judging
import oracle
import pytest
from random_circuits import Question, random_question

from settled.models.states import Behaviour
from settled.verify.engines import reach
from settled.verify.limits import Limits
from settled.verify.properties import kinds
from settled.verify.questions import Answer, Evades, Task
from settled.verify.replay import replay
from settled.verify.rules import Established, Failure
from settled.verify.symbolic import reach as search
from settled.verify.symbolic.reach import Reacher

RULES = [
    ("never", "reaches"),
    ("always", "reaches"),
    ("deadlock-free", "deadlocks"),
    ("speed-independent", "withdraws"),
    ("hazard-free", "observers"),
    ("settles", "no_loops"),
    ("settles", "few_changes"),
    ("settles", "no_loop_goes_round"),
    ("settles", "no_return"),
    ("race-free", "no_disabling_ring"),
    ("race-free", "two_ends_after_a_ring"),
    ("race-free", "two_runs"),
]
ONLY_REFUTES = ("two_ends_after_a_ring",)
ELSEWHERE = {"constant_in_the_end"}
"""Rules that `test_progress_rules.py` holds against the oracle, with those about goals."""
CHECKS = [*dict.fromkeys(check for check, _ in RULES), "leads-to"]


def some_question(seed: str, check: str, **limits: int) -> Question:
    """A random question; the nodes of every fifth circuit exclude one another in pairs."""
    question = random_question(seed, check, **limits)
    if not seed.endswith(("0", "5")):
        return question
    nodes = question.circuit.nodes
    pairs = tuple(zip(nodes[::2], nodes[1::2], strict=False))
    return question._replace(circuit=replace(question.circuit, exclusive=pairs))


def task_of(question: Question) -> Task:
    return Task(question.circuit, question.environment, Limits(seconds=120))


def complaints(check: str, question: Question, answer: Answer) -> Iterator[str]:
    """What the oracle has against an answer."""
    circuit, environment = question.circuit, question.environment
    expected = oracle.decide(circuit, environment, check, question.options)
    if answer.verdict != expected.verdict:
        yield f"{answer.verdict} ({answer.reason}), but the oracle says {expected.verdict}"
    elif answer.verdict == "proved":
        if answer.exercised == expected.vacuous:
            yield f"exercised is {answer.exercised}"
    else:
        shown = _shown(check, question, answer)
        if "some_run_settles" in shown and shown["some_run_settles"] != expected.facts["some_run_settles"]:
            yield "some_run_settles is wrong"


def _shown(check: str, question: Question, answer: Answer) -> dict[str, object]:
    """The facts of a refutation whose runs have been walked and judged."""
    kind = kinds()[check]
    behaviour = Behaviour(question.circuit, question.environment)
    asked = kind.question(question.circuit, question.options)
    return {**replay(kind, behaviour, asked, answer)[1], **answer.facts}


@pytest.mark.parametrize("guesses", [False, True])
@pytest.mark.parametrize("check", CHECKS)
def test_the_engine_decides_as_the_oracle_does(
    check: str, guesses: bool, share: Callable[[int], int], monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(search, "LARGE", 0 if guesses else 100)
    monkeypatch.setattr(search, "SOON", 0.0)
    verdicts: Counter[str] = Counter()
    for seed in range(share(160 if guesses else 400)):
        question = some_question(f"engine {guesses} {seed}", check)
        answer = reach.answer(task_of(question), kinds()[check].question(question.circuit, question.options))
        assert not list(complaints(check, question, answer)), seed
        verdicts[answer.verdict] += 1
    assert min(verdicts["proved"], verdicts["refuted"]) > 2, verdicts


@pytest.mark.parametrize(("check", "name"), RULES)
def test_a_rule_is_never_wrong(check: str, name: str, share: Callable[[int], int]) -> None:
    decided: Counter[str] = Counter()
    for seed in range(share(1000)):
        question = some_question(f"rule {seed}", check, nodes=4, inputs=2)
        asked = kinds()[check].question(question.circuit, question.options)
        (rule,) = [rule for rule in reach.RULES[type(asked)] if rule.__name__ == name]
        outcome = rule(Reacher(task_of(question)), asked)
        if outcome is None:
            continue
        found = "proved" if isinstance(outcome, Established) else "refuted"
        assert found == oracle.decide(question.circuit, question.environment, check, question.options).verdict, seed
        decided[found] += 1
        if isinstance(outcome, Failure):
            _shown(check, question, Answer("refuted", name, runs=outcome.runs, facts=outcome.facts))
    wanted, least = ("refuted", share(30)) if name in ONLY_REFUTES else ("proved", share(100))
    assert decided[wanted] > least, decided


def test_every_rule_is_held_against_the_oracle() -> None:
    known = {rule.__name__ for kind, rules in reach.RULES.items() if kind is not Evades for rule in rules}
    assert known == {name for _, name in RULES} | ELSEWHERE


def test_every_run_that_evades_a_goal_is_judged_by_the_oracle(share: Callable[[int], int]) -> None:
    """Also the fairness of those that go round for ever, by somebody else than the program."""
    verdicts: Counter[str] = Counter()
    for seed in range(share(400)):
        case = random_question(f"judged lasso {seed}", "leads-to", nodes=4, inputs=2, mode="input-output")
        found, verdict = judging.complaints(*case[:2], "leads-to", case.options, shortest=False, engine=reach.NAME)
        assert not found, (seed, found)
        verdicts[verdict] += 1
    assert min(verdicts["proved"], verdicts["refuted"]) > share(50), verdicts
