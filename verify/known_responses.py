"""That every run settles and every change has one end, by three-valued simulation of all responses at once.

Whatever a node may become while a response lasts lies under the result of algorithm A, and when algorithm B leaves no
node unknown, every fair run of the response settles in that one total state (Eichelberger 1965; Brzozowski and Seger
1995; both recalled). That holds under either switching rule and for inputs that change one by one, at once or in a
burst; what is done of a burst is a burst itself. Here both algorithms are formulas, over every stable total state that
`assume` admits, reachable or not: no search over total states, and no invariant but these formulas.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

from settled.encodings.three_valued import Rails, join, known, rails, unknown
from settled.models.environment import Environment
from settled.models.logic import TRUE, Expr, and_, ite, not_, or_, rename, support, var, xor
from settled.verify.limits import LimitReached
from settled.verify.never import Never, confirm
from settled.verify.questions import Task
from settled.verify.settled_states import Settled
from settled.verify.stable_states import start_conditions

Values = dict[str, Rails]
NAME = "three-valued simulation of all responses, by SAT, re-checked by z3"
ROUNDS = 40


@dataclass(frozen=True)
class Established:
    """Every run settles and every change has one end.

    `exercised`: whether a start state has an allowed change; `formulas`: how many z3 has confirmed to have no model.
    """

    exercised: bool
    formulas: int


@dataclass(frozen=True)
class Change:
    """A kind of change: for each input that may take part whether it does, and what is true before it.

    `slowly`: the inputs change one after the other, with the circuit on the move.
    """

    moved: Mapping[str, Expr]
    conditions: tuple[Expr, ...]
    slowly: bool = False


def changes(settled: Settled, environment: Environment, how: str) -> Iterator[Change]:
    """The changes that the environment may make in a stable total state when inputs change as `how` says.

    Under `burst` the orders of arrival are not looked at: sets that `assume` leaves no order for may be among them.
    """
    inputs = settled.circuit.inputs
    guards = {x: environment.guard(x) for x in inputs}
    may = {x: settled.in_rest(ite(var(x), g.falls, g.rises)) for x, g in guards.items()}
    assume = and_(*settled.circuit.resolve(*environment.assume))
    if how == "single":
        for x in inputs:
            yield Change({x: TRUE}, (*settled.conditions, assume, may[x], rename([assume], {x: not_(var(x))})[0]))
        return
    moved = {x: var(f"{x} changes") for x in inputs}
    after = rename([assume], {x: xor(var(x), m) for x, m in moved.items()})[0]
    willing = [or_(not_(m), may[x]) for x, m in moved.items()]
    conditions = (*settled.conditions, assume, after, *willing, or_(*moved.values()))
    yield Change(moved, conditions, slowly=how == "burst")


class Response:
    """The response to a change from any stable total state, in rounds over the cut of the loops."""

    def __init__(self, settled: Settled, change: Change) -> None:
        self.circuit, self.cut, self.order = settled.circuit, settled.cut, settled.order
        self.begin: Values = {s: known(e) for s, e in settled.value.items()}
        self.after: Values = {x: known(xor(var(x), m)) for x, m in change.moved.items()}
        passing = {x: join(self.begin[x], r) for x, r in self.after.items()} if change.slowly else self.after
        self.begin |= passing
        self._reads = {n: set(support(self.circuit.excitation[n])) for n in self.circuit.nodes}
        self._moved = set(change.moved)

    def spread(self, now: Values) -> tuple[Values, list[Expr]]:
        """A round of algorithm A; and where the nodes of the cut have grown."""
        now = dict(now)
        for n in self.order:
            now[n] = join(now[n], self._target(n, now))
        grown = {k: join(now[k], self._target(k, now)) for k in self.cut}
        pairs = [pair for k in self.cut for pair in zip(grown[k], now[k], strict=True)]
        return now | grown, [and_(new, not_(old)) for new, old in pairs if new is not old]

    def settle(self, now: Values) -> tuple[Values, list[Expr], list[Expr]]:
        """A round of algorithm B; where nodes of the cut are unknown after it, and where they have changed."""
        now = now | self.after
        for n in self.order:
            now[n] = self._target(n, now)
        left = {k: self._target(k, now) for k in self.cut}
        moved = [k for k in self.cut if k in self._moved]
        pairs = [pair for k in moved for pair in zip(left[k], now[k], strict=True)]
        less = [xor(new, old) for new, old in pairs if new is not old]
        return now | left, [unknown(left[k]) for k in moved], less

    def _target(self, n: str, now: Values) -> Rails:
        """What a node is excited to; what nothing has reached keeps its value."""
        if self._moved.isdisjoint(self._reads[n]):
            return now[n]
        self._moved.add(n)
        return rails([self.circuit.excitation[n]], now)[0]

    def proof(self, never: Never) -> list[Expr] | None:
        """What is never true: that algorithm A goes on after its last round, that a node is unknown in the end.

        None when some node may be unknown in the end, or the rounds are too many.
        """
        now, grown = self.spread(self.begin)
        for _ in range(ROUNDS):
            if never(grown):
                break
            now, grown = self.spread(now)
        else:
            return None
        for _ in range(ROUNDS):
            now, open_, less = self.settle(now)
            if never(open_):
                return [*grown, *open_]
            if never(less):
                return None
        return None


def proof(task: Task) -> Established | str:
    """That all responses of the task's circuit are known in the end, confirmed by z3; or why that is not shown."""
    circuit, environment = task.circuit, task.environment
    if environment.mode != "fundamental":
        return "three-valued simulation speaks of responses, and in input-output mode there are none"
    settled, formulas = Settled(circuit), 0
    for change in changes(settled, environment, environment.changes):
        found = Response(settled, change).proof(Never(change.conditions, task.limits))
        if found is None:
            return f"three-valued simulation leaves a node unknown after a change of {', '.join(change.moved)}"
        confirm(change.conditions, found, task.limits)
        formulas += len(found)
    return Established(exercised(settled, task), formulas)


def shown(task: Task) -> bool:
    """Whether `proof` comes to show it within the limits."""
    try:
        return isinstance(proof(task), Established)
    except LimitReached:
        return False


def exercised(settled: Settled, task: Task) -> bool:
    """Whether some start state has an allowed change. Every burst begins with a change that is a burst of its own."""
    environment = task.environment
    begins = and_(*map(settled.in_rest, start_conditions(settled.circuit, environment)))
    how = "single" if environment.changes == "burst" else environment.changes
    return any(not Never(c.conditions, task.limits)([begins]) for c in changes(settled, environment, how))
