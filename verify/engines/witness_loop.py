"""Counting stable states for every input vector: a loop between two SAT solvers, re-checked by z3.

One solver proposes an admitted input vector that no known set of stable internal states covers; the other looks for
stable internal states under it, which then cover all vectors under which they are stable (counterexample-guided
instantiation; Janota and Marques-Silva 2011, recalled). The cover found is a certificate without quantifiers.
"""

from __future__ import annotations

from collections.abc import Iterator
from itertools import combinations

from settled.encodings.clauses import Clauses
from settled.models.circuit import Circuit
from settled.models.logic import Expr, and_, const, not_, or_, rename
from settled.models.states import Run, excited, members
from settled.verify.engines import Engine
from settled.verify.questions import Answer, StableCount, Task
from settled.verify.stable_states import Query

NAME = "SAT with counterexample-guided instantiation, re-checked by z3"
Cover = list[tuple[int, ...]]


class CheckFailed(Exception):
    """z3 does not accept what the SAT solvers found: a fault in this program, never a verdict."""


def count(task: Task, question: StableCount) -> Answer:
    """Whether every admitted vector has between `least` and `most` stable internal states."""
    few = too_few(task, question.least)
    if isinstance(few, int):
        return _refuted(task, few, question)
    many = too_many(task, question.most) if question.most is not None else None
    if many is not None:
        return _refuted(task, many, question)
    _recheck(task, question, few)
    vectors = len({v for group in few for v in group})
    return Answer("proved", NAME, certificate={"kind": "cover by stable internal states", "states": vectors})


def _refuted(task: Task, vector: int, question: StableCount) -> Answer:
    found = list(_stable_under(task, vector, max(question.least, (question.most or 0) + 1)))
    values = {x: vector >> i & 1 for i, x in enumerate(task.circuit.inputs)}
    facts = {"vector": values, "stable_internal_states": len(found)}
    if found:
        runs = tuple(Run(f"stable state {i}", (s,), None, task.circuit.name) for i, s in enumerate(found, 1))
    else:
        runs = (restless(task.circuit, vector),)
    return Answer("refuted", NAME, runs=runs, facts=facts)


def too_few(task: Task, least: int) -> int | Cover:
    """An admitted vector with fewer than `least` stable internal states, or a cover of all vectors."""
    circuit = task.circuit
    proposals = Query()
    copy = proposals.clauses()
    bits = [copy.variable(x) for x in circuit.inputs]
    copy.require(*circuit.resolve(*task.environment.assume))
    cover: Cover = []
    while (model := proposals.true_variables()) is not None:
        task.limits.tick(len(cover), 0)
        vector = sum(1 << i for i, v in enumerate(bits) if v in model)
        found = tuple(_stable_under(task, vector, least))
        if len(found) < least:
            return vector
        cover.append(found)
        copy.require(not_(and_(*(stable_with(circuit, state) for state in found))))
    return cover


def stable_with(circuit: Circuit, state: int) -> Expr:
    """Over the inputs: whether the internal state of `state` is stable."""
    fixed = {n: const(state >> circuit.place[n] & 1) for n in circuit.nodes}
    return rename([circuit.is_stable], fixed)[0]


def _stable_under(task: Task, vector: int, most: int) -> Iterator[int]:
    """Up to `most` stable total states with this input vector."""
    circuit = task.circuit
    query, copy = _stable_copy(task)
    inputs = [copy.variable(x) if vector >> i & 1 else -copy.variable(x) for i, x in enumerate(circuit.inputs)]
    nodes = [copy.variable(n) for n in circuit.nodes]
    round_of = query.fresh()
    for _ in range(most):
        model = query.true_variables([*inputs, round_of])
        if model is None:
            break
        yield vector | sum(1 << circuit.place[n] for n, v in zip(circuit.nodes, nodes, strict=True) if v in model)
        query.solver.add_clause([-round_of, *(-v if v in model else v for v in nodes)])
    query.solver.add_clause([-round_of])


def _stable_copy(task: Task) -> tuple[Query, Clauses]:
    """The solver that knows when the circuit is stable, set up once a task."""
    if "stable" not in task.memory:
        query = Query()
        copy = query.clauses()
        copy.require(task.circuit.is_stable)
        task.memory["stable"] = query, copy
    found: tuple[Query, Clauses] = task.memory["stable"]
    return found


def too_many(task: Task, most: int) -> int | None:
    """An admitted vector with more than `most` stable internal states."""
    circuit = task.circuit
    query = Query()
    copies = [query.clauses() for _ in range(most + 1)]
    copies[0].require(*circuit.resolve(*task.environment.assume))
    for copy in copies:
        for x in circuit.inputs:
            copy.names[x] = copies[0].variable(x)
        copy.require(circuit.is_stable)
    for one, other in combinations(copies, 2):
        _differ(query, [(one.variable(n), other.variable(n)) for n in circuit.nodes])
    model = query.true_variables()
    if model is None:
        return None
    return sum(1 << i for i, x in enumerate(circuit.inputs) if copies[0].variable(x) in model)


def _differ(query: Query, pairs: list[tuple[int, int]]) -> None:
    apart = []
    for a, b in pairs:
        d = query.fresh()
        apart.append(d)
        query.solver.append_formula([[-d, a, b], [-d, -a, -b]])
    query.solver.add_clause(apart)


def restless(circuit: Circuit, vector: int) -> Run:
    """A fair run that goes round, under a vector without a stable state: from all nodes 0.

    Every excited node switches at once (`any`), or the one excited for longest does (`one`, or exclusive pairs).
    """
    seen: dict[tuple[int, tuple[int, ...]], int] = {}
    states = [vector]
    queue: tuple[int, ...] = ()
    while (states[-1], queue) not in seen:
        seen[states[-1], queue] = len(states) - 1
        now = excited(circuit, states[-1])
        if circuit.winners == "any" and not circuit.exclusive:
            states.append(states[-1] ^ now)
        else:
            queue = tuple(b for b in queue if b & now) + tuple(b for b in members(now) if b not in queue)
            states.append(states[-1] ^ queue[0])
            queue = queue[1:]
    return Run("it goes round", tuple(states[:-1]), seen[states[-1], queue], circuit.name)


def _recheck(task: Task, question: StableCount, cover: Cover) -> None:
    """Let z3 confirm the cover, and the absence of `most` + 1 stable states."""
    import z3

    from settled.encodings.excitation import copy, formulas, stable

    circuit = task.circuit
    present = copy(circuit, "")
    solver = z3.Solver()
    solver.add(*formulas(circuit.resolve(*task.environment.assume), present))
    covered = or_(*(and_(*(stable_with(circuit, s) for s in found)) for found in cover))
    if any(len(set(found)) < question.least for found in cover):
        raise CheckFailed("a set of the cover repeats a state")
    solver.push()
    solver.add(z3.Not(formulas([covered], present)[0]))
    outcome = [solver.check()]
    solver.pop()
    if question.most is not None:
        copies = [copy(circuit, f"_{i}") | {x: present[x] for x in circuit.inputs} for i in range(question.most + 1)]
        solver.add(*(stable(circuit, c) for c in copies))
        solver.add(*(z3.Or(*(one[n] != two[n] for n in circuit.nodes)) for one, two in combinations(copies, 2)))
        outcome.append(solver.check())
    if any(str(o) != "unsat" for o in outcome):
        raise CheckFailed(f"z3 answers {', '.join(map(str, outcome))} where unsat was due")


ENGINE = Engine(NAME, rank=5, answers={StableCount: count})
