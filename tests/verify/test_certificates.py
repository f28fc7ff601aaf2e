"""Proofs as SMT-LIB scripts: solvers from outside accept them, and none accepts a proof that is wrong."""

from __future__ import annotations

from dataclasses import replace

import pytest
from random_circuits import random_question

from settled.encodings.system import system
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import and_, not_, or_, var
from settled.verify.engines import reach
from settled.verify.limits import LimitReached, Limits
from settled.verify.properties import kinds
from settled.verify.questions import Reaches, Task
from settled.verify.rules import Established
from settled.verify.symbolic.certificates import CertificateFailed, Proof, check, scripts
from settled.verify.symbolic.reach import Reacher

LATCH = Circuit(
    "latch", ("s", "r"), ("q", "p"), {"q": not_(or_(var("r"), var("p"))), "p": not_(or_(var("s"), var("q")))}
)
WORLD = Environment(assume=(not_(and_(var("s"), var("r"))),), start={"q": 1, "p": 0})


def proof_of() -> Proof:
    found = Reacher(Task(LATCH, WORLD, Limits())).reach(system(LATCH, WORLD), and_(var("q"), var("p")), "never both")
    assert isinstance(found, Proof)
    return found


def answers(text: str) -> str:
    """What cvc5 answers to a script."""
    cvc5 = pytest.importorskip("cvc5")
    manager = cvc5.TermManager()
    solver = cvc5.Solver(manager)
    parser = cvc5.InputParser(solver)
    parser.setStringInput(cvc5.InputLanguage.SMT_LIB_2_6, text, "proof.smt2")
    symbols, said = parser.getSymbolManager(), []
    while not (command := parser.nextCommand()).isNull():
        said.append(command.invoke(solver, symbols))
    return "".join(said).strip()


@pytest.mark.parametrize("kind", ["never", "hazard-free", "settles", "race-free", "speed-independent"])
def test_another_solver_accepts_the_scripts_of_every_proof(kind: str) -> None:
    count = 0
    for seed in range(12):
        question = random_question(f"scripts {seed}", kind, nodes=4)
        asked = kinds()[kind].question(question.circuit, question.options)
        for rule in reach.RULES[type(asked)]:
            outcome = rule(Reacher(Task(question.circuit, question.environment, Limits())), asked)
            for proof in outcome.proofs if isinstance(outcome, Established) else ():
                texts = dict(scripts(proof))
                assert list(texts) == ["start", "step", "property"]
                assert {answers(text) for text in texts.values()} == {"unsat"}, (seed, rule.__name__)
                count += 1
    assert count > 5


def test_a_script_tells_which_number_is_which_signal() -> None:
    texts = dict(scripts(proof_of()))
    assert texts["step"].splitlines()[:2] == [
        "; never both: no move leads out of the invariant",
        "; expected answer: unsat",
    ]
    assert "; n2 = q\n" in texts["step"] and "; n2_next = q after\n" in texts["step"]


def test_an_invariant_that_does_not_exclude_the_bad_states_is_refused() -> None:
    with pytest.raises(CertificateFailed, match="`property`"):
        check(replace(proof_of(), clauses=()), Limits())


def test_an_invariant_that_a_start_state_violates_is_refused() -> None:
    proof = proof_of()
    with pytest.raises(CertificateFailed, match="`start`"):
        check(replace(proof, clauses=(*proof.clauses, (("q", False),))), Limits())


def test_an_invariant_that_a_move_leaves_is_refused() -> None:
    proof = proof_of()
    with pytest.raises(CertificateFailed, match="`step`"):
        check(replace(proof, clauses=(*proof.clauses, (("q", True),))), Limits())


def test_no_time_left_for_the_check_is_a_limit_and_no_verdict() -> None:
    with pytest.raises(LimitReached, match="while z3 checks"):
        check(proof_of(), Limits(seconds=-1))


def test_a_proved_answer_carries_the_invariant_in_words() -> None:
    answer = reach.answer(Task(LATCH, WORLD, Limits()), Reaches(and_(var("q"), var("p"))))
    assert answer.certificate is not None and answer.certificate["kind"] == "inductive invariant"
    (part,) = answer.certificate["parts"]
    assert part["claim"] == "no run reaches the state asked for" and part["observers"] == {}
    assert ["~q", "~p"] in part["clauses"]
