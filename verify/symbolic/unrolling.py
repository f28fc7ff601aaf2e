"""Shortest paths by unrolling (Biere, Cimatti, Clarke and Zhu 1999, "Symbolic model checking without BDDs"; recalled):
copies of the system, one for each moment, until a bad state is among what the last one can be."""

from __future__ import annotations

from collections.abc import Iterator

from pysat.solvers import Solver

from settled.models.logic import Expr
from settled.verify.asking import has_model
from settled.verify.symbolic.formula import SOLVER, Formula, Progress
from settled.verify.symbolic.pdr import Path


def shorter(formula: Formula, bad: Expr, steps: int, progress: Progress) -> Path | None:
    """A path with the fewest steps to a state with `bad` true, or None when that takes `steps` or more."""
    wanted = formula.literal(bad)
    with Solver(name=SOLVER) as solver:
        for moment in range(steps):
            progress.at(f"{moment} steps, looking for a shorter run")
            solver.append_formula(list(_moment(formula, moment)))
            if has_model(solver, [_at(formula, wanted, moment)], progress.tick):
                model = solver.get_model()
                places = range(moment + 1)
                return Path(tuple(tuple(_state(formula, model, at)) for at in places))
    return None


def _at(formula: Formula, lit: int, moment: int) -> int:
    """A literal at a moment."""
    shift = moment * formula.count
    return lit + shift if lit > 0 else lit - shift


def _moment(formula: Formula, moment: int) -> Iterator[list[int]]:
    """The clauses of a moment, and that its state can come of the one before; the first is a start state."""
    for clause in formula.clauses:
        yield [_at(formula, lit, moment) for lit in clause]
    if not moment:
        yield [formula.start]
        return
    for lit, may in formula.may.items():
        yield [-_at(formula, lit, moment), _at(formula, may, moment - 1)]


def _state(formula: Formula, model: list[int], moment: int) -> Iterator[int]:
    shift = moment * formula.count
    return (v if model[v + shift - 1] > 0 else -v for v in formula.state)
