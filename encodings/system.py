"""A circuit in its environment as a transition system over one copy of the present state.

A step picks values for the `selectors`, every choice of which is lawful; then each variable takes, independently of
all others, a value that it may take: `may[v] = (may be 0, may be 1)`, two expressions over the present state and the
selectors. Nodes hold or follow; inputs, what is outstanding of a burst, and observers have one next value, given the
selectors. A step in which nothing moves is always among the choices.

So a step into the states of a cube exists from a state exactly when, for some selectors, every literal of the cube
may become true: no second copy of the circuit and no primed variables. Because nodes choose on their own, this is
exact and not an approximation.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cached_property

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import FALSE, TRUE, Expr, and_, ite, not_, or_, rename, support, var, xor

May = tuple[Expr, Expr]

ORDERED = 8


class TooManyOrders(Exception):
    """`assume` restricts the orders of a burst through more inputs than can be spelt out."""


def forced(following: Expr) -> May:
    """What a variable may become when `following` is its next value."""
    return not_(following), following


@dataclass(frozen=True, eq=False)
class System:
    """A transition system; see the head of this module.

    * `may`: for each variable whether it may be 0 and may be 1 next. The circuit's inputs and nodes come first.
    * `start`: the initial states; `always`: true in every reachable state (the assumptions).
    * `rest`: the circuit is stable and nothing is outstanding: a response is over.
    * `restraint`: what was forbidden beyond the semantics.
    """

    circuit: Circuit
    environment: Environment
    may: Mapping[str, May]
    selectors: tuple[str, ...]
    start: Expr
    always: Expr
    rest: Expr
    restraint: Restraint

    @cached_property
    def number(self) -> dict[str, int]:
        """Position of each variable, from 1."""
        return {v: i for i, v in enumerate(self.variables, 1)}

    @cached_property
    def base(self) -> tuple[str, ...]:
        """The variables of the circuit and its environment, without those that watch."""
        return (*self.circuit.signals, *map(outstanding, waiting_inputs(self.circuit, self.environment)))

    @cached_property
    def environs(self) -> tuple[str, ...]:
        """The variables of the environment: inputs, and what is outstanding."""
        return tuple(v for v in self.base if v not in self.circuit.excitation)

    @cached_property
    def one_copy(self) -> Mapping[str, May]:
        """`may` over the present and the selectors alone: what speaks of values after the step is spelt out."""
        names = {after(v): self.may[v][1] for v in self.base if self.may[v][0] is not_(self.may[v][1])}
        watching = {v: tuple(rename(self.may[v], names)) for v in self.watching}
        return {**{v: self.may[v] for v in self.base}, **{v: (zero, one) for v, (zero, one) in watching.items()}}

    @cached_property
    def variables(self) -> tuple[str, ...]:
        """The variables of a state."""
        return tuple(self.may)

    def next_value(self, name: str) -> Expr:
        """The value of a variable after a step, over the present, the selectors and one choice for each free node."""
        zero, one = self.may[name]
        return one if zero is not_(one) else ite(and_(zero, one), var(f"{name} follows"), one)

    @cached_property
    def watching(self) -> tuple[str, ...]:
        """The variables beyond those of the circuit and its environment."""
        return self.variables[len(self.base) :]

    @cached_property
    def input_changes(self) -> Expr:
        """Whether some input changes in a step, over the present and the selectors."""
        return or_(*(xor(var(x), self.may[x][1]) for x in self.circuit.inputs))

    def observed(self, observers: Iterable[Observer], selectors: Sequence[str] = ()) -> System:
        """The system with observers beside it, which may make choices of their own."""
        watching = list(observers)
        begins = [not_(xor(var(o.name), o.first)) for o in watching]
        return replace(
            self,
            may={**self.may, **{o.name: forced(o.following) for o in watching}},
            selectors=(*self.selectors, *selectors),
            start=and_(self.start, *begins),
        )


@dataclass(frozen=True)
class Restraint:
    """What is forbidden for the sake of a question.

    * `held`: conditions, over the present and selectors, under which an input or node does not move.
    * `picks`: where the environment may begin a change in fundamental mode.
    """

    held: Mapping[str, Expr] = field(default_factory=dict)
    picks: Expr = TRUE


@dataclass(frozen=True)
class Observer:
    """A variable that watches: its first value over the first state, its next value over the present state."""

    name: str
    first: Expr
    following: Expr


def after(name: str) -> str:
    """The value of an input, or of what is outstanding, after the step; only variables that watch may read it."""
    return f"{name} after"


def outstanding(name: str) -> str:
    """The variable that says that an input of the present burst has yet to change."""
    return f"{name} outstanding"


def system(circuit: Circuit, environment: Environment, restraint: Restraint = Restraint()) -> System:  # noqa: B008
    """The transition system of a circuit in its environment.

    Raises `TooManyOrders` under `burst` when `assume` reads more than eight inputs.
    """
    return _Making(circuit, environment, restraint).system()


def waiting_inputs(circuit: Circuit, environment: Environment) -> tuple[str, ...]:
    """The inputs that can be outstanding: all under `burst`, else none."""
    return circuit.inputs if environment.mode == "fundamental" and environment.changes == "burst" else ()


class _Making:
    def __init__(self, circuit: Circuit, environment: Environment, restraint: Restraint) -> None:
        self.circuit, self.environment = circuit, environment
        self.how = environment.changes if environment.mode == "fundamental" else "input-output"
        self.waiting = waiting_inputs(circuit, environment)
        self.assume = and_(*circuit.resolve(*environment.assume))
        self.rest = and_(circuit.is_stable, *(not_(var(outstanding(x))) for x in self.waiting))
        self.restraint = restraint
        self.selectors: list[str] = []

    def system(self) -> System:
        alone = self._movers()
        may = {**self._inputs(alone), **self._nodes(alone)}
        names = (*self.circuit.signals, *map(outstanding, self.waiting))
        return System(
            self.circuit,
            self.environment,
            {name: may[name] for name in names},
            tuple(self.selectors),
            self._start(),
            self.assume,
            self.rest,
            self.restraint,
        )

    def _free(self, name: str) -> Expr:
        return not_(self.restraint.held.get(name, FALSE))

    def _select(self, name: str) -> Expr:
        self.selectors.append(name)
        return var(name)

    # ---- who moves -----------------------------------------------------------------------------------------------

    def _movers(self) -> dict[str, Expr]:
        """For those of whom at most one moves in a step, whether it is the one."""
        single = self.circuit.winners == "one"
        some = self.how in ("single", "burst") or (single and self.how == "input-output")
        names = [*(self.circuit.inputs if some else ()), *(self.circuit.nodes if single else ())]
        bits = [self._select(f"mover bit {i}") for i in range(len(names).bit_length())]
        return {name: _equals(bits, number) for number, name in enumerate(names, 1)}

    def _turns(self) -> dict[str, list[Expr]]:
        """For the nodes of exclusive pairs, whether it is theirs to move."""
        found: dict[str, list[Expr]] = {}
        for i, (one, other) in enumerate(self.circuit.exclusive):
            turn = self._select(f"turn {i}")
            found.setdefault(one, []).append(turn)
            found.setdefault(other, []).append(not_(turn))
        return found

    def _nodes(self, alone: Mapping[str, Expr]) -> dict[str, May]:
        found, turns = {}, self._turns()
        for n in self.circuit.nodes:
            now, target = var(n), self.circuit.excitation[n]
            free = and_(self._free(n), *turns.get(n, ()))
            if n in alone:
                found[n] = forced(ite(and_(alone[n], free), target, now))
            else:
                found[n] = or_(not_(now), and_(free, not_(target))), or_(now, and_(free, target))
        return found

    def _inputs(self, alone: Mapping[str, Expr]) -> dict[str, May]:
        chosen = {x: alone[x] if x in alone else self._select(f"{x} chosen") for x in self.circuit.inputs}
        if self.waiting:
            return self._burst(chosen)
        when = and_(self.rest, self.restraint.picks) if self.how != "input-output" else TRUE
        flips = {x: and_(c, self._guard(x), when, self._free(x)) for x, c in chosen.items()}
        lawful = rename([self.assume], {x: xor(var(x), f) for x, f in flips.items()})[0]
        return {x: forced(xor(var(x), and_(f, lawful))) for x, f in flips.items()}

    def _burst(self, first: Mapping[str, Expr]) -> dict[str, May]:
        """`first`: the one that arrives. In rest a burst is picked, and one of its members arrives at once."""
        due = {}
        for x in self.waiting:
            picked = and_(self._select(f"{x} picked"), self.rest, self._guard(x), self.restraint.picks)
            due[x] = or_(var(outstanding(x)), picked)
        arrives = {x: and_(first[x], due[x], self._free(x)) for x in self.waiting}
        left = {x: and_(due[x], not_(first[x])) for x in self.waiting}
        vector = {x: xor(var(x), arrives[x]) for x in self.waiting}
        lawful = and_(or_(*arrives.values()), finishing(self.assume, vector, left))
        found = {x: forced(xor(var(x), and_(arrives[x], lawful))) for x in self.waiting}
        for x in self.waiting:
            found[outstanding(x)] = forced(ite(lawful, left[x], var(outstanding(x))))
        return found

    def _guard(self, name: str) -> Expr:
        guard = self.environment.guard(name)
        rises, falls = self.circuit.resolve(guard.rises, guard.falls)
        return ite(var(name), falls, rises)

    # ---- where it begins -----------------------------------------------------------------------------------------

    def _start(self) -> Expr:
        given = [xor(self.circuit.signal(s), FALSE if v else TRUE) for s, v in self.environment.start.items()]
        begins = self.rest if self.environment.mode == "fundamental" else TRUE
        return and_(self.assume, *given, begins)


def _equals(bits: Sequence[Expr], number: int) -> Expr:
    return and_(*(b if number >> i & 1 else not_(b) for i, b in enumerate(bits)))


def finishing(assume: Expr, vector: Mapping[str, Expr], left: Mapping[str, Expr]) -> Expr:
    """Whether an input vector is admitted, and the inputs `left` can change one after the other with every vector
    on the way admitted. Spelt out over the sets of inputs that have changed; only those that `assume` reads count.

    Raises `TooManyOrders` when these are more than eight.
    """
    read = [x for x in vector if x in set(support(assume))]
    if len(read) > ORDERED:
        raise TooManyOrders(f"`assume` reads {len(read)} inputs; under `burst` at most {ORDERED} can be spelt out")
    done: dict[int, Expr] = {}
    for changed in reversed(range(1 << len(read))):
        here = {x: not_(vector[x]) if changed >> i & 1 else vector[x] for i, x in enumerate(read)}
        others = [(x, changed | 1 << i) for i, x in enumerate(read) if not changed >> i & 1]
        over = and_(*(not_(left[x]) for x, _ in others))
        more = or_(*(and_(left[x], done[after]) for x, after in others))
        done[changed] = and_(rename([assume], here)[0], or_(over, more))
    return done[0]
