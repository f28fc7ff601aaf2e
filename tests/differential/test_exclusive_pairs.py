"""Circuits with pairs of nodes that exclude one another in a step, as the grants of an arbiter do.

Verdicts against the naive oracle, moves of every layer against the executable meaning.
"""

from __future__ import annotations

from collections import Counter
from dataclasses import replace
from random import Random

import numpy as np
import pytest
import z3
from judging import complaints
from random_circuits import RACY, Question, random_question

from settled.encodings.excitation import copy, step
from settled.encodings.packed import Packed
from settled.models.circuit import Circuit
from settled.models.states import Behaviour, Situation, successors
from settled.verify.explicit.graph import Graph
from settled.verify.limits import Limits

CHECKS = ("settles", "race-free", "speed-independent", "leads-to", "never", "stable-states")
CASES = 60


def paired(seed: int, check: str, **limits: object) -> Question:
    """A random question about a circuit with one or two exclusive pairs."""
    question = random_question(f"pairs {seed}", check, winners="any", styles=RACY, **limits)
    nodes = list(question.circuit.nodes)
    Random(seed).shuffle(nodes)
    pairs = tuple(zip(nodes[::2], nodes[1::2], strict=False))
    return question._replace(circuit=replace(question.circuit, exclusive=pairs))


@pytest.mark.parametrize("check", CHECKS)
def test_every_verdict_is_the_oracles(check: str) -> None:
    verdicts: Counter[str] = Counter()
    for seed in range(CASES):
        question = paired(seed, check)
        found, verdict = complaints(*question[:2], check, question.options)
        assert not found, (seed, found)
        verdicts[verdict] += 1
    assert min(verdicts["proved"], verdicts["refuted"]) > 5, verdicts


def test_exclusion_makes_a_difference() -> None:
    def moves(circuit: Circuit, question: Question) -> int:
        return len(Graph(Packed(circuit, question.environment), Limits()).step_edges.source)

    fewer = 0
    for seed in range(60):
        question = paired(seed, "never", mode="input-output")
        free = replace(question.circuit, exclusive=())
        fewer += moves(question.circuit, question) < moves(free, question)
    assert fewer > 10


@pytest.mark.parametrize("changes", ["single", "simultaneous", "burst", None])
def test_packed_moves_are_the_moves_of_the_meaning(changes: str | None) -> None:
    limits = {"mode": "fundamental", "changes": changes} if changes else {"mode": "input-output"}
    for seed in range(40):
        question = paired(seed, "never", **limits)
        graph = Graph(Packed(*question[:2]), Limits())
        behaviour = Behaviour(*question[:2])
        low, mask = graph.packed.state_bits, int(graph.packed.state_mask)
        for word in graph.vertices[:40].tolist():
            after = {s.state | s.outstanding << low for s in behaviour.moves(Situation(word & mask, word >> low))}
            assert set(graph.moves(np.array([word], np.uint64))[1].tolist()) == after, seed


def test_the_formula_of_a_step_is_the_step_of_the_meaning() -> None:
    for seed in range(12):
        circuit = paired(seed, "never", nodes=3, inputs=1).circuit
        present, following = copy(circuit, ""), copy(circuit, "'")
        solver = z3.Solver()
        solver.add(step(circuit, present, following))
        for state in range(1 << len(circuit.signals)):
            after = set(successors(circuit, state))
            for target in range(1 << len(circuit.signals)):
                both = (present, state), (following, target)
                values = [v[s] == bool(word >> circuit.place[s] & 1) for v, word in both for s in circuit.signals]
                assert (solver.check(*values) == z3.sat) == (target in after)
