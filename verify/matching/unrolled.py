"""Two circuits unrolled change by change, as formulas: which inputs make their outputs differ first.

Both must settle with one end after every change from any stable state. The end is then what any ordering leads to;
here the nodes outside a cut of the loops have no delay, and those of the cut switch together, round by round, for as
many rounds as it can take.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from itertools import combinations

from settled.models.environment import Environment
from settled.models.logic import FALSE, TRUE, Expr, and_, evaluate, ite, not_, or_, rename, var, xor
from settled.verify.known_responses import changes
from settled.verify.limits import Limits
from settled.verify.matching.guesses import Partner
from settled.verify.never import Never
from settled.verify.settled_states import Settled
from settled.verify.stable_states import start_conditions

ROUNDS = 40


def rounds_needed(settled: Settled, environment: Environment, limits: Limits) -> int | None:
    """How many rounds the cut takes at most to come to rest after a change; None when that is more than 40."""
    most = 0
    for change in changes(settled, environment, environment.changes):
        never, taken = Never(change.conditions, limits), 0
        inputs = {x: xor(var(x), m) for x, m in change.moved.items()}
        now = {k: var(k) for k in settled.cut}
        while True:
            then = one_round(settled, inputs | now)
            if never([xor(then[k], now[k]) for k in settled.cut if then[k] is not now[k]]):
                break
            if taken == ROUNDS:
                return None
            now, taken = then, taken + 1
        most = max(most, taken)
    return most


def one_round(settled: Settled, now: Mapping[str, Expr]) -> dict[str, Expr]:
    """What the nodes of the cut come to when all of them switch that are excited."""
    return dict(zip(settled.cut, rename([*settled.follows.values()], now), strict=True))


class Machine:
    """One circuit from stable state to stable state. Variables of the cut carry a tag, those of inputs are shared."""

    def __init__(self, settled: Settled, tag: str, rounds: int) -> None:
        self.settled, self.tag, self.rounds = settled, tag, rounds

    def at(self, moment: int) -> dict[str, Expr]:
        """The variables of inputs and cut in the stable state after so many changes."""
        inputs = {x: var(f"{x} after {moment}") for x in self.settled.circuit.inputs}
        return inputs | {k: var(f"{self.tag} {k} after {moment}") for k in self.settled.cut}

    def begins(self, environment: Environment) -> list[Expr]:
        """That the first state is a start state."""
        given = start_conditions(self.settled.circuit, environment)
        return rename([*self.settled.conditions, *map(self.settled.in_rest, given)], self.at(0))

    def moves(self, moment: int) -> list[Expr]:
        """That the cut comes to its values after a change from those before it."""
        then = self.at(moment)
        now = then | {k: self.at(moment - 1)[k] for k in self.settled.cut}
        for _ in range(self.rounds):
            now |= one_round(self.settled, now)
        return [not_(xor(then[k], now[k])) for k in self.settled.cut]

    def total(self, moment: int) -> list[Expr]:
        """The values of all inputs and nodes after so many changes."""
        return rename([self.settled.value[s] for s in self.settled.circuit.signals], self.at(moment))

    def shows(self, moment: int, outputs: Sequence[str]) -> list[Expr]:
        """The values of outputs after so many changes."""
        return rename([self.settled.in_rest(self.settled.circuit.signal(z)) for z in outputs], self.at(moment))


class Unrolled:
    """Both circuits under the same changes, from start states with the same inputs; guards are the original's."""

    def __init__(self, machines: tuple[Machine, Machine], rules: tuple[Environment, Environment], limits: Limits):
        self.machines, self.environment, self.limits = machines, rules[0], limits
        self.never = Never([], limits)
        self.length = 0
        self.alike: list[tuple[str, Partner]] = []
        for machine, environment in zip(machines, rules, strict=True):
            self.never.require(*machine.begins(environment))

    def one_more(self) -> None:
        """One more change."""
        self.length += 1
        self.never.require(*self._change())
        for machine in self.machines:
            self.never.require(*machine.moves(self.length))

    def _change(self) -> list[Expr]:
        original, settled = self.machines[0], self.machines[0].settled
        before, then = original.at(self.length - 1), original.at(self.length)
        moved = {x: xor(before[x], then[x]) for x in settled.circuit.inputs}
        rules = rename(settled.circuit.resolve(*self.environment.assume), then)
        for x, moves in moved.items():
            guard = self.environment.guard(x)
            may = settled.in_rest(ite(var(x), guard.falls, guard.rises))
            rules.append(or_(not_(moves), *rename([may], before)))
        if self.environment.changes == "single":
            rules += [not_(and_(a, b)) for a, b in combinations(moved.values(), 2)]
        return [*rules, or_(*moved.values())]

    def apart(self, outputs: Sequence[str]) -> bool:
        """Whether the outputs can differ after the last change."""
        shown = zip(*(m.shows(self.length, outputs) for m in self.machines), strict=True)
        return self.never.solve([self.never.literal(or_(*(xor(a, b) for a, b in shown)))])

    def settle_alike(self) -> None:
        """Of the pairs in `alike` keep those that cannot differ after the last change, and say so to the solver.

        This is no new knowledge, but makes what comes after it easy.
        """
        one, two = (m.at(self.length) for m in self.machines)
        apart = {n: xor(one[n], two[p.node], TRUE if p.inverse else FALSE) for n, p in self.alike}
        while apart and self.never.solve([self.never.literal(or_(*apart.values()))]):
            apart = {n: e for n, e in apart.items() if not self.never.is_true(e)}
        self.alike = [(n, p) for n, p in self.alike if n in apart]
        self.never.require(*(not_(e) for e in apart.values()))

    def states(self) -> tuple[list[int], list[int]]:
        """The total states of both sides after each change in the model found last."""
        found: list[list[int]] = []
        for machine in self.machines:
            values = self.never.model([e.name for t in range(self.length + 1) for e in machine.at(t).values()])
            found.append([pack_total(machine, t, values) for t in range(self.length + 1)])
        return found[0], found[1]


def pack_total(machine: Machine, moment: int, values: Mapping[str, int]) -> int:
    """The packed total state after so many changes, where inputs and cut have the given values."""
    bits = evaluate(machine.total(moment), values)
    return sum(bit << i for i, bit in enumerate(bits))
