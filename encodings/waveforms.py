"""How often signals of a circuit without feedback can change in one response, as one formula over the input change.

Before the change every node has the value that the inputs give it; in the end the value that the new inputs give it.
A node is called ragged when its excitation can leave its old value and come back to it on the way. A node that is not
ragged changes at most once, and has switched only where its excitation has its new value; a ragged one may have any
value at any moment. Two moments, the one before the other, decide whether a node is ragged: the formula asks for the
values of what the node reads at both, as far as they are consistent with the above.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import dataclass

from settled.models.circuit import Circuit, definition_order
from settled.models.environment import Environment
from settled.models.logic import FALSE, Expr, and_, ite, not_, or_, rename, support, var, xor


@dataclass(frozen=True)
class Waveforms:
    """The formula. `changes[x]`: whether an input takes part; `old[s]`: values in rest, over the inputs.

    `conditions` hold of every response of a circuit that rests; among them the choice which nodes are ragged. With
    them, `again` is true where the watched signal may change, and change back.
    """

    conditions: tuple[Expr, ...]
    again: Expr
    changes: Mapping[str, Expr]
    old: Mapping[str, Expr]


def waveforms(circuit: Circuit, environment: Environment, signal: Expr) -> Waveforms:
    """The formula for a signal, given as an expression over inputs and nodes of a circuit without feedback."""
    return _Making(circuit, environment).of(signal)


class _Making:
    def __init__(self, circuit: Circuit, environment: Environment) -> None:
        self.circuit, self.environment = circuit, environment
        self.changes = {x: var(f"{x} changes") for x in circuit.inputs}
        self.old: dict[str, Expr] = {x: var(x) for x in circuit.inputs}
        self.new: dict[str, Expr] = {x: xor(var(x), c) for x, c in self.changes.items()}
        self.order = self._order()
        for n in self.order:
            body = circuit.excitation[n]
            self.old[n], self.new[n] = rename([body], self.old)[0], rename([body], self.new)[0]

    def _order(self) -> list[str]:
        """The nodes, each after those that it reads."""
        return definition_order({n: self.circuit.excitation[n] for n in self.circuit.nodes})

    def of(self, signal: Expr) -> Waveforms:
        """The formula for one signal."""
        cone = self._cone([signal])
        conditions = [*self._environment(), *(self._ragged(n) for n in cone)]
        again = self._back("", signal, cone)
        return Waveforms(tuple(conditions), again, self.changes, self.old)

    def _cone(self, roots: Iterable[Expr]) -> list[str]:
        """The nodes that the expressions read, directly and through others."""
        read = set(support(*roots))
        for n in reversed(self.order):
            if n in read:
                read.update(support(self.circuit.excitation[n]))
        return [n for n in self.order if n in read]

    # ---- the environment -----------------------------------------------------------------------------------------

    def _environment(self) -> list[Expr]:
        """What is true of the change: guards in rest, and the vectors before and after it."""
        rules = [or_(*self.changes.values())]
        assume = and_(*self.circuit.resolve(*self.environment.assume))
        rules += [rename([assume], values)[0] for values in (self.old, self.new)]
        for x, change in self.changes.items():
            guard = self.environment.guard(x)
            rises, falls = rename(self.circuit.resolve(guard.rises, guard.falls), self.old)
            rules.append(or_(not_(change), ite(var(x), falls, rises)))
        if self.environment.changes == "single":
            rules.append(self._alone())
        return rules

    def _alone(self) -> Expr:
        some = two = FALSE
        for change in self.changes.values():
            two, some = or_(two, and_(some, change)), or_(some, change)
        return not_(two)

    # ---- two moments ---------------------------------------------------------------------------------------------

    def _ragged(self, node: str) -> Expr:
        """A node is ragged only where its excitation can leave the old value and come back."""
        body = self.circuit.excitation[node]
        sources = [s for s in support(body) if s in self.circuit.excitation]
        return or_(not_(ragged(node)), self._back(node, body, sources))

    def _back(self, name: str, body: Expr, sources: Iterable[str]) -> Expr:
        """At some moment `body` has not its old value, and later it has; `name` tells these moments from others.

        What the expressions of `sources` read counts as well: a source that is not ragged has switched only where its
        excitation has the new value.
        """
        known = list(sources)
        read = dict.fromkeys(support(body, *(self.circuit.excitation[s] for s in known)))
        first, later = ({s: self._moment(name, s, k) for s in read} for k in (1, 2))
        (old,), (early,), (late,) = (rename([body], values) for values in (self.old, first, later))
        rules = [self._ordered(s, first[s], later[s]) for s in read]
        rules += [self._caused(s, values) for s in known for values in (first, later) if s in values]
        return and_(xor(early, old), not_(xor(late, old)), *rules)

    def _moment(self, name: str, signal: str, number: int) -> Expr:
        """The value of a signal at a moment. Inputs that change in one instant have changed at both."""
        if signal in self.changes and self.environment.changes != "burst":
            return self.new[signal]
        return var(f"{signal} at {number} of {name}")

    def _ordered(self, signal: str, first: Expr, later: Expr) -> Expr:
        """Without raggedness a signal has its old value, then for good its new one."""
        if first is self.new[signal]:
            return not_(FALSE)
        old, new = self.old[signal], self.new[signal]
        rules = [or_(not_(xor(value, old)), not_(xor(value, new))) for value in (first, later)]
        rules.append(or_(not_(xor(first, old)), not_(xor(later, new))))
        return or_(ragged(signal), and_(*rules)) if signal in self.circuit.excitation else and_(*rules)

    def _caused(self, node: str, values: Mapping[str, Expr]) -> Expr:
        """A node that is not ragged has switched only where its excitation has the new value."""
        (excitation,) = rename([self.circuit.excitation[node]], values)
        held = not_(xor(values[node], self.old[node]))
        return or_(ragged(node), held, not_(xor(excitation, self.new[node])))


def ragged(node: str) -> Expr:
    """Whether a node is ragged: a choice that the conditions of the formula allow or do not."""
    return var(f"{node} ragged")
