"""The expression for dead ends against the executable meaning, in every total state that the assumptions admit."""

from __future__ import annotations

from dataclasses import replace

import pytest
from random_circuits import random_case

from settled.encodings.dead_ends import dead_end
from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.logic import and_, not_, or_, topological, var, xor
from settled.models.states import Behaviour, Situation, value


def disagreements(circuit: Circuit, environment: Environment) -> tuple[list[int], int]:
    """States in which the expression is wrong, and how many dead ends there are."""
    behaviour, dead = Behaviour(circuit, environment), dead_end(circuit, environment)
    admitted = [s for s in range(1 << len(circuit.signals)) if behaviour.admits(s & circuit.input_mask)]
    truth = {s: next(behaviour.moves(Situation(s)), None) is None for s in admitted}
    return [s for s in admitted if bool(value(circuit, [dead], s)[0]) != truth[s]], sum(truth.values())


@pytest.mark.parametrize("changes", ["single", "simultaneous", "burst", "input-output"])
def test_dead_ends_are_where_nothing_can_move(changes: str) -> None:
    mode = {"mode": "input-output"} if changes == "input-output" else {"mode": "fundamental", "changes": changes}
    seen = 0
    for seed in range(60):
        circuit, environment = random_case(f"dead {seed}", nodes=3, **mode)
        wrong, number = disagreements(circuit, environment)
        assert not wrong, seed
        seen += number
    assert seen > 20


def test_inputs_that_can_only_change_together() -> None:
    """Three inputs of odd parity: none may change alone, two may at once, unless the guard of one forbids it."""
    follower = Circuit("follower", ("a", "b", "c"), ("y",), {"y": var("a")}, winners="any")
    odd = Environment(mode="input-output", assume=(xor(var("a"), var("b"), var("c")),))
    held = replace(odd, guards={"a": Guard(var("y"), var("y")), "b": Guard(not_(var("y")), not_(var("y")))})
    never = {x: Guard(and_(), and_()) for x in "a"} | {x: Guard(or_(), or_()) for x in "bc"}
    for environment, dead_ends in ((odd, 0), (replace(odd, guards=never), 4), (held, 0)):
        for circuit in (follower, replace(follower, winners="one")):
            wrong, number = disagreements(circuit, environment)
            assert not wrong
            assert number == (4 if circuit.winners == "one" else dead_ends)


def test_many_inputs_of_which_one_at_a_time_is_high_stay_small() -> None:
    names = tuple(f"r{i}" for i in range(40))
    pairs = [not_(and_(var(x), var(y))) for i, x in enumerate(names) for y in names[:i]]
    circuit = Circuit("many", names, ("y",), {"y": or_(*map(var, names))})
    environment = Environment(changes="simultaneous", assume=tuple(pairs), guards={x: Guard(var("y")) for x in names})
    assert len(list(topological([dead_end(circuit, environment)]))) < 2_000
