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
from settled.verify.symbolic.certificates import Certificate, CertificateFailed, Proof, Statements, check
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


@pytest.mark.parametrize("kind", ["never", "hazard-free", "settles", "race-free", "speed-independent", "leads-to"])
def test_another_solver_accepts_the_scripts_of_every_proof(kind: str) -> None:
    count = 0
    for seed in range(35):
        question = random_question(f"scripts {seed}", kind, nodes=4)
        task = Task(question.circuit, question.environment, Limits())
        answer = reach.answer(task, kinds()[kind].question(question.circuit, question.options))
        assert all(answers(text) == "unsat" for text in answer.scripts.values()), seed
        count += len(answer.scripts)
    assert count > 8


def test_a_script_tells_which_number_is_which_signal() -> None:
    text = dict(Statements(proof_of()).scripts())["step"]
    assert text.splitlines()[:2] == ["; never both: no move leads out of the invariant", "; expected answer: unsat"]
    assert "; n2 = q\n" in text and "; n2_next = q after\n" in text


def test_what_proofs_share_is_shown_once_and_a_premise_of_the_others() -> None:
    proof = proof_of()
    evidence = Certificate(proof.system, proof.clauses, [proof])
    evidence.check(Limits())
    assert list(evidence.scripts()) == ["circuit-start", "circuit-step", "part-1-property"]
    assert evidence.as_data()["clauses"] and evidence.as_data()["parts"][0]["clauses"] == []


def test_an_invariant_that_does_not_exclude_the_bad_states_is_refused() -> None:
    with pytest.raises(CertificateFailed, match="`property`"):
        check(Statements(replace(proof_of(), clauses=())), Limits())


def test_an_invariant_that_a_start_state_violates_is_refused() -> None:
    proof = proof_of()
    with pytest.raises(CertificateFailed, match="`start`"):
        check(Statements(replace(proof, clauses=(*proof.clauses, (("q", False),)))), Limits())


def test_an_invariant_that_a_move_leaves_is_refused() -> None:
    proof = proof_of()
    with pytest.raises(CertificateFailed, match="`step`"):
        check(Statements(replace(proof, clauses=(*proof.clauses, (("q", True),)))), Limits())


def test_a_false_premise_is_refused_where_it_is_to_be_shown() -> None:
    proof = proof_of()
    with pytest.raises(CertificateFailed, match="own signals"):
        Certificate(proof.system, [(("q", True),)], [proof]).check(Limits())


def test_no_time_left_for_the_check_is_a_limit_and_no_verdict() -> None:
    with pytest.raises(LimitReached, match="while z3 checks"):
        check(Statements(proof_of()), Limits(seconds=-1))


def test_a_proved_answer_carries_the_invariant_in_words() -> None:
    answer = reach.answer(Task(LATCH, WORLD, Limits()), Reaches(and_(var("q"), var("p"))))
    assert answer.certificate is not None and answer.certificate["kind"] == "inductive invariant"
    assert ["~q", "~p"] in answer.certificate["clauses"]
    assert answer.certificate["parts"] == [
        {"claim": "no run reaches the state asked for", "observers": {}, "clauses": []}
    ]
    assert answer.scripts["part-1-property"].endswith("(check-sat)\n(exit)\n")
