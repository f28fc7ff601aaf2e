"""Decision diagrams where other searches end, and without their library, time or memory."""

from __future__ import annotations

import sys
from dataclasses import replace

import pytest
from families import latch_chain, pipeline, ripple_counter
from logic_families import carry_chain, random_logic

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import and_, or_, var
from settled.models.states import Behaviour
from settled.verify.engines import attempt
from settled.verify.engines.decision_diagrams import ENGINE
from settled.verify.limits import LimitReached, Limits
from settled.verify.properties import kinds
from settled.verify.questions import Answer, Diverges, Flickers, Oscillates, Question, Task, Withdraws
from settled.verify.replay import replay

Case = tuple[Circuit, Environment]


def ask(case: Case, question: Question, limits: Limits | None = None) -> Answer:
    return attempt(ENGINE, Task(*case, limits or Limits()), question)


def racing_latches(length: int) -> Case:
    """Latches in a row, the first without the product that covers its gate's change."""
    circuit, environment = latch_chain(length)
    uncured = or_(and_(var("d"), var("g0")), and_(var("q0"), var("n0")))
    return replace(circuit, excitation={**circuit.excitation, "q0": uncured}), environment


def test_without_the_library_nothing_is_decided_and_the_answer_says_why(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "dd", None)
    answer = ask(pipeline(2), Withdraws())
    assert answer.verdict == "undecided" and "dd (CUDD) is not installed" in (answer.reason or "")


cudd = pytest.importorskip("dd.cudd")


@pytest.mark.parametrize("stages", [5, 20])
@pytest.mark.parametrize("winners", ["any", "one"])
def test_a_pipeline_is_semi_modular_and_its_states_are_counted(stages: int, winners: str) -> None:
    answer = ask(pipeline(stages, winners), Withdraws())
    assert answer.verdict == "proved" and answer.ranged == {"total_states": 4 * 3**stages, "stable_states": 0}
    assert answer.certificate is not None and answer.certificate["kind"] == "reached set"
    assert set(answer.scripts) == {"start", "step"}


@pytest.mark.parametrize("question", [Oscillates(), Diverges(), Flickers(("f0q", "f4q"))])
def test_a_ripple_counter_is_deep(question: Question) -> None:
    answer = ask(ripple_counter(5), question)
    assert answer.verdict == "proved" and answer.exercised and answer.ranged["stable_states"] == 64


@pytest.mark.parametrize(
    ("check", "case"),
    [
        ("settles", pipeline(9, "any")),
        ("hazard-free", random_logic(25)),
        ("race-free", racing_latches(8)),
        ("speed-independent", racing_latches(8)),
    ],
)
def test_runs_of_large_circuits_are_lawful_and_offend(check: str, case: Case) -> None:
    circuit, environment = case
    kind = kinds()[check]
    question = kind.question(circuit, {})
    answer = ask((circuit, environment), question)
    assert answer.verdict == "refuted"
    replay(kind, Behaviour(circuit, environment), question, answer)


def test_a_carry_chain_has_no_hazard() -> None:
    assert ask(carry_chain(6), Flickers(("c6",))).verdict == "proved"


def test_no_time_is_a_limit() -> None:
    answer = ask(pipeline(12), Withdraws(), Limits(seconds=0))
    assert answer.verdict == "undecided" and "time limit of 0 s" in (answer.reason or "")


def test_no_memory_left_in_the_diagrams_is_a_limit(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("settled.verify.diagrams.manager.SHARE", 10 / 8_000)
    with pytest.raises(LimitReached, match="memory limit .* by the decision diagrams"):
        ENGINE.answers[Flickers](Task(*random_logic(400), Limits()), Flickers(("g399",)))
