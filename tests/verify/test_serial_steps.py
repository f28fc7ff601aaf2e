"""Leaving out steps that can be taken apart changes neither what is reached nor what can be gone round for ever."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from random_circuits import random_case

from settled.encodings.packed import Words
from settled.models.circuit import Circuit
from settled.models.logic import not_, var
from settled.verify.explicit.replies import Responding, Responses
from settled.verify.explicit.serial_steps import SerialSteps
from settled.verify.limits import Limits


def graphs(circuit: Circuit, word: int) -> tuple[Responses, Responses]:
    limits = Limits()
    serial, packed = SerialSteps(circuit, limits), Responding(circuit)
    return Responses(packed, limits, [word], serial), Responses(packed, limits, [word], None)


def cores(graph: Responses) -> set[frozenset[int]]:
    return {frozenset(graph.vertices[core].tolist()) for core in graph.cores}


def test_reached_states_and_oscillations_are_the_same(share: Callable[[int], int]) -> None:
    fewer = 0
    for seed in range(share(300)):
        circuit, _ = random_case(f"serial {seed}")
        for word in range(0, 1 << len(circuit.signals), 3):
            some, every = graphs(circuit, word)
            assert some.vertices.tolist() == every.vertices.tolist(), (seed, word)
            assert cores(some) == cores(every), (seed, word)
            fewer += len(some.step_edges.source) < len(every.step_edges.source)
    assert fewer > share(100)


def test_nodes_that_read_one_another_switch_together_and_others_one_by_one() -> None:
    pair = {"p": not_(var("q")), "q": not_(var("p")), "r": not_(var("p")), "s": not_(var("a"))}
    steps = SerialSteps(Circuit("pair", ("a",), tuple(pair), pair), Limits())
    p, q, r, s = 2, 4, 8, 16
    assert steps.choices(p | q | r | s).tolist() == [p, q, r, s, p | q]
    assert steps.choices(p | r | s).tolist() == [p, r, s]


def test_exclusive_nodes_do_not_switch_together() -> None:
    pair = {"p": not_(var("q")), "q": not_(var("p"))}
    steps = SerialSteps(Circuit("grants", ("a",), tuple(pair), pair, exclusive=(("p", "q"),)), Limits())
    found: Words = steps.choices(6)
    assert np.array_equal(found, [2, 4])
