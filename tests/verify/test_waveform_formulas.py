"""Hazards of circuits without feedback that are too wide to be searched."""

from __future__ import annotations

import z3
from logic_families import carry_chain, random_logic

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import or_, var
from settled.models.states import Behaviour
from settled.verify.engines.waveforms import flickers
from settled.verify.limits import Limits
from settled.verify.properties.hazard_free import KIND
from settled.verify.questions import Flickers, Task
from settled.verify.replay import replay


def test_a_carry_chain_with_all_its_terms_is_proved_and_its_script_is_unsatisfiable() -> None:
    circuit, environment = carry_chain(24)
    answer = flickers(Task(circuit, environment, Limits()), Flickers(circuit.outputs))
    assert answer.verdict == "proved" and answer.exercised
    (text,) = answer.scripts.values()
    solver = z3.Solver()
    solver.from_string(text)
    assert solver.check() == z3.unsat


def test_a_hazard_of_wide_logic_is_shown_by_a_lawful_run() -> None:
    circuit, environment = random_logic(60)
    question = Flickers(circuit.outputs)
    answer = flickers(Task(circuit, environment, Limits()), question)
    assert answer.verdict == "refuted"
    replay(KIND, Behaviour(circuit, environment), question, answer)
    assert len(answer.runs[0].states) < len(circuit.signals)


def test_a_circuit_with_feedback_is_left_to_others() -> None:
    ring = Circuit("ring", ("a",), ("q",), {"q": or_(var("a"), var("q"))}, ("q",))
    answer = flickers(Task(ring, Environment(), Limits()), Flickers(("q",)))
    assert answer.verdict == "undecided" and "feedback" in (answer.reason or "")
