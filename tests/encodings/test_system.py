"""The one-copy transition system and the two-copy moves against the executable meaning, state by state."""

from __future__ import annotations

from collections.abc import Callable, Iterable
from dataclasses import replace
from typing import Any

import pytest
import z3
from pysat.solvers import Solver
from random_circuits import random_case

from settled.encodings.clauses import Clauses
from settled.encodings.excitation import formulas
from settled.encodings.moves import begins, moves
from settled.encodings.system import Restraint, System, TooManyOrders, after, outstanding, system
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import FALSE, TRUE, and_, not_, or_, var
from settled.models.states import Behaviour, Situation

Word = int
MODES = {"single": {}, "simultaneous": {}, "burst": {}, "input-output": {"mode": "input-output"}}


class Enumerated:
    """States and steps of a system, enumerated by SAT; a state is packed in the order of the variables."""

    def __init__(self, made: System) -> None:
        self.solver, self.count = Solver(name="cadical153"), 0
        clauses = Clauses(self.fresh, self.solver.add_clause)
        self.now = [clauses.variable(v) for v in made.variables]
        self.then = [self.fresh() for _ in made.variables]
        for name, then in zip(made.variables, self.then, strict=True):
            zero, one = made.may[name]
            self.solver.add_clause([-then, clauses.literal(one)])
            self.solver.add_clause([then, clauses.literal(zero)])
        self.start = clauses.literal(made.start)

    def fresh(self) -> int:
        self.count += 1
        return self.count

    def starts(self) -> set[Word]:
        return self._all([self.start], self.now)

    def after(self, state: Word) -> set[Word]:
        return self._all([v if state >> i & 1 else -v for i, v in enumerate(self.now)], self.then)

    def _all(self, assumptions: list[int], over: list[int]) -> set[Word]:
        asked, found = self.fresh(), set()
        while self.solver.solve(assumptions=[*assumptions, asked]):
            true = {v for v in self.solver.get_model() if v > 0}
            found.add(sum(1 << i for i, v in enumerate(over) if v in true))
            self.solver.add_clause([-asked, *(-v if v in true else v for v in over)])
        self.solver.add_clause([-asked])
        return found


class Formulated:
    """The same by z3 from the two-copy formulas."""

    def __init__(self, made: System) -> None:
        self.now = {v: z3.Bool(f"n{i}") for i, v in enumerate(made.variables)}
        self.then = {v: z3.Bool(f"m{i}") for i, v in enumerate(made.variables)}
        self.moves, self.begins = z3.Solver(), z3.Solver()
        values = {**self.now, **{after(v): x for v, x in self.then.items()}}
        self.moves.add(*formulas([moves(made.circuit, made.environment, made.restraint)], values))
        self.begins.add(*formulas([begins(made.circuit, made.environment)], values))

    def starts(self) -> set[Word]:
        return _models(self.begins, list(self.now.values()))

    def after(self, state: Word) -> set[Word]:
        self.moves.push()
        self.moves.add(*(x if state >> i & 1 else z3.Not(x) for i, x in enumerate(self.now.values())))
        found = _models(self.moves, list(self.then.values()))
        self.moves.pop()
        return found


def _models(solver: z3.Solver, over: list[z3.BoolRef]) -> set[Word]:
    found = set()
    solver.push()
    while solver.check() == z3.sat:
        values = [z3.is_true(solver.model().eval(x, model_completion=True)) for x in over]
        found.add(sum(1 << i for i, v in enumerate(values) if v))
        solver.add(z3.Or(*(x != v for x, v in zip(over, values, strict=True))))
    solver.pop()
    return found


def meaning(behaviour: Behaviour, state: Word) -> set[Word]:
    """What the executable meaning says a state moves to, and the state itself."""
    low = len(behaviour.circuit.signals)
    at = Situation(state & (1 << low) - 1, state >> low)
    return {then.state | then.outstanding << low for then in behaviour.moves(at)} | {state}


def agree(behaviour: Behaviour, starts: Iterable[Word], steps: Callable[[Word], set[Word]]) -> int:
    """Compare every reachable state's moves; how many there are."""
    expected = {s for s in range(1 << len(behaviour.circuit.signals)) if behaviour.may_start(s)}
    assert set(starts) == expected
    todo, seen = sorted(expected), set(expected)
    while todo:
        state = todo.pop()
        found = steps(state)
        assert found == meaning(behaviour, state), bin(state)
        todo += found - seen
        seen |= found
    return len(seen)


