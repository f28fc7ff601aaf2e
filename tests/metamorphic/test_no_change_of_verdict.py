"""Changes that mean nothing change no verdict: other names, another order, an unread gate, a double inversion."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import replace
from typing import Any

import pytest
from judging import session_of
from random_circuits import Question, random_question

from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.logic import Expr, and_, not_, or_, rebuild, substitute, var
from settled.models.specification import Property

CHECKS = ("stable-states", "settles", "race-free", "hazard-free", "essential-hazard-free", "always", "never")


def mapped(question: Question, on: Callable[[list[Expr]], list[Expr]], name: Callable[[str], str] = str) -> Question:
    """The question with every expression passed through `on` and every name through `name`."""
    circuit, environment, options = question

    def table(expressions: Mapping[str, Expr]) -> dict[str, Expr]:
        return {name(n): on([e])[0] for n, e in expressions.items()}

    def option(value: Any) -> Any:
        if isinstance(value, Expr):
            return on([value])[0]
        return tuple(map(name, value)) if isinstance(value, (tuple, list)) else value

    changed = Circuit(
        name=circuit.name,
        inputs=tuple(map(name, circuit.inputs)),
        nodes=tuple(map(name, circuit.nodes)),
        excitation=table(circuit.excitation),
        outputs=tuple(map(name, circuit.outputs)),
        defined=table(circuit.defined),
        winners=circuit.winners,
    )
    surroundings = replace(
        environment,
        assume=tuple(on(list(environment.assume))),
        start={name(n): v for n, v in environment.start.items()},
        guards={name(n): Guard(*on([g.rises, g.falls]), g.must) for n, g in environment.guards.items()},
    )
    return Question(changed, surroundings, {k: option(v) for k, v in options.items()})


def renamed(question: Question) -> Question:
    def leaf(e: Expr) -> Expr:
        return e if e.op == "stable" else substitute_name(e, f"\\{e.name}#")

    return mapped(question, lambda es: substitute(es, leaf), lambda n: f"\\{n}#")


def substitute_name(e: Expr, name: str) -> Expr:
    from settled.models.logic import excited

    return var(name) if e.op == "var" else excited(name)


def reordered(question: Question) -> Question:
    circuit = question.circuit
    turned = replace(
        circuit,
        inputs=circuit.inputs[::-1],
        nodes=circuit.nodes[::-1],
        excitation=dict(reversed(circuit.excitation.items())),
    )
    return question._replace(circuit=turned)


def with_double_inversion(question: Question) -> Question:
    def twice(e: Expr) -> Expr:
        """De Morgan on every AND, so that the function is the same and the expression is not."""
        from settled.models.logic import fold

        def visit(part: Expr, args: list[Expr]) -> Expr:
            if part.op == "and":
                return not_(or_(*(not_(a) for a in args)))
            return rebuild(part, args)

        return fold([e], visit)[0]

    return mapped(question, lambda es: [twice(e) for e in es])


def with_unread_gate(question: Question) -> Question:
    """One more node that nobody reads and that follows an input (or rests at 0)."""
    circuit, environment, options = question
    body = and_(*(var(x) for x in circuit.inputs[:1]), var("extra")) if circuit.inputs else var("extra")
    more = replace(circuit, nodes=(*circuit.nodes, "extra"), excitation={**circuit.excitation, "extra": body})
    return Question(more, replace(environment, start={**environment.start, "extra": 0}), options)


def verdict(question: Question, check: str) -> tuple[str, bool]:
    session = session_of(question.circuit, question.environment, (Property(check, check, question.options),))
    (result,) = session.results()
    return result.verdict, result.vacuous


@pytest.mark.parametrize("change", [renamed, reordered, with_double_inversion, with_unread_gate])
@pytest.mark.parametrize("check", CHECKS)
def test_the_verdict_stays(check: str, change: Callable[[Question], Question]) -> None:
    for seed in range(30):
        question = random_question(f"same {seed}", check)
        if change is with_unread_gate and check == "stable-states":
            question = Question(question.circuit, Environment(), {"at-least": 1})
        assert verdict(question, check) == verdict(change(question), check), seed
