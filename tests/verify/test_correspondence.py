"""Refactored circuits are proved equivalent by corresponding nodes, whatever their nodes are called and made of."""

from __future__ import annotations

from dataclasses import replace

import pytest
from refactored import ENVIRONMENT, control_block, refactored

from settled.encodings.delays import place
from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.logic import Expr, and_, ite, not_, or_, var, xor
from settled.verify.engines.correspondence import differs
from settled.verify.limits import Limits
from settled.verify.questions import Answer, Differs, Task

A, B, C, Q, P = map(var, "abcqp")


def circuit(name: str, outputs: dict[str, Expr] | None = None, **excitation: Expr) -> Circuit:
    return Circuit(name, ("a", "b"), tuple(excitation), excitation, ("z",), outputs or {"z": Q})


def compared(one: Circuit, two: Circuit, environment: Environment = Environment()) -> Answer:  # noqa: B008
    return differs(Task(one, environment, Limits()), Differs(two, one.outputs))


LATCH = circuit("latch", q=or_(and_(A, B), and_(Q, not_(A)), and_(B, Q)))


def test_like_named_nodes_with_equal_functions_correspond() -> None:
    other = circuit("other", q=ite(A, B, Q))
    answer = compared(LATCH, replace(other, excitation={"q": or_(ite(A, B, Q), and_(B, Q))}))
    assert answer.verdict == "proved" and answer.exercised
    assert answer.certificate == {"kind": "cut correspondence", "pairs": [["q", "=", "q"]]}


def test_a_node_may_correspond_to_its_inverse_under_another_name() -> None:
    n = var("n")
    inverse = not_(or_(and_(A, B), and_(not_(n), not_(A)), and_(B, not_(n))))
    answer = compared(LATCH, circuit("other", {"z": not_(n)}, n=inverse))
    assert answer.verdict == "proved" and answer.certificate is not None
    assert answer.certificate["pairs"] == [["q", "~", "n"]]


def test_names_that_mislead_are_not_believed() -> None:
    one = replace(LATCH, inputs=("a", "b", "c"), nodes=("q", "p"), excitation={**LATCH.excitation, "p": xor(Q, C)})
    swapped = {"p": or_(and_(A, B), and_(P, not_(A)), and_(B, P)), "q": xor(P, C)}
    two = replace(one, name="other", excitation=swapped, defined={"z": P})
    answer = compared(one, two)
    assert answer.verdict == "proved" and answer.certificate is not None
    assert answer.certificate["pairs"] == [["q", "=", "p"]]


def test_a_circuit_with_a_race_is_not_proved_equivalent_to_itself() -> None:
    racing = circuit("racing", q=not_(or_(A, P)), p=not_(or_(B, Q)))
    both = Environment(changes="simultaneous")
    answer = compared(racing, replace(racing, name="other"), both)
    assert answer.verdict == "undecided" and "it is not proved that racing settles" in (answer.reason or "")


def test_guards_and_start_are_read_over_the_corresponding_nodes() -> None:
    racing = circuit("original", q=not_(or_(A, P)), p=not_(or_(B, Q)))
    inputs = {"a": Guard(rises=not_(B)), "b": Guard(rises=and_(not_(A), Q))}
    rules = Environment(guards=inputs, start={"q": 1, "p": 0}, assume=(not_(and_(A, B)),))
    other = circuit("other", {"z": var("s")}, s=not_(or_(A, var("t"))), t=not_(or_(B, var("s"))))
    assert compared(racing, other, rules).verdict == "proved"


def test_different_functions_are_not_proved() -> None:
    other = circuit("other", q=or_(and_(A, B), and_(Q, not_(A)), and_(not_(B), Q)))
    assert compared(LATCH, other).verdict == "undecided"


@pytest.mark.parametrize("start", [ENVIRONMENT.start, {}])
@pytest.mark.parametrize("seed", [1, 2])
def test_a_control_block_is_equivalent_to_its_refactored_self(seed: int, start: dict[str, int]) -> None:
    netlist = control_block(90, seed)
    one, two = place(netlist, "gate"), place(refactored(netlist, seed), "gate")
    answer = compared(one, two, replace(ENVIRONMENT, start=start))
    assert answer.verdict == "proved" and answer.certificate is not None
    assert len(answer.certificate["pairs"]) == 8


def test_different_delay_models_may_be_compared() -> None:
    netlist = control_block(60)
    answer = compared(place(netlist, "gate"), place(refactored(netlist), "feedback"), ENVIRONMENT)
    assert answer.verdict == "proved"
