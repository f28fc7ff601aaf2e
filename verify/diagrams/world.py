"""A circuit in its environment: its moves as functions from sets to sets, written from the definitions.

In burst mode a state holds what is outstanding. A burst is picked in rest, without moving anything yet; arrivals are
moves of the response.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from functools import cached_property

from settled.encodings.dead_ends import dead_end
from settled.encodings.system import TooManyOrders, finishing, outstanding, waiting_inputs
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import FALSE, Expr, and_, ite, not_, or_, rename, support, var
from settled.verify.diagrams.manager import Diagrams, Set, ordered
from settled.verify.diagrams.moves import Joint, Move, Moves, Pick, Plain, Single, clustered
from settled.verify.limits import Limits

CLUSTER = 6


class World:
    """A circuit in its environment: where runs begin, and its moves.

    * `start`; `rest`: stable with nothing outstanding.
    * `held`: steps of the nodes alone; `response`: steps of a response, in input-output mode all moves;
      `changes`: what the environment begins in rest.
    """

    def __init__(self, circuit: Circuit, environment: Environment, limits: Limits) -> None:
        self.circuit, self.environment, self.limits = circuit, environment, limits
        self.waiting = waiting_inputs(circuit, environment)
        self.free = environment.mode == "input-output"
        variables = (*circuit.signals, *map(outstanding, self.waiting))
        d = self.diagrams = Diagrams(variables, self._order(), self._doubled(), limits)
        self.stable = d.of(circuit.is_stable)
        self.rest = d.of(and_(circuit.is_stable, *(not_(var(outstanding(x))) for x in self.waiting)))
        self.assume = and_(*circuit.resolve(*environment.assume))
        self.excited = {n: d.of(e) for n, e in circuit.is_excited.items()}
        self.guards = {x: d.of(self._guard(x)) for x in circuit.inputs}

    def _order(self) -> list[str]:
        waits = set(self.waiting)
        return [v for s in ordered(self.circuit) for v in ([s, outstanding(s)] if s in waits else [s])]

    def _doubled(self) -> tuple[str, ...]:
        together = self.free or self.environment.changes == "simultaneous"
        return self.circuit.signals if together else self.circuit.nodes

    def _guard(self, name: str) -> Expr:
        guard = self.environment.guard(name)
        rises, falls = self.circuit.resolve(guard.rises, guard.falls)
        return ite(var(name), falls, rises)

    @cached_property
    def start(self) -> Set:
        """The start states."""
        wanted = [(self.circuit.signal(s), v) for s, v in self.environment.start.items()]
        given = [e if v else not_(e) for e, v in wanted]
        quiet = [not_(var(outstanding(x))) for x in self.waiting]
        begins = self.diagrams.true if self.free else self.rest
        return self.diagrams.of(and_(self.assume, *given, *quiet)) & begins

    @cached_property
    def may_change(self) -> Set:
        """The states of rest in which the environment can begin a change."""
        return self.rest & ~self.diagrams.of(dead_end(self.circuit, self.environment))

    def admitted(self, *flipped: str) -> Set:
        """The states in which the input vector with some inputs inverted satisfies `assume`."""
        return self.diagrams.of(rename([self.assume], {x: not_(var(x)) for x in flipped})[0])

    # ---- nodes ---------------------------------------------------------------------------------------------------

    def _joint(self, guard: Set, names: tuple[str, ...] = ()) -> Joint:
        order = [s for s in self._order() if s in self.excited]
        return Joint(self.diagrams, {n: self.excited[n] for n in order}, self.circuit.exclusive, guard, names)

    @cached_property
    def held(self) -> Moves:
        """Steps of the nodes alone."""
        d = self.diagrams
        single = [Single(d, self.excited[n], (n,)) for n in self._order() if n in self.excited]
        joint = (self._joint(d.true),) if self.circuit.winners == "any" else ()
        return Moves(tuple(single), joint, self._fast(single))

    def _fast(self, single: Sequence[Single]) -> tuple[Move, ...]:
        parts = [single[at : at + CLUSTER] for at in range(0, len(single), CLUSTER)]
        return tuple(move for part in parts for move in clustered(part))

    @cached_property
    def response(self) -> Moves:
        """Steps of the response to a change; in input-output mode every move."""
        if self.free:
            return self._freely()
        arrivals = Moves((), ())
        for x in self.waiting:
            guard, names = self._arrival(x), (x, outstanding(x))
            joint = (self._joint(guard, names),) if self.circuit.winners == "any" else ()
            single = (Single(self.diagrams, guard, names),)
            arrivals = arrivals + Moves(single, joint, single)
        return self.held + arrivals

    def _arrival(self, name: str) -> Set:
        """Where an outstanding input may change next, such that the others can follow."""
        vector = {x: not_(var(x)) if x == name else var(x) for x in self.waiting}
        left = {x: FALSE if x == name else var(outstanding(x)) for x in self.waiting}
        return self.diagrams.of(and_(var(outstanding(name)), self._finishing(vector, left)))

    def _finishing(self, vector: Mapping[str, Expr], left: Mapping[str, Expr]) -> Expr:
        try:
            return finishing(self.assume, vector, left)
        except TooManyOrders as error:
            self.limits.refuse(str(error))
            raise

    def _freely(self) -> Moves:
        d = self.diagrams
        movers = {s: self.excited[s] if s in self.excited else self.guards[s] for s in self._order()}
        single = [Single(d, may if s in self.excited else may & self.admitted(s), (s,)) for s, may in movers.items()]
        joint = Joint(d, movers, self.circuit.exclusive, d.true, (), d.of(self.assume))
        return Moves(tuple(single), (joint,) if self.circuit.winners == "any" else (), self._fast(single))

    # ---- the environment -----------------------------------------------------------------------------------------

    @cached_property
    def changes(self) -> Moves:
        """What the environment begins in rest, in fundamental mode. That nothing changes may be among it."""
        if self.free:
            return Moves(())
        if self.waiting:
            return Moves((self._pick(),), (), (self._pick(),))
        d = self.diagrams
        single = tuple(Single(d, self.rest & self.guards[x] & self.admitted(x), (x,)) for x in self.circuit.inputs)
        if self.environment.changes == "single":
            return Moves(single, (), single)
        movers = {x: self.guards[x] for x in self._order() if x in self.guards}
        return Moves(single, (Joint(d, movers, (), self.rest, (), d.of(self.assume)),), single)

    def _pick(self) -> Pick:
        names = [outstanding(x) for x in self.waiting]
        due = and_(*(or_(not_(var(outstanding(x))), self._guard(x)) for x in self.waiting))
        order = self._finishing({x: var(x) for x in self.waiting}, {x: var(outstanding(x)) for x in self.waiting})
        picked = self.diagrams.of(and_(due, order, or_(*map(var, names)))) & self.stable
        return Pick(self.diagrams, self.rest, picked, tuple(names))

    @cached_property
    def moves(self) -> Moves:
        """Every move."""
        return self.response + self.changes

    def disturbing(self, node: str) -> list[Plain]:
        """The moves in which a node holds and something that it reads may move; others may hold besides."""
        d = self.diagrams
        read = set(support(self.circuit.excitation[node])) - {node}
        if self.circuit.winners == "one":
            return [move for move in self.response.single if isinstance(move, Single) and read & set(move.names)]
        movers = {n: self.excited[n] for n in self._order() if n in self.excited and n in read}
        pairs = [pair for pair in self.circuit.exclusive if movers.keys() >= set(pair)]
        if self.free:
            movers |= self.guards
            return [Joint(d, movers, pairs, d.true, (), d.of(self.assume))]
        arrivals = [Joint(d, movers, pairs, self._arrival(x), (x, outstanding(x))) for x in self.waiting if x in read]
        return [Joint(d, movers, pairs, d.true), *arrivals]

    @cached_property
    def pressing(self) -> list[tuple[str, Set]]:
        """What must not wait for ever, and where it presses: nodes, `must` inputs, and what is outstanding."""
        d = self.diagrams
        must = [x for x in self.circuit.inputs if self.environment.guard(x).must]
        found = [*self.excited.items(), *((x, self.guards[x] & self.admitted(x)) for x in must)]
        return [*found, *((outstanding(x), d.manager.var(outstanding(x))) for x in self.waiting)]
