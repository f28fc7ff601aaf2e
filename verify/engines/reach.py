"""The reach engine: property-directed reachability on one copy of the circuit, under rules that reduce every question
to questions whether a state can be reached. What it proves carries an inductive invariant that z3 has checked.
"""

from __future__ import annotations

from settled.encodings.system import TooManyOrders
from settled.models.logic import Expr, and_, not_, or_
from settled.verify.engines import Engine
from settled.verify.questions import Answer, Diverges, Flickers, Oscillates, Question, Reaches, Task, undecided
from settled.verify.rules import Established, Rule, hazards, races, settling, states
from settled.verify.symbolic.certificates import Proof, check, scripts
from settled.verify.symbolic.reach import Reacher

NAME = "property-directed reachability"
RULES: dict[type[Question], list[Rule]] = {**states.RULES, **hazards.RULES, **settling.RULES, **races.RULES}


def answer(task: Task, question: Question) -> Answer:
    """Try the rules of the question in turn. Raises `LimitReached`, and `CertificateFailed` for a wrong proof."""
    reacher = Reacher(task)
    try:
        for rule in RULES[type(question)]:
            found = rule(reacher, question)
            if isinstance(found, Established):
                return _proved(reacher, question, found)
            if found is not None:
                return Answer("refuted", NAME, runs=found.runs, facts=found.facts)
    except TooManyOrders as many:
        return undecided(str(many), NAME)
    return undecided("none of the rules decides", NAME)


def _proved(reacher: Reacher, question: Question, found: Established) -> Answer:
    for proof in found.proofs:
        check(proof, reacher.task.limits)
    certificate = {
        "kind": "inductive invariant",
        "rule": found.rule,
        "parts": [proof.as_data() for proof in found.proofs],
    }
    written = {
        f"{number}-{name}": text for number, proof in enumerate(found.proofs, 1) for name, text in scripts(proof)
    }
    exercised = _exercised(reacher, question)
    return Answer("proved", NAME, exercised=exercised, certificate=certificate, scripts=written)


def _exercised(reacher: Reacher, question: Question) -> bool:
    """Whether the question had something to range over: a reachable state that shows it."""
    wanted = _exercise(reacher, question)
    return wanted is None or not isinstance(
        reacher.reach(reacher.base, wanted, "there is nothing to range over"), Proof
    )


def _exercise(reacher: Reacher, question: Question) -> Expr | None:
    base = reacher.base
    begins = and_(base.rest, base.input_changes)
    if isinstance(question, Diverges | Flickers):
        return begins
    if isinstance(question, Oscillates):
        return or_(begins, not_(reacher.circuit.is_stable), base.input_changes)
    if isinstance(question, Reaches) and question.only_stable:
        return reacher.circuit.is_stable
    return None


ENGINE = Engine(NAME, rank=30, answers=dict.fromkeys(RULES, answer), apart=True)
