"""Questions about single states and single steps: they are questions of reachability as they stand."""

from __future__ import annotations

from dataclasses import replace

from settled.encodings.dead_ends import dead_end
from settled.encodings.system import System
from settled.models.logic import Expr, and_, evaluate, not_, or_, rename, support
from settled.models.states import Run, excited, members
from settled.verify.questions import Deadlocks, Question, Reaches, Withdraws
from settled.verify.rules import DIRECT, Established, Failure, Outcome, Rule
from settled.verify.symbolic.certificates import Proof
from settled.verify.symbolic.reach import Reacher, Trail


def reaches(reacher: Reacher, question: Reaches) -> Outcome:
    """`bad` is reachable, or reachable in a stable state, by definition."""
    circuit = reacher.circuit
    (bad,) = circuit.resolve(question.bad)
    wanted = and_(bad, circuit.is_stable) if question.only_stable else bad
    return _direct(reacher, wanted, "the state asked for")


def deadlocks(reacher: Reacher, _: Deadlocks) -> Outcome:
    """A dead end is a total state with nothing outstanding in which the expression for dead ends is true."""
    base = reacher.base
    bad = and_(dead_end(reacher.circuit, reacher.environment), base.rest)
    return _direct(reacher, bad, "a dead end")


def _direct(reacher: Reacher, bad: Expr, what: str) -> Outcome:
    found = reacher.reach(reacher.base, bad, f"no run reaches {what}")
    if isinstance(found, Proof):
        return Established(DIRECT, (found,))
    return Failure((reacher.shortest(found).run("the run to it"),))


def withdrawal(made: System, excepted: tuple[str, ...] = ()) -> Expr:
    """Whether some node is excited, does not switch in the step that is chosen, and is not excited after it."""
    circuit = made.circuit
    found = []
    for n in circuit.nodes:
        if n not in excepted:
            now = circuit.is_excited[n]
            others = {s: made.next_value(s) for s in support(now) if s != n}
            found.append(and_(now, not_(rename([now], others)[0])))
    return or_(*found)


def withdraws(reacher: Reacher, question: Withdraws) -> Outcome:
    """A step takes away an excitation: a state and a choice of step, both existential, so again a bad state.

    A node that switches in the step and one that holds are told apart by the next value of every other node.
    """
    made = reacher.base
    bad = withdrawal(made, question.excepted)
    found = reacher.reach(made, bad, "no step takes away the excitation of a node that does not switch")
    if isinstance(found, Proof):
        return Established(DIRECT, (found,))
    return Failure((_with_step(reacher, reacher.shortest(found), bad, question),))


def _with_step(reacher: Reacher, trail: Trail, bad: Expr, question: Withdraws) -> Run:
    """The run to the state, and the offending step, in which nothing moves that need not."""
    made, circuit = trail.system, reacher.circuit
    last = dict(trail.states[-1])
    chosen = reacher.choices(made, last, bad)
    moves = {s: made.next_value(s) for s in circuit.signals}
    free = {**dict.fromkeys(made.selectors, 0), **{f"{s} follows": last[s] for s in circuit.signals}}
    after = dict(zip(moves, evaluate(list(moves.values()), {**free, **chosen, **last}), strict=True))
    run = trail.run("the run to it")
    (then,) = replace(trail, states=({**last, **after},)).run("").states
    return Run(run.title, (*run.states, _fewest(reacher, run.states[-1], then, question)), None, circuit.name)


def _fewest(reacher: Reacher, before: int, after: int, question: Withdraws) -> int:
    """The target of the step with switches of nodes left out as long as it takes an excitation away."""
    circuit = reacher.circuit
    counts = sum(1 << circuit.place[n] for n in circuit.nodes if n not in question.excepted)
    for switched in members((before ^ after) & ~circuit.input_mask):
        fewer = after ^ switched
        if excited(circuit, before) & ~(before ^ fewer) & ~excited(circuit, fewer) & counts:
            after = fewer
    return after


RULES: dict[type[Question], list[Rule]] = {Reaches: [reaches], Deadlocks: [deadlocks], Withdraws: [withdraws]}
