"""The rules of the reach engine about progress, each by itself, against the naive oracle on random circuits."""

from __future__ import annotations

from collections import Counter
from collections.abc import Callable
from dataclasses import replace
from typing import Any

import oracle
import pytest
from handshakes import pipeline
from random_circuits import Question, random_question

from settled.encodings.monitors import evading, returning
from settled.encodings.motions import motions, pressing
from settled.encodings.twins import twins
from settled.models.circuit import Circuit
from settled.models.logic import evaluate, not_, var
from settled.models.states import Behaviour, Situation, unpack
from settled.verify.limits import Limits
from settled.verify.properties import kinds, leads_to
from settled.verify.questions import Answer, Evades, Task
from settled.verify.replay import replay
from settled.verify.rules import Established, Failure, Outcome, progress, settling
from settled.verify.rules.progress import constant_in_the_end, no_return
from settled.verify.symbolic import reach
from settled.verify.symbolic.certificates import CertificateFailed
from settled.verify.symbolic.constancy import AT_REST, CONSTANT
from settled.verify.symbolic.reach import Reacher

Found = tuple[Question, Outcome]


def outcome(rule: Callable[[Reacher, Any], Outcome], seed: str, check: str, mode: str | None) -> Found:
    question = random_question(seed, check, nodes=4, inputs=2, mode=mode)
    asked = kinds()[check].question(question.circuit, question.options)
    return question, rule(Reacher(Task(question.circuit, question.environment, Limits(seconds=120))), asked)


def judged(check: str, question: Question, found: Established | Failure) -> str:
    """The verdict, when the oracle says the same and what the rule shows or argues stands."""
    verdict = "proved" if isinstance(found, Established) else "refuted"
    assert verdict == oracle.decide(question.circuit, question.environment, check, question.options).verdict
    if isinstance(found, Failure):
        kind, behaviour = kinds()[check], Behaviour(question.circuit, question.environment)
        asked = kind.question(question.circuit, question.options)
        _, facts = replay(kind, behaviour, asked, Answer("refuted", "rule", runs=found.runs, facts=found.facts))
        return "ends" if facts.get("ends") else "goes round"
    for argument in found.arguments:
        argument.check(Limits())
    return verdict


@pytest.mark.parametrize("mode", [None, "input-output"])
@pytest.mark.parametrize("rule", progress.RULES[Evades], ids=lambda rule: rule.__name__)
def test_a_rule_about_goals_is_never_wrong(
    rule: Callable[[Reacher, Any], Outcome],
    mode: str | None,
    share: Callable[[int], int],
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    """Every tenth circuit counts as a large one, in which clauses are guessed."""
    decided: Counter[str] = Counter()
    for seed in range(share(1000)):
        monkeypatch.setattr(reach, "LARGE", 100 if seed % 10 else 0)
        question, found = outcome(rule, f"goal {seed}", "leads-to", mode)
        decided[judged("leads-to", question, found) if found else "open"] += 1
    assert min(decided["proved"], decided["ends"]) > share(200), decided
    assert (decided["goes round"] > share(30)) == (rule is no_return), decided
    assert not decided["open"] if rule is no_return else decided["open"] < share(300), decided


@pytest.mark.parametrize("mode", [None, "input-output"])
def test_constancy_with_the_inputs_held_is_never_wrong(mode: str | None, share: Callable[[int], int]) -> None:
    decided: Counter[str] = Counter()
    for seed in range(share(1000)):
        question, found = outcome(settling.constant_in_the_end, f"rest {seed}", "settles", mode)
        decided[judged("settles", question, found) if found else "open"] += 1
    assert decided["proved"] > share(300), decided


def stands(argument: Any, left_out: int) -> bool:
    """Whether z3 accepts an argument without one of its steps."""
    steps = tuple(step for i, step in enumerate(argument.steps) if i != left_out)
    try:
        replace(argument, steps=steps).check(Limits())
    except CertificateFailed:
        return False
    return True


def test_an_argument_without_one_of_its_steps_is_refused_by_z3() -> None:
    circuit, environment = pipeline(4, inverters=True)
    asked = Evades(not_(var("c1")), var("c1"))
    found = constant_in_the_end(Reacher(Task(circuit, environment, Limits())), asked)
    assert isinstance(found, Established)
    (argument,) = found.arguments
    needed = [step for i, step in enumerate(argument.steps) if not stands(argument, i)]
    assert len(needed) > 8 and {step.becomes for step in needed} == {CONSTANT, AT_REST}


@pytest.mark.parametrize("mode", [None, "input-output"])
def test_motions_and_what_presses_are_those_of_the_meaning(mode: str | None, share: Callable[[int], int]) -> None:
    """A variable that a step moves may move; a node presses where excited, a `must` input where it may move alone."""
    for seed in range(share(60)):
        circuit, environment, _ = random_question(f"moves {seed}", "leads-to", nodes=3, inputs=2, mode=mode)
        behaviour = Behaviour(circuit, environment)
        waits = environment.mode == "fundamental" and environment.changes == "burst"
        may, presses = motions(circuit, environment), pressing(circuit, environment)
        for state in range(1 << len(circuit.signals)):
            if not waits and behaviour.admits(state & circuit.input_mask):
                values = unpack(circuit, state)
                moved = {n for at in behaviour.moves(Situation(state)) for n in names_of(circuit, state ^ at.state)}
                for name in moved:
                    assert any(evaluate([may[name].rises, may[name].falls], values)), (seed, name)
                pressed = {n for n, e in presses.items() if evaluate([e], values)[0]}
                assert pressed == names_of(circuit, leads_to.pressing(behaviour, state)), seed


def names_of(circuit: Circuit, packed: int) -> set[str]:
    return {s for s, i in circuit.place.items() if packed >> i & 1}


def test_what_is_added_to_a_circuit_has_names_with_blanks_which_no_signal_has() -> None:
    circuit, environment, _ = random_question("names", "settles", winners="one", mode="fundamental")
    made, far = progress.waiting(Reacher(Task(circuit, environment, Limits())), Evades(var("a"), var("p")))
    systems = [
        evading(made, far, pressing(circuit, environment))[0],
        returning(circuit, environment, circuit.nodes)[0],
        twins(circuit, environment)[0],
    ]
    added = [name for s in systems for name in (*s.variables, *s.selectors) if name not in circuit.signals]
    assert len(added) > 20 and all(" " in name for name in added)