def some_case(seed: str, winners: str, **limits: Any) -> tuple[Circuit, Environment]:
    """A random case; with `pairs` any number of nodes switch, but only one of each exclusive pair."""
    if winners != "pairs":
        return random_case(seed, winners=winners, **limits)
    circuit, environment = random_case(seed, winners="any", **limits)
    pairs = tuple(zip(circuit.nodes[::2], circuit.nodes[1::2], strict=False))
    return replace(circuit, exclusive=pairs), environment


@pytest.mark.parametrize("changes", MODES)
@pytest.mark.parametrize("winners", ["any", "one", "pairs"])
def test_steps_of_the_system_are_the_moves_of_the_circuit(
    changes: str, winners: str, share: Callable[[int], int]
) -> None:
    where = MODES[changes] or {"mode": "fundamental", "changes": changes}
    total = 0
    for seed in range(share(80)):
        circuit, environment = some_case(f"system {seed}", winners, **where)
        found = Enumerated(system(circuit, environment))
        total += agree(Behaviour(circuit, environment), found.starts(), found.after)
    assert total > share(600)


@pytest.mark.parametrize("changes", MODES)
@pytest.mark.parametrize("winners", ["any", "one", "pairs"])
def test_the_two_copy_formula_has_the_same_moves(changes: str, winners: str, share: Callable[[int], int]) -> None:
    where = MODES[changes] or {"mode": "fundamental", "changes": changes}
    for seed in range(share(16)):
        circuit, environment = some_case(f"moves {seed}", winners, nodes=4, **where)
        found = Formulated(system(circuit, environment))
        agree(Behaviour(circuit, environment), found.starts(), found.after)


ORDERS = (
    [or_(not_(var("a")), var("b")), or_(not_(var("b")), var("c"))],
    [not_(and_(var("a"), var("b"))), not_(and_(var("b"), var("c"))), not_(and_(var("a"), var("c")))],
    [or_(and_(var("a"), var("b")), not_(var("c"))), or_(var("a"), not_(var("b")))],
)


@pytest.mark.parametrize("assume", ORDERS)
def test_a_burst_takes_only_orders_that_can_be_finished(assume: list[object]) -> None:
    circuit = Circuit("c", ("a", "b", "c"), ("q",), {"q": or_(and_(var("a"), var("b")), and_(var("c"), var("q")))})
    environment = Environment(changes="burst", assume=tuple(assume))  # type: ignore[arg-type]
    made = system(circuit, environment)
    behaviour = Behaviour(circuit, environment)
    for found in (Enumerated(made), Formulated(made)):
        assert agree(behaviour, found.starts(), found.after) > 10


def test_an_assumption_over_many_inputs_is_refused_under_burst() -> None:
    names = tuple(f"x{i}" for i in range(9))
    circuit = Circuit("c", names, ("q",), {"q": var("x0")})
    with pytest.raises(TooManyOrders, match="9 inputs"):
        system(circuit, Environment(changes="burst", assume=(or_(*map(var, names)),)))


def test_restraints_keep_signals_and_changes_back() -> None:
    circuit = Circuit("c", ("a",), ("p", "q"), {"p": var("a"), "q": var("a")})
    environment = Environment(start={"a": 0, "p": 0, "q": 0})
    for restraint, reached in (
        (Restraint(picks=FALSE), {0b000}),
        (Restraint({"q": TRUE}), {0b000, 0b001, 0b011}),
        (Restraint({"q": not_(var("p"))}), {0b000, 0b001, 0b011, 0b111, 0b110, 0b100, 0b010}),
    ):
        made = system(circuit, environment, restraint)
        for found in (Enumerated(made), Formulated(made)):
            seen, todo = set(found.starts()), list(found.starts())
            while todo:
                fresh = found.after(todo.pop()) - seen
                seen |= fresh
                todo += fresh
            assert seen == reached


def test_names_of_variables_do_not_clash_with_signals() -> None:
    made = system(Circuit("c", ("a",), ("q",), {"q": var("a")}), Environment(changes="burst"))
    assert made.variables == ("a", "q", outstanding("a"))
    assert all(" " in name for name in (*made.selectors, outstanding("a")))
