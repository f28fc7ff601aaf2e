"""Equivalence without search: like-named nodes with functionally equal excitations make one and the same circuit.

Then every start state has itself for a partner. Such a pair is good as soon as the circuit settles and no input change
has two ends, so both are asked of it; a circuit whose races leave its outputs open is not equivalent even to itself.
"""

from __future__ import annotations

from dataclasses import replace

from settled.models.circuit import Circuit
from settled.models.logic import Expr, or_, xor
from settled.verify.engines import Engine, decide
from settled.verify.engines.witness_loop import CheckFailed
from settled.verify.questions import Answer, Differs, Diverges, Oscillates, Question, Task, undecided
from settled.verify.stable_states import Query

NAME = "equal excitations of like-named nodes, by SAT, re-checked by z3"


def differs(task: Task, question: Differs) -> Answer:
    """`proved` when both circuits are the same under their names, settle, and have no critical race."""
    circuit, other = task.circuit, question.other
    if set(circuit.nodes) != set(other.nodes) or circuit.winners != other.winners:
        return undecided("the circuits have different nodes or switching rules", NAME)
    if set(map(frozenset, circuit.exclusive)) != set(map(frozenset, other.exclusive)):
        return undecided("the circuits have different mutual-exclusion elements", NAME)
    unlike = differences(circuit, question)
    name = first_true(task, unlike)
    if name is not None:
        return undecided(f"`{name}` is not the same function in both circuits", NAME)
    found = undecided("", NAME)
    needed: tuple[Question, ...] = (Oscillates(), Diverges())
    half = replace(task, limits=replace(task.limits, seconds=task.limits.spent() + task.limits.left() / 2))
    for asked in needed:
        found = decide(half, asked)
        if found.verdict != "proved":
            return undecided("the circuit does not settle, or an input change of it has several ends", NAME)
    recheck(task, unlike)
    certificate = {"kind": "equal excitations of like-named nodes", "nodes": len(circuit.nodes)}
    return Answer("proved", NAME, ranged=found.ranged, exercised=found.exercised, certificate=certificate)


def differences(circuit: Circuit, question: Differs) -> dict[str, Expr]:
    """By node and compared output, where the two circuits give it different functions; not those written alike."""
    other = question.other
    pairs = {n: (circuit.excitation[n], other.excitation[n]) for n in circuit.nodes}
    pairs |= {f"output {z}": (circuit.signal(z), other.signal(z)) for z in question.outputs}
    return {name: xor(a, b) for name, (a, b) in pairs.items() if a is not b}


def first_true(task: Task, conditions: dict[str, Expr]) -> str | None:
    """The first of the conditions that some total state with an admitted input vector satisfies; one SAT call each."""
    query = Query()
    copy = query.clauses()
    copy.require(*task.circuit.resolve(*task.environment.assume))
    for name, condition in conditions.items():
        task.limits.tick(0, 0)
        if query.true_variables([copy.literal(condition)]) is not None:
            return name
    return None


def recheck(task: Task, conditions: dict[str, Expr]) -> None:
    """Let z3 confirm that no condition can be true. Raises `CheckFailed`."""
    import z3

    from settled.encodings.excitation import copy, formulas

    present = copy(task.circuit, "")
    solver = z3.Solver()
    solver.add(*formulas([*task.circuit.resolve(*task.environment.assume), or_(*conditions.values())], present))
    outcome = solver.check()
    if str(outcome) != "unsat":
        raise CheckFailed(f"z3 answers {outcome} where unsat was due")


ENGINE = Engine(NAME, rank=4, answers={Differs: differs})
"""Before the search over pairs: an answer here costs no enumeration of pairs."""
