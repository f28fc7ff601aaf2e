"""Refutation with the neighbourhood alone: a small solver for each question, made of the definitions that the question
reads and of the known clauses over the signals that these read. What it refutes is refuted; else nothing is known.

On large circuits this costs the same for every question, where a solver for the whole circuit grows with it.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence

from pysat.solvers import Solver

from settled.verify.symbolic.formula import Cube, Formula

SMALL = "minisat22"


class Local:
    """Local refutation under clauses that can be given and taken away."""

    def __init__(self, formula: Formula, clauses: Iterable[Cube] = ()) -> None:
        self._states = len(formula.state)
        self._definitions: dict[int, list[list[int]]] = defaultdict(list)
        for definition in formula.clauses:
            self._definitions[max(map(abs, definition))].append(definition)
        self._about: dict[int, list[Cube]] = defaultdict(list)
        self._known: set[Cube] = set()
        for clause in clauses:
            self.add(clause)

    def add(self, clause: Cube) -> None:
        """Let a clause be used from here on."""
        self._known.add(clause)
        for lit in clause:
            self._about[abs(lit)].append(clause)

    def remove(self, clause: Cube) -> None:
        """Let a clause be used no more."""
        self._known.discard(clause)

    def refutation(self, wanted: Sequence[int], rings: int = 1) -> list[Cube] | None:
        """Known clauses near the literals with which the literals cannot all be true; None when there are none such.

        Near: over what the literals read; for each further ring, also over what such clauses speak of.
        """
        read: dict[int, int] = {}
        clauses: list[Sequence[int]] = [[lit] for lit in wanted]
        self._read([abs(lit) for lit in wanted], read, clauses)
        used = self._touching(read)
        for _ in range(1, rings):
            self._read([abs(lit) for clause in used for lit in clause], read, clauses)
            used = self._touching(read)
        used = [clause for clause in used if all(abs(lit) in read for lit in clause)]
        small = [[read[lit] if lit > 0 else -read[-lit] for lit in clause] for clause in (*clauses, *used)]
        marks = range(len(read) + 1, len(read) + 1 + len(used))
        for clause, mark in zip(small[len(clauses) :], marks, strict=True):
            clause.append(-mark)
        with Solver(name=SMALL, bootstrap_with=small) as solver:
            if solver.solve(assumptions=list(marks)):
                return None
            core = set(solver.get_core() or ())
        return [clause for clause, mark in zip(used, marks, strict=True) if mark in core]

    def _read(self, todo: list[int], read: dict[int, int], clauses: list[Sequence[int]]) -> None:
        """Number the variables that `todo` reads, and add their definitions."""
        while todo:
            v = todo.pop()
            if v not in read:
                read[v] = len(read) + 1
                for clause in self._definitions.get(v, ()):
                    clauses.append(clause)
                    todo += map(abs, clause)

    def _touching(self, read: Iterable[int]) -> list[Cube]:
        found = (clause for v in read if v <= self._states for clause in self._about.get(v, ()))
        return [clause for clause in dict.fromkeys(found) if clause in self._known]
