"""The numpy, z3 and clause encodings say the same as the executable meaning, on random circuits."""

from __future__ import annotations

import numpy as np
import pytest
import z3
from pysat.solvers import Solver
from random_circuits import random_case

from settled.encodings import excitation
from settled.encodings.clauses import Clauses
from settled.encodings.packed import Packed
from settled.models.environment import Environment
from settled.models.logic import evaluate
from settled.models.states import Behaviour, Situation, excited, successors, unpack
from settled.verify.explicit.graph import Graph
from settled.verify.limits import Limits


@pytest.mark.parametrize("mode", ["fundamental", "input-output"])
def test_numpy_moves_are_the_executable_moves(mode: str) -> None:
    for seed in range(250):
        circuit, environment = random_case(f"moves {seed}", mode=mode)
        packed, behaviour = Packed(circuit, environment), Behaviour(circuit, environment)
        graph = Graph(packed, Limits())
        low, mask = packed.state_bits, int(packed.state_mask)
        source, target = graph.moves(graph.vertices)
        found: dict[int, set[int]] = {}
        for s, t in zip(source.tolist(), target.tolist(), strict=True):
            found.setdefault(s, set()).add(t)
        for i, word in enumerate(graph.vertices.tolist()):
            expected = {s.state | s.outstanding << low for s in behaviour.moves(Situation(word & mask, word >> low))}
            assert found.get(i, set()) == expected, (seed, word)


@pytest.mark.parametrize("mode", ["fundamental", "input-output"])
def test_a_move_to_a_given_state_is_one_of_all_moves(mode: str) -> None:
    for seed in range(50):
        circuit, environment = random_case(f"moves to {seed}", mode=mode, nodes=4)
        behaviour = Behaviour(circuit, environment)
        todo = [Situation(s) for s in range(1 << len(circuit.signals)) if behaviour.may_start(s)]
        seen = set(todo)
        while todo:
            at = todo.pop()
            moves = set(behaviour.moves(at))
            for state in range(1 << len(circuit.signals)):
                assert behaviour.moves_to(at, state) == {s for s in moves if s.state == state}, (seed, at, state)
            todo += moves - seen
            seen |= moves


def test_numpy_starts_are_the_executable_starts() -> None:
    for seed in range(200):
        circuit, environment = random_case(f"starts {seed}")
        behaviour = Behaviour(circuit, environment)
        expected = [s for s in range(1 << len(circuit.signals)) if behaviour.may_start(s)]
        graph = Graph(Packed(circuit, environment), Limits())
        assert graph.search.layers[0, 0].tolist() == expected, seed


def test_z3_steps_are_the_executable_steps() -> None:
    for seed in range(60):
        circuit, _ = random_case(f"z3 {seed}", nodes=3, inputs=2)
        present, following = excitation.copy(circuit, ""), excitation.copy(circuit, "'")
        solver = z3.Solver()
        solver.add(excitation.step(circuit, present, following))
        for state in range(1 << len(circuit.signals)):
            solver.push()
            solver.add(*(present[s] == bool(v) for s, v in unpack(circuit, state).items()))
            found = set()
            while solver.check() == z3.sat:
                model = solver.model()
                after = {s: z3.is_true(model.eval(v, model_completion=True)) for s, v in following.items()}
                found.add(sum(1 << circuit.place[s] for s, v in after.items() if v))
                solver.add(z3.Or(*(following[s] != v for s, v in after.items())))
            solver.pop()
            assert found == set(successors(circuit, state)), seed


def test_clauses_have_the_models_of_the_expression() -> None:
    for seed in range(150):
        circuit, _ = random_case(f"clauses {seed}")
        with Solver(name="glucose4") as solver:
            counter = iter(range(1, 10_000))
            copy = Clauses(lambda: next(counter), solver.add_clause)  # noqa: B023
            bits = [copy.variable(s) for s in circuit.signals]
            wanted = [copy.literal(e) for e in circuit.is_excited.values()] + [copy.literal(circuit.is_stable)]
            for state in range(1 << len(bits)):
                given = [b if state >> i & 1 else -b for i, b in enumerate(bits)]
                assert solver.solve(assumptions=given)
                model = set(solver.get_model())
                values = evaluate([*circuit.is_excited.values(), circuit.is_stable], unpack(circuit, state))
                assert [lit in model for lit in wanted] == [bool(v) for v in values], seed


def test_excited_nodes_are_those_of_the_definition() -> None:
    for seed in range(100):
        circuit, _ = random_case(f"excited {seed}")
        every = np.arange(1 << len(circuit.signals), dtype=np.uint64)
        found = Packed(circuit, Environment()).excited(every)
        assert found.tolist() == [excited(circuit, int(s)) for s in every]
