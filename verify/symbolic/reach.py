"""One question put to the symbolic search: can a bad state be reached? Either a proof or a trail to it."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from contextlib import contextmanager
from dataclasses import dataclass, replace
from functools import cached_property
from typing import Any

from settled.encodings.system import System, system
from settled.models.logic import Expr, or_, support
from settled.models.states import Run
from settled.verify.limits import LimitReached
from settled.verify.questions import Task
from settled.verify.symbolic.certificates import Clause, Proof
from settled.verify.symbolic.formula import Cube, Formula, Progress, Query
from settled.verify.symbolic.guesses import Near, linked, neighbourhoods
from settled.verify.symbolic.invariants import RINGS, guessed, guessed_about
from settled.verify.symbolic.local import Local
from settled.verify.symbolic.pdr import Invariant, Path, Pdr
from settled.verify.symbolic.unrolling import shorter

State = Mapping[str, int]

LARGE = 24
UNROLLED = 1_000_000
SHORTENING = 0.2
SOON, GUESSING = 0.05, 0.4


@dataclass(frozen=True)
class Trail:
    """States of a system, by variable, from a start state to a bad one; each moves to the next or stays as it is."""

    system: System
    states: tuple[State, ...]
    bad: Expr

    def run(self, title: str, name: Mapping[str, str] | None = None) -> Run:
        """The circuit's total states along the trail, each once; `name` renames its signals."""
        circuit, other = self.system.circuit, name or {}
        words = [sum(s[other.get(v, v)] << i for i, v in enumerate(circuit.signals)) for s in self.states]
        return Run(title, without_repeats(words), None, circuit.name)


def without_repeats(words: list[int]) -> tuple[int, ...]:
    """The sequence without immediate repetitions."""
    return tuple(w for i, w in enumerate(words) if i == 0 or w != words[i - 1])


def _named(made: System, literals: Cube) -> Clause:
    return tuple((made.variables[abs(lit) - 1], lit > 0) for lit in literals)


def _numbered(made: System, clause: Clause) -> Cube:
    return tuple(made.number[v] if bit else -made.number[v] for v, bit in clause)


def _trail(made: System, path: Path, bad: Expr) -> Trail:
    return Trail(made, tuple({v: int(bit) for v, bit in _named(made, state)} for state in path.states), bad)


class Reacher:
    """Puts questions about one task to the search."""

    def __init__(self, task: Task) -> None:
        self.task = task
        self.circuit, self.environment = task.circuit, task.environment
        self.progress = Progress(task.limits)
        self.memory: dict[str, Any] = {}
        self._known: Sequence[Clause] | None = None
        self._all_guessed = False

    @cached_property
    def base(self) -> System:
        """The system of the task without observers."""
        return system(self.circuit, self.environment)

    @property
    def known(self) -> Sequence[Clause]:
        """Clauses over the circuit's own variables that are true in every reachable state and inductive together.

        Guessed at first; each proof about the circuit without observers adds what it rests on.
        """
        if self._known is None and self._large:
            self._guess(neighbourhoods(self.base))
        return self._known or ()

    def _guess(self, near: Near) -> None:
        """Learn from guesses."""
        known = [_numbered(self.base, clause) for clause in self._known or ()]
        found = guessed(self.base, near, known, self.progress)
        self._known = [*(self._known or ()), *(_named(self.base, clause) for clause in found)]

    def _guess_more(self) -> None:
        """Learn, once, from guesses that take longer, for a share of the time."""
        self._all_guessed = True
        try:
            with self.within(GUESSING):
                self._guess(linked(self.base))
        except LimitReached:
            self.progress.tick()

    @property
    def _large(self) -> bool:
        return len(self.circuit.nodes) >= LARGE

    def about(self, made: System) -> list[Clause]:
        """Clauses about observers that are inductive together with what is known; guessed, in large circuits."""
        if not self._large:
            return []
        return [_named(made, clause) for clause in guessed_about(made, self._seeds(made), self.progress)]

    @contextmanager
    def within(self, share: float) -> Iterator[None]:
        """Work for a share of the time that is left; what was not decided by then raises `LimitReached`."""
        limits = self.progress.limits
        self.progress.limits = replace(limits, seconds=limits.spent() + share * limits.left())
        try:
            yield
        finally:
            self.progress.limits = limits

    def reach(self, made: System, bad: Expr, claim: str) -> Proof | Trail:
        """Decide whether a state with `bad` true can be reached. Raises `LimitReached`.

        `claim`: in words, what a proof says cannot be. Where `bad` has alternatives, those that known clauses near
        them exclude are left out of the search.
        """
        formula = Formula(made)
        seeds = self._seeds(made)
        open_ = self._open(formula, bad, seeds)
        found = self._soon(formula, open_, seeds)
        if found is None:
            self._guess_more()
            seeds = self._seeds(made)
            found = self._searched(formula, self._open(formula, or_(*open_), seeds), seeds)
        if isinstance(found, Path):
            return _trail(made, found, bad)
        clauses = tuple(_named(made, clause) for clause in found.clauses)
        if made is self.base:
            self._known = clauses
        return Proof(made, bad, clauses, claim)

    def _seeds(self, made: System) -> list[Cube]:
        return [_numbered(made, clause) for clause in self.known]

    def _soon(self, formula: Formula, open_: list[Expr], seeds: list[Cube]) -> Invariant | Path | None:
        """What the search comes to; in large circuits None when that takes long and more may be guessed first."""
        if not self._large or self._all_guessed:
            return self._searched(formula, open_, seeds)
        try:
            with self.within(SOON):
                return self._searched(formula, open_, seeds)
        except LimitReached:
            self.progress.tick()
            return None

    def _searched(self, formula: Formula, open_: list[Expr], seeds: list[Cube]) -> Invariant | Path:
        """Whether one of several bad states can be reached."""
        if not open_:
            return Invariant(tuple(seeds))
        return Pdr(formula, or_(*open_), self.progress, seeds).run()

    def _open(self, formula: Formula, bad: Expr, seeds: list[Cube]) -> list[Expr]:
        """The alternatives of `bad` that known clauses near them do not exclude."""
        alternatives = list(bad.args) if bad.op == "or" else [bad]
        if not seeds:
            return alternatives
        wanted = [formula.literal(e) for e in alternatives]
        local = Local(formula, seeds)
        self.progress.at(f"{len(seeds):,} guessed clauses that hold")
        found = []
        for e, lit in zip(alternatives, wanted, strict=True):
            self.progress.tick()
            if local.refutation([lit], RINGS) is None:
                found.append(e)
        return found

    def shortest(self, trail: Trail) -> Trail:
        """A trail with the fewest steps to a bad state, when it is found in time; else the trail itself."""
        formula = Formula(trail.system)
        steps = len(trail.states) - 1
        if formula.count * steps > UNROLLED:
            return trail
        try:
            with self.within(SHORTENING):
                path = shorter(formula, trail.bad, steps, self.progress)
        except LimitReached:
            self.progress.tick()
            return trail
        return trail if path is None else _trail(trail.system, path, trail.bad)

    def choices(self, made: System, state: State, condition: Expr) -> dict[str, int]:
        """Selectors and other choices in `condition` with which it is true in a state."""
        formula = Formula(made)
        wanted = formula.literal(condition)
        given = [v if state[name] else -v for name, v in zip(made.variables, formula.state, strict=True)]
        query = Query(formula, self.progress)
        assert query.solve([wanted, *given]), "the condition is true in the state with some choices"
        model = query.model()
        query.close()
        return {s: int(model[formula.variable(s) - 1] > 0) for s in support(condition) if s not in state}
