"""The reach engine: property-directed reachability on one copy of the circuit, under rules that reduce every question
to questions whether a state can be reached. What it proves carries an inductive invariant that z3 has checked.
"""

from __future__ import annotations

from collections.abc import Iterator
from typing import Any

from settled.encodings.system import TooManyOrders
from settled.models.logic import Expr, and_, not_, or_
from settled.verify.engines import Engine
from settled.verify.limits import LimitReached
from settled.verify.questions import (
    Answer,
    Diverges,
    Evades,
    Flickers,
    Oscillates,
    Question,
    Reaches,
    Task,
    undecided,
)
from settled.verify.rules import Established, Outcome, Rule, hazards, progress, races, rings, settling, states
from settled.verify.symbolic.certificates import Certificate, Proof
from settled.verify.symbolic.formula import Progress
from settled.verify.symbolic.reach import Reacher

SHARE = 0.4
NAME = "property-directed reachability"
RULES: dict[type[Question], list[Rule]] = {
    **states.RULES,
    **hazards.RULES,
    **settling.RULES,
    **races.RULES,
    **progress.RULES,
}


def answer(task: Task, question: Question) -> Answer:
    """Try the rules of the question in turn. Raises `LimitReached`, and `CertificateFailed` for a wrong proof."""
    reacher = reacher_of(task)
    try:
        if isinstance(question, Flickers | Oscillates):
            rings.prepare(reacher)
        for rule, share in shares(RULES[type(question)]):
            found = attempt(reacher, rule, question, share)
            if isinstance(found, Established):
                return _proved(reacher, question, found)
            if found is not None:
                return Answer("refuted", NAME, runs=found.runs, facts=found.facts)
    except TooManyOrders as many:
        return undecided(str(many), NAME)
    return undecided("none of the rules decides", NAME)


def reacher_of(task: Task) -> Reacher:
    """What earlier questions about the circuit have left, under the limits of this one."""
    reacher: Reacher = task.memory.get("reacher") or Reacher(task)
    task.memory["reacher"] = reacher
    reacher.task, reacher.progress = task, Progress(task.limits)
    return reacher


def shares(rules: list[Rule]) -> Iterator[tuple[Rule, float]]:
    """Rules with the share of the time left that each may take: all of it for the last, which decides everything."""
    return ((rule, 1.0 if rule is rules[-1] else SHARE) for rule in rules)


def attempt(reacher: Reacher, rule: Rule, question: Question, share: float) -> Outcome:
    """What a rule comes to; None when its share of the time is used up. Raises `LimitReached` when all time is."""
    if share == 1.0:
        return rule(reacher, question)
    try:
        with reacher.within(share):
            return rule(reacher, question)
    except LimitReached:
        reacher.progress.tick()
        return None


def _proved(reacher: Reacher, question: Question, found: Established) -> Answer:
    nothing = _nothing_to_range_over(reacher, question)
    proofs = [*found.proofs, *nothing]
    symbolic = bool(proofs or found.arguments)
    certificate: dict[str, Any] = {"kind": "inductive invariant" if symbolic else "structure", "rule": found.rule}
    if not symbolic:
        return Answer("proved", NAME, certificate=certificate)
    evidence = Certificate(reacher.base, reacher.known, proofs, found.arguments)
    evidence.check(reacher.task.limits)
    certificate |= evidence.as_data()
    return Answer("proved", NAME, exercised=not nothing, certificate=certificate, scripts=evidence.scripts())


def _nothing_to_range_over(reacher: Reacher, question: Question) -> list[Proof]:
    """The proof that no reachable state shows that the question had something to range over, if so."""
    wanted = _exercise(reacher, question)
    if wanted is None:
        return []
    found = reacher.reach(reacher.base, wanted, "there is nothing to range over")
    return [found] if isinstance(found, Proof) else []


def _exercise(reacher: Reacher, question: Question) -> Expr | None:
    base = reacher.base
    begins = and_(base.rest, base.input_changes)
    if isinstance(question, Diverges | Flickers):
        return begins
    if isinstance(question, Oscillates):
        return or_(begins, not_(reacher.circuit.is_stable), base.input_changes)
    if isinstance(question, Reaches) and question.only_stable:
        return reacher.circuit.is_stable
    if isinstance(question, Evades):
        return reacher.circuit.resolve(question.source)[0]
    return None


ENGINE = Engine(NAME, rank=30, answers=dict.fromkeys(RULES, answer), apart=True)
