"""Conditions that can never be true together with others: asked of SAT, confirmed by z3."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from pysat.solvers import Solver

from settled.encodings.clauses import Clauses
from settled.encodings.smtlib import script
from settled.models.logic import FALSE, Expr, or_, support, var
from settled.verify.asking import has_model
from settled.verify.limits import Limits

SOLVER = "glucose4"


class NotConfirmed(Exception):
    """z3 does not accept what the SAT solver found: a fault in this program, never a verdict."""


class Never:
    """Questions about signals of which some conditions are true, by one incremental SAT solver."""

    def __init__(self, conditions: Sequence[Expr], limits: Limits) -> None:
        self.limits = limits
        self._solver = Solver(name=SOLVER)
        self._count = 0
        self._clauses = Clauses(self._fresh, self._solver.add_clause)
        self._clauses.require(*conditions)

    def _fresh(self) -> int:
        self._count += 1
        return self._count

    def __call__(self, expressions: Sequence[Expr]) -> bool:
        """Whether none of the expressions can be true. Raises `LimitReached`."""
        bad = or_(*expressions)
        return bad is FALSE or not self.solve([self._clauses.literal(bad)])

    def require(self, *conditions: Expr) -> None:
        """Demand more conditions."""
        self._clauses.require(*conditions)

    def solve(self, assumptions: Sequence[int]) -> bool:
        """Whether the conditions have a model under assumptions. Raises `LimitReached`."""
        return has_model(self._solver, assumptions, lambda: self.limits.check("in a question to SAT"))

    def is_true(self, e: Expr) -> bool:
        """Whether an expression that has been asked about is true in the model found last."""
        literal = self._clauses.literal(e)
        return (self._solver.get_model()[abs(literal) - 1] > 0) == (literal > 0)

    def model(self, names: Sequence[str]) -> dict[str, int]:
        """The values of signals in the model found last."""
        true = {lit for lit in self._solver.get_model() or () if lit > 0}
        return {name: int(self._clauses.variable(name) in true) for name in names}

    def literal(self, e: Expr, value: int = 1) -> int:
        """The literal that is true where an expression has the value."""
        return self._clauses.literal(e) if value else -self._clauses.literal(e)

    def prefer(self, values: Mapping[str, int]) -> None:
        """Values to try first for signals that are free."""
        self._solver.set_phases([self.literal(var(s), v) for s, v in values.items()])


def confirm(conditions: Sequence[Expr], never: Sequence[Expr], limits: Limits) -> None:
    """Let z3 confirm that none of `never` can be true. Raises `NotConfirmed`, and `LimitReached` when time is up."""
    import z3

    asked = [*conditions, or_(*never)]
    names = {s: f"s{i}" for i, s in enumerate(support(*asked))}
    solver = z3.SolverFor("QF_FD")
    solver.set("timeout", max(1, int(1000 * limits.left())))
    solver.from_string(script(asked, names))
    outcome = solver.check()
    if outcome == z3.sat:
        raise NotConfirmed("z3 finds a model where the SAT solver found none")
    if outcome == z3.unknown:
        if solver.reason_unknown() == "interrupted from keyboard":
            raise KeyboardInterrupt
        limits.refuse(f"time limit of {limits.seconds:g} s reached while z3 checked; raise it with --seconds N")
