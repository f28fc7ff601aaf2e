"""One question put to the symbolic search: can a bad state be reached? Either a proof or a trail to it."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import cached_property

from settled.encodings.system import System, system
from settled.models.logic import Expr, support
from settled.models.states import Run
from settled.verify.questions import Task
from settled.verify.symbolic.certificates import Proof
from settled.verify.symbolic.formula import Formula, Progress, Query
from settled.verify.symbolic.pdr import Invariant, Pdr

State = Mapping[str, int]


@dataclass(frozen=True)
class Trail:
    """States of a system, by variable, from a start state to a bad one; each moves to the next or stays as it is."""

    system: System
    states: tuple[State, ...]

    def run(self, title: str, name: Mapping[str, str] | None = None) -> Run:
        """The circuit's total states along the trail, each once; `name` renames its signals."""
        circuit, other = self.system.circuit, name or {}
        words = [sum(s[other.get(v, v)] << i for i, v in enumerate(circuit.signals)) for s in self.states]
        return Run(title, without_repeats(words), None, circuit.name)


def without_repeats(words: list[int]) -> tuple[int, ...]:
    """The sequence without immediate repetitions."""
    return tuple(w for i, w in enumerate(words) if i == 0 or w != words[i - 1])


class Reacher:
    """Puts questions about one task to the search."""

    def __init__(self, task: Task) -> None:
        self.task = task
        self.circuit, self.environment = task.circuit, task.environment
        self.progress = Progress(task.limits)

    @cached_property
    def base(self) -> System:
        """The system of the task without observers."""
        return system(self.circuit, self.environment)

    def reach(self, made: System, bad: Expr, claim: str) -> Proof | Trail:
        """Decide whether a state with `bad` true can be reached. Raises `LimitReached`.

        `claim`: in words, what a proof says cannot be.
        """
        search = Pdr(made, bad, self.progress)
        found = search.run()
        names = made.variables
        if isinstance(found, Invariant):
            clauses = tuple(tuple((names[abs(lit) - 1], lit > 0) for lit in clause) for clause in found.clauses)
            return Proof(made, bad, clauses, claim)
        states = tuple({names[abs(lit) - 1]: int(lit > 0) for lit in state} for state in found.states)
        return Trail(made, states)

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
