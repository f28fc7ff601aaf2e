"""Stable total states by SAT: enumeration of them, and tests whether the input's own conditions can be met."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from pysat.solvers import Solver

from settled.encodings.clauses import Clauses
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, not_

SOLVER = "cadical153"


class Query:
    """One SAT solver over one or more copies of a circuit."""

    def __init__(self) -> None:
        self.solver = Solver(name=SOLVER)
        self._count = 0

    def fresh(self) -> int:
        """A new variable."""
        self._count += 1
        return self._count

    def clauses(self) -> Clauses:
        """A new copy: its signals get variables of their own."""
        return Clauses(self.fresh, self.solver.add_clause)

    def true_variables(self, assumptions: Sequence[int] = ()) -> set[int] | None:
        """The variables that are true in a model, or None when there is none."""
        if not self.solver.solve(assumptions=list(assumptions)):
            return None
        return {v for v in self.solver.get_model() if v > 0}


def start_conditions(circuit: Circuit, environment: Environment) -> list[Expr]:
    """What is true in exactly the start states."""
    wanted = [circuit.signal(s) if v else not_(circuit.signal(s)) for s, v in environment.start.items()]
    stable = [circuit.is_stable] if environment.mode == "fundamental" else []
    return [*circuit.resolve(*environment.assume), *wanted, *stable]


def start_states(circuit: Circuit, environment: Environment) -> Iterator[int]:
    """Every start state, packed, in no particular order."""
    query = Query()
    copy = query.clauses()
    bits = [copy.variable(s) for s in circuit.signals]
    copy.require(*start_conditions(circuit, environment))
    while (model := query.true_variables()) is not None:
        yield sum(1 << i for i, v in enumerate(bits) if v in model)
        query.solver.add_clause([-v if v in model else v for v in bits])


def satisfiable(circuit: Circuit, conditions: Sequence[Expr]) -> bool:
    """Whether some total state, stable or not, satisfies all `conditions`."""
    query = Query()
    query.clauses().require(*circuit.resolve(*conditions))
    return query.true_variables() is not None
