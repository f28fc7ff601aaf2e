"""Every lawful move of a circuit in its environment as one expression over two copies of the state.

Written from the definitions and independently of `system`, whose findings it serves to check: nothing is said about
selectors or about what may become of a variable on its own. The value of `v` after the move is the variable
`after(v)`. That nothing moves is among the moves.
"""

from __future__ import annotations

from collections.abc import Iterable

from settled.encodings.system import Restraint, after, finishing, outstanding, waiting_inputs
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import FALSE, TRUE, Expr, and_, ite, not_, or_, rename, var, xor


def moves(circuit: Circuit, environment: Environment, restraint: Restraint = Restraint()) -> Expr:  # noqa: B008
    """The moves; conditions of the restraint may read selectors."""
    return _Moves(circuit, environment, restraint).formula()


def begins(circuit: Circuit, environment: Environment) -> Expr:
    """The start states, nothing outstanding."""
    given = [circuit.signal(s) if v else not_(circuit.signal(s)) for s, v in environment.start.items()]
    rest = circuit.is_stable if environment.mode == "fundamental" else TRUE
    quiet = [not_(var(outstanding(x))) for x in waiting_inputs(circuit, environment)]
    return and_(*given, *circuit.resolve(*environment.assume), rest, *quiet)


def follows(circuit: Circuit, node: str) -> Expr:
    """A node that moves takes the value of its excitation: true of every move."""
    now, then = var(node), var(after(node))
    return or_(not_(xor(now, then)), not_(xor(then, circuit.excitation[node])))


def implies(condition: Expr, conclusion: Expr) -> Expr:
    """`conclusion` holds where `condition` does."""
    return or_(not_(condition), conclusion)


class _Moves:
    def __init__(self, circuit: Circuit, environment: Environment, restraint: Restraint) -> None:
        self.circuit, self.environment, self.restraint = circuit, environment, restraint
        self.waiting = waiting_inputs(circuit, environment)
        self.moved = {s: xor(var(s), var(after(s))) for s in circuit.signals}
        self.assume = and_(*circuit.resolve(*environment.assume))

    def formula(self) -> Expr:
        kept = [implies(condition, not_(self.moved[s])) for s, condition in self.restraint.held.items()]
        if self.environment.mode == "input-output":
            return and_(*kept, self._free())
        change = self._burst_begins() if self.waiting else self._change()
        return and_(*kept, or_(self._response(), change))

    # ---- pieces --------------------------------------------------------------------------------------------------

    def _follow(self) -> Expr:
        """Nodes that move take the value of their excitation, and only one of an exclusive pair moves."""
        apart = [not_(and_(self.moved[a], self.moved[b])) for a, b in self.circuit.exclusive]
        return and_(*apart, *(follows(self.circuit, n) for n in self.circuit.nodes))

    def _still(self, names: Iterable[str]) -> Expr:
        return and_(*(not_(self.moved[s]) for s in names))

    def _guard(self, name: str) -> Expr:
        guard = self.environment.guard(name)
        rises, falls = self.circuit.resolve(guard.rises, guard.falls)
        return ite(var(name), falls, rises)

    def _allowed(self) -> Expr:
        """Inputs that move have a guard that lets them."""
        return and_(*(implies(self.moved[x], self._guard(x)) for x in self.circuit.inputs))

    def _admitted(self) -> Expr:
        return rename([self.assume], {x: var(after(x)) for x in self.circuit.inputs})[0]

    def _finishing(self) -> Expr:
        vector = {x: var(after(x)) for x in self.waiting}
        left = {x: var(after(outstanding(x))) for x in self.waiting}
        return finishing(self.assume, vector, left)

    def _alone(self, names: Iterable[str]) -> Expr:
        """At most one of `names` moves."""
        some = two = FALSE
        for s in names:
            two = or_(two, and_(some, self.moved[s]))
            some = or_(some, self.moved[s])
        return not_(two)

    def _one(self, names: Iterable[str]) -> Expr:
        return self._alone(names) if self.circuit.winners == "one" else TRUE

    def _rest(self) -> Expr:
        return and_(self.circuit.is_stable, *(not_(var(outstanding(x))) for x in self.waiting))

    # ---- the modes -----------------------------------------------------------------------------------------------

    def _free(self) -> Expr:
        admitted = or_(self._still(self.circuit.inputs), self._admitted())
        return and_(self._follow(), self._allowed(), admitted, self._one(self.circuit.signals))

    def _response(self) -> Expr:
        """Steps of nodes, and arrivals of what is outstanding."""
        if not self.waiting:
            return and_(self._still(self.circuit.inputs), self._follow(), self._one(self.circuit.nodes))
        rules = [self._follow(), self._alone(self.waiting), self._one(self.circuit.signals)]
        for x in self.waiting:
            now, then = var(outstanding(x)), var(after(outstanding(x)))
            rules += [implies(self.moved[x], now), not_(xor(then, and_(now, not_(self.moved[x]))))]
        return and_(*rules, or_(self._still(self.waiting), self._finishing()))

    def _change(self) -> Expr:
        alone = self._alone(self.circuit.inputs) if self.environment.changes == "single" else TRUE
        begins_now = and_(self._rest(), self.restraint.picks, self._still(self.circuit.nodes))
        return and_(begins_now, self._allowed(), self._admitted(), alone)

    def _burst_begins(self) -> Expr:
        """A burst is picked and its first member arrives; the others are outstanding from here on."""
        rules = [self._rest(), self.restraint.picks, self._still(self.circuit.nodes)]
        rules += [or_(*(self.moved[x] for x in self.waiting)), self._alone(self.waiting), self._finishing()]
        for x in self.waiting:
            later = var(after(outstanding(x)))
            rules.append(implies(or_(self.moved[x], later), self._guard(x)))
            rules.append(not_(and_(self.moved[x], later)))
        return and_(*rules)
