"""A transition system as clauses, once; and SAT solvers loaded with them that stop when a limit is reached.

The variable of the i-th state variable is i + 1 in every solver, so a cube (a set of literals, sorted by variable)
means the same everywhere.
"""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from pysat.solvers import Solver

from settled.encodings.clauses import Clauses
from settled.encodings.system import System
from settled.models.logic import Expr
from settled.verify.asking import has_model
from settled.verify.limits import Limits

Cube = tuple[int, ...]

SOLVER, STEADY_SOLVER = "minisat22", "cadical153"


class Progress:
    """How far the work has come, in words, and the check of the time limit."""

    def __init__(self, limits: Limits) -> None:
        self.limits = limits
        self.where = "the start"

    def at(self, where: str) -> None:
        """Say where the work is."""
        self.where = where
        self.tick()

    def tick(self) -> None:
        """Raises `LimitReached` beyond a limit."""
        self.limits.check(f"at {self.where}")


class Formula:
    """The clauses of a system. `may[lit]`: the literal that is true where state literal `lit` may be true next."""

    def __init__(self, system: System) -> None:
        self.system = system
        self.count = 0
        self.clauses: list[list[int]] = []
        self._tseitin = Clauses(self.fresh, self.clauses.append)
        self.state = [self._tseitin.variable(v) for v in system.variables]
        self.selectors = [self._tseitin.variable(v) for v in system.selectors]
        self._tseitin.require(system.always)
        self.start = self.literal(system.start)
        self.may: dict[int, int] = {}
        for v, name in zip(self.state, system.variables, strict=True):
            zero, one = system.one_copy[name]
            self.may[-v], self.may[v] = self.literal(zero), self.literal(one)

    def fresh(self) -> int:
        """A new variable."""
        self.count += 1
        return self.count

    def literal(self, e: Expr) -> int:
        """The literal of an expression over state variables and selectors."""
        return self._tseitin.literal(e)

    def variable(self, name: str) -> int:
        """The variable of a state variable or selector."""
        return self._tseitin.variable(name)

    def names(self, cube: Cube) -> list[str]:
        """A cube's literals in words, `~` for 0."""
        return [("" if lit > 0 else "~") + self.system.variables[abs(lit) - 1] for lit in cube]


class Query:
    """An incremental SAT solver on a formula.

    `steady`: many easy questions about clauses that stay; else few about clauses that come all the time.
    """

    def __init__(
        self, formula: Formula, progress: Progress, clauses: Iterable[Sequence[int]] = (), steady: bool = False
    ) -> None:
        self.formula, self.progress = formula, progress
        self._solver = Solver(name=STEADY_SOLVER if steady else SOLVER, bootstrap_with=formula.clauses)
        self._top = formula.count
        self._solver.append_formula([list(c) for c in clauses])

    def fresh(self) -> int:
        """A new variable of this solver alone."""
        self._top += 1
        return self._top

    def add(self, clause: Sequence[int]) -> None:
        """Demand a clause from here on."""
        self._solver.add_clause(list(clause))

    def prefer(self, literals: Sequence[int]) -> None:
        """Values to try first for variables that are free."""
        self._solver.set_phases(list(literals))

    def solve(self, assumptions: Sequence[int]) -> bool:
        """Whether the clauses have a model under assumptions. Raises `LimitReached`."""
        return has_model(self._solver, assumptions, self.progress.tick)

    def core(self) -> set[int]:
        """Assumptions that together have no model; after an unsuccessful `solve`."""
        return set(self._solver.get_core() or ())

    def model(self) -> list[int]:
        """The model found: at index i - 1 the literal of variable i."""
        found: list[int] = self._solver.get_model()
        return found

    def close(self) -> None:
        """Free the solver."""
        self._solver.delete()
