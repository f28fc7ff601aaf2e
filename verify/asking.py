"""Asking a SAT solver: in pieces, so that a limit or an interruption is noticed between them."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from pysat.solvers import Solver

CONFLICTS = 2_000
"""After how many conflicts a solver pauses."""


def has_model(solver: Solver, assumptions: Sequence[int], tick: Callable[[], None]) -> bool:
    """Whether the clauses have a model under assumptions; `tick` is called at every pause and may raise."""
    while True:
        solver.conf_budget(CONFLICTS)
        found: bool | None = solver.solve_limited(assumptions=list(assumptions))
        tick()
        if found is not None:
            return found
