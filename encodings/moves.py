"""Every lawful move of a circuit in its environment as a z3 formula over two copies of the state.

Written from the definitions and independently of `system`, whose findings it serves to check. That nothing moves is
among the moves.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import z3

from settled.encodings.excitation import formulas
from settled.encodings.system import Restraint, finishing, outstanding, waiting_inputs
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import TRUE, Expr, and_, not_, var

Values = Mapping[str, Any]


class Moves:
    """The moves from the state `now` to the state `then`, both as z3 variables by name; selectors are in `now`."""

    def __init__(
        self, circuit: Circuit, environment: Environment, restraint: Restraint, now: Values, then: Values
    ) -> None:
        self.circuit, self.environment, self.restraint = circuit, environment, restraint
        self.now, self.then = now, then
        self.waiting = waiting_inputs(circuit, environment)
        self.moved = {s: now[s] != then[s] for s in circuit.signals}

    def formula(self) -> Any:
        """The moves as one formula."""
        kept = [z3.Implies(self._at(c), z3.Not(self.moved[s])) for s, c in self.restraint.held.items()]
        if self.environment.mode == "input-output":
            return z3.And(*kept, self._free())
        change = self._burst_begins() if self.waiting else self._change()
        return z3.And(*kept, z3.Or(self._response(), change))

    # ---- pieces --------------------------------------------------------------------------------------------------

    def _at(self, e: Expr) -> Any:
        return formulas([e], self.now)[0]

    def _follow(self) -> Any:
        """A node that moves takes the value of its excitation, and only one of an exclusive pair moves."""
        targets = formulas([self.circuit.excitation[n] for n in self.circuit.nodes], self.now)
        pairs = zip(self.circuit.nodes, targets, strict=True)
        apart = [z3.Not(z3.And(self.moved[a], self.moved[b])) for a, b in self.circuit.exclusive]
        return z3.And(*apart, *(z3.Implies(self.moved[n], self.then[n] == t) for n, t in pairs))

    def _still(self, names: Sequence[str]) -> Any:
        return z3.And(*(z3.Not(self.moved[s]) for s in names))

    def _allowed(self, names: Sequence[str]) -> Any:
        """Inputs that move have a guard that lets them."""
        rules = []
        for x in names:
            guard = self.environment.guard(x)
            rises, falls = formulas(self.circuit.resolve(guard.rises, guard.falls), self.now)
            rules += [z3.Implies(z3.And(self.moved[x], self.then[x]), rises)]
            rules += [z3.Implies(z3.And(self.moved[x], z3.Not(self.then[x])), falls)]
        return z3.And(*rules)

    def _admitted(self) -> Any:
        return z3.And(*formulas(self.circuit.resolve(*self.environment.assume), self.then))

    def _finishing(self) -> Any:
        assume = and_(*self.circuit.resolve(*self.environment.assume))
        vector = {x: var(x) for x in self.waiting}
        left = {x: var(outstanding(x)) for x in self.waiting}
        return formulas([finishing(assume, vector, left)], self.then)[0]

    def _alone(self, names: Sequence[str]) -> Any:
        """At most one of `names` moves."""
        some = two = z3.BoolVal(False)
        for s in names:
            two = z3.Or(two, z3.And(some, self.moved[s]))
            some = z3.Or(some, self.moved[s])
        return z3.Not(two)

    def _one(self, names: Sequence[str]) -> Any:
        return self._alone(names) if self.circuit.winners == "one" else z3.BoolVal(True)

    def _rest(self) -> Any:
        quiet = [z3.Not(self.now[outstanding(x)]) for x in self.waiting]
        return z3.And(self._at(self.circuit.is_stable), *quiet)

    # ---- the modes -----------------------------------------------------------------------------------------------

    def _free(self) -> Any:
        inputs = self.circuit.inputs
        admitted = z3.Or(self._still(inputs), self._admitted())
        return z3.And(self._follow(), self._allowed(inputs), admitted, self._one(self.circuit.signals))

    def _response(self) -> Any:
        """Steps of nodes, and arrivals of what is outstanding."""
        if not self.waiting:
            return z3.And(self._still(self.circuit.inputs), self._follow(), self._one(self.circuit.nodes))
        rules = [self._follow(), self._alone(self.waiting), self._one(self.circuit.signals)]
        for x in self.waiting:
            now, then = self.now[outstanding(x)], self.then[outstanding(x)]
            rules += [z3.Implies(self.moved[x], now), then == z3.And(now, z3.Not(self.moved[x]))]
        return z3.And(*rules, z3.Or(self._still(self.waiting), self._finishing()))

    def _change(self) -> Any:
        alone = self._alone(self.circuit.inputs) if self.environment.changes == "single" else z3.BoolVal(True)
        begins = z3.And(self._rest(), self._at(self.restraint.picks), self._still(self.circuit.nodes))
        return z3.And(begins, self._allowed(self.circuit.inputs), self._admitted(), alone)

    def _burst_begins(self) -> Any:
        """A burst is picked and its first member arrives; the others are outstanding from here on."""
        rules = [self._rest(), self._at(self.restraint.picks), self._still(self.circuit.nodes)]
        rules += [z3.Or(*(self.moved[x] for x in self.waiting)), self._alone(self.waiting), self._finishing()]
        for x in self.waiting:
            guard = self.environment.guard(x)
            rises, falls = formulas(self.circuit.resolve(guard.rises, guard.falls), self.now)
            due = z3.Or(self.moved[x], self.then[outstanding(x)])
            rules.append(z3.Implies(due, z3.If(self.now[x], falls, rises)))
            rules.append(z3.Not(z3.And(self.moved[x], self.then[outstanding(x)])))
        return z3.And(*rules)


def begins(circuit: Circuit, environment: Environment, now: Values) -> Any:
    """The start states, nothing outstanding."""
    given = [circuit.signal(s) if v else not_(circuit.signal(s)) for s, v in environment.start.items()]
    rest = circuit.is_stable if environment.mode == "fundamental" else TRUE
    quiet = [z3.Not(now[outstanding(x)]) for x in waiting_inputs(circuit, environment)]
    return z3.And(*formulas([*given, *circuit.resolve(*environment.assume), rest], now), *quiet)
