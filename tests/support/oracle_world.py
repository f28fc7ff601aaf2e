"""A circuit in its environment, enumerated as literally as the definitions read: the ground of the naive oracle.

Shares nothing with the engines: of a circuit and an environment it reads the plain data only, and it evaluates
expressions with its own recursion. Clarity before speed; meant for up to 5 nodes and 3 inputs.

* A total state is the set of the inputs and nodes that are 1.
* A change of the environment in fundamental mode is a schedule: the sets of inputs that change, one set an instant.
  `single` and `simultaneous` have one instant, `burst` has one for each of its members, in the order of arrival.
* A situation is a total state and the instants of the present change that are still to come.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Hashable, Iterable, Iterator
from functools import cache, cached_property
from itertools import combinations, permutations
from typing import NamedTuple, TypeVar

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr

State = frozenset[str]
Schedule = tuple[frozenset[str], ...]
V = TypeVar("V", bound=Hashable)


class Situation(NamedTuple):
    """A total state, and the instants of the present burst that are outstanding."""

    state: State
    waiting: Schedule = ()


class Unaskable(ValueError):
    """The question is an input error: it has no answer."""


def parts(names: Iterable[str], winners: str = "any") -> Iterator[frozenset[str]]:
    """The non-empty subsets of `names`; with `winners = "one"` those with one member."""
    members = sorted(names)
    for size in range(1, 2 if winners == "one" else len(members) + 1):
        yield from map(frozenset, combinations(members, size))


def reach(starts: Iterable[V], after: Callable[[V], Iterable[V]]) -> set[V]:
    """Everything that can be reached from `starts` in any number of moves, none included."""
    seen = set(starts)
    todo = list(seen)
    while todo:
        for v in after(todo.pop()):
            if v not in seen:
                seen.add(v)
                todo.append(v)
    return seen


def _last_first(vertices: set[V], after: Callable[[V], Iterable[V]]) -> list[V]:
    """Vertices in the reverse of the order in which a depth-first search leaves them."""
    left: list[V] = []
    seen: set[V] = set()
    for root in vertices:
        path = [] if root in seen else [(root, iter(after(root)))]
        seen.add(root)
        while path:
            v, rest = path[-1]
            step = next((w for w in rest if w in vertices and w not in seen), None)
            if step is None:
                left.append(path.pop()[0])
            else:
                seen.add(step)
                path.append((step, iter(after(step))))
    return left[::-1]


def components(vertices: set[V], after: Callable[[V], Iterable[V]]) -> list[set[V]]:
    """The strongly connected components of the graph on `vertices` that have an edge inside (Kosaraju, recalled)."""
    before: dict[V, set[V]] = {v: set() for v in vertices}
    for v in vertices:
        for w in after(v):
            if w in vertices:
                before[w].add(v)
    taken: set[V] = set()
    found = []
    for root in _last_first(vertices, after):
        if root not in taken:
            part = reach([root], lambda v: before[v] - taken)
            taken.update(part)
            if len(part) > 1 or root in before[root]:
                found.append(part)
    return found


class World:
    """What may happen, and when."""

    def __init__(self, circuit: Circuit, environment: Environment) -> None:
        self.circuit, self.environment = circuit, environment
        self.starts = cache(self._starts)
        self.excited = cache(self._excited)
        self.admits = cache(self._admits)
        self.willing = cache(self._willing)
        self.schedules = cache(self._schedules)
        self.respond = cache(self._respond)
        self.moves = cache(self._moves)
        self.held = cache(self._held)

    # ---- total states ------------------------------------------------------------------------------------------

    def value(self, e: Expr, state: State) -> bool:
        """The value of an expression in a total state."""
        match e.op:
            case "const":
                return e.name == "1"
            case "var":
                return self.signal(e.name, state)
            case "stable":
                return self.stable(state)
            case "excited":
                return e.name in self.excited(state)
            case "not":
                return not self.value(e.args[0], state)
            case "and":
                return all(self.value(a, state) for a in e.args)
            case "or":
                return any(self.value(a, state) for a in e.args)
            case "xor":
                return sum(self.value(a, state) for a in e.args) % 2 == 1
            case "ite":
                condition, then, otherwise = e.args
                return self.value(then if self.value(condition, state) else otherwise, state)
        raise ValueError(f"no such operator: {e.op}")

    def signal(self, name: str, state: State) -> bool:
        """The value of an input, node or defined signal."""
        defined = self.circuit.defined
        if name in defined:
            return self.value(defined[name], state)
        if name not in self.circuit.inputs and name not in self.circuit.nodes:
            raise Unaskable(f"no such signal: {name}")
        return name in state

    def _excited(self, state: State) -> State:
        """The nodes whose excitation function differs from their value."""
        excitation = self.circuit.excitation
        return frozenset(n for n in self.circuit.nodes if self.value(excitation[n], state) != (n in state))

    def stable(self, state: State) -> bool:
        """Whether no node is excited."""
        return not self.excited(state)

    def inputs(self, state: State) -> State:
        """The inputs that are 1: the input vector."""
        return state & frozenset(self.circuit.inputs)

    def _admits(self, state: State) -> bool:
        """Whether the input vector satisfies `assume`."""
        return all(self.value(e, state) for e in self.environment.assume)

    def vectors(self) -> list[State]:
        """Every input vector that `assume` allows."""
        return [v for v in (frozenset(), *parts(self.circuit.inputs)) if self.admits(v)]

    def completions(self, vector: State) -> list[State]:
        """Every total state with this input vector."""
        return [vector | internal for internal in (frozenset(), *parts(self.circuit.nodes))]

    # ---- the circuit while its inputs are held -------------------------------------------------------------------

    def _held(self, state: State) -> list[State]:
        """The total states that one step reaches: a non-empty set of excited nodes switches, or exactly one."""
        return [state ^ part for part in self.switchings(self.excited(state))]

    def switchings(self, names: Iterable[str]) -> Iterator[frozenset[str]]:
        """What may switch in one step when `names` may: never both nodes of an exclusive pair."""
        pairs = [frozenset(pair) for pair in self.circuit.exclusive]
        return (p for p in parts(names, self.circuit.winners) if not any(pair <= p for pair in pairs))

    def oscillations(self, states: Iterable[State]) -> list[set[State]]:
        """The sustained oscillations that can be entered from `states` with the inputs held."""
        graph = reach(states, self.held)
        return [c for c in components(graph, self.held) if self.goes_round(c, self.excited)]

    def goes_round(self, component: Iterable[State], pressing: Callable[[State], State]) -> bool:
        """Whether nothing in `pressing` is there with the same value in all states of a component."""
        states = list(component)
        always = frozenset.intersection(*map(pressing, states))
        return all(len({name in s for s in states}) == 2 for name in always)

    def stable_ends(self, states: Iterable[State]) -> set[State]:
        """The stable total states that can be reached from `states` with the inputs held."""
        return {s for s in reach(states, self.held) if self.stable(s)}

    # ---- the environment -----------------------------------------------------------------------------------------

    @property
    def fundamental(self) -> bool:
        """Whether inputs change in stable total states only."""
        return self.environment.mode == "fundamental"

    def _starts(self) -> set[State]:
        """The total states in which runs begin. Raises `Unaskable` when there is none."""
        wanted = self.environment.start
        found = {
            s
            for vector in self.vectors()
            for s in self.completions(vector)
            if all(self.signal(name, s) == bool(v) for name, v in wanted.items())
            and (self.stable(s) or not self.fundamental)
        }
        if not found:
            raise Unaskable("no total state satisfies `start`")
        return found

    def _willing(self, state: State) -> State:
        """The inputs whose guard lets them change: one at 0 may rise, one at 1 may fall."""
        guards = {x: self.environment.guard(x) for x in self.circuit.inputs}
        return frozenset(x for x, g in guards.items() if self.value(g.falls if x in state else g.rises, state))

    def lawful(self, state: State, schedule: Schedule) -> bool:
        """Whether every vector on the way satisfies `assume`."""
        for instant in schedule:
            state = state ^ instant
            if not self.admits(state):
                return False
        return True

    def _schedules(self, state: State) -> set[Schedule]:
        """The changes that the environment may pick in a stable total state, in fundamental mode."""
        if not self.fundamental or not self.stable(state):
            return set()
        found: set[Schedule] = set()
        for chosen in parts(self.willing(state), "one" if self.environment.changes == "single" else "any"):
            if self.environment.changes == "burst":
                found.update(tuple(frozenset({x}) for x in order) for order in permutations(chosen))
            else:
                found.add((chosen,))
        return {schedule for schedule in found if self.lawful(state, schedule)}

    def begin(self, state: State, schedule: Schedule) -> Situation:
        """The situation right after the first instant of a change; nothing else can move in a stable state."""
        return Situation(state ^ schedule[0], schedule[1:])

    def changes(self, state: State) -> dict[frozenset[str], set[Schedule]]:
        """The sets of inputs that may change from a stable state, each with the schedules that do it."""
        found: dict[frozenset[str], set[Schedule]] = {}
        for schedule in self.schedules(state):
            found.setdefault(frozenset().union(*schedule), set()).add(schedule)
        return found

    def _respond(self, at: Situation) -> set[Situation]:
        """One step of the response to a change: nodes switch, or the next member of the burst arrives, or both."""
        steps = self.held(at.state)
        after = {Situation(s, at.waiting) for s in steps}
        if at.waiting:
            together = steps if self.circuit.winners == "any" else []
            after |= {Situation(s ^ at.waiting[0], at.waiting[1:]) for s in [at.state, *together]}
        return after

    def ended(self, at: Situation) -> bool:
        """Whether the response to a change is over: the circuit is stable with no member outstanding."""
        return not at.waiting and self.stable(at.state)

    def response(self, state: State, schedules: Iterable[Schedule]) -> set[Situation]:
        """All situations in the response to a change that follows one of `schedules`."""
        return reach((self.begin(state, schedule) for schedule in schedules), self.respond)

    def ends(self, state: State, schedules: Iterable[Schedule]) -> set[State]:
        """The stable total states in which the response to a change can end."""
        return {at.state for at in self.response(state, schedules) if self.ended(at)}

    # ---- both together -------------------------------------------------------------------------------------------

    def _moves(self, at: Situation) -> set[Situation]:
        """One step of the circuit or change of the environment, whichever may come next."""
        if not self.fundamental:
            movers = self.excited(at.state) | self.willing(at.state)
            after = (at.state ^ part for part in self.switchings(movers))
            return {Situation(s) for s in after if self.admits(s)}
        picked = {self.begin(at.state, s) for s in self.schedules(at.state)} if self.ended(at) else set()
        return self.respond(at) | picked

    @cached_property
    def reachable(self) -> set[Situation]:
        """Everything reachable from `start`."""
        return reach(map(Situation, self.starts()), self.moves)

    def pressing(self, state: State) -> State:
        """What may not wait for ever: excited nodes, and `must` inputs whose guard is true and that `assume` admits.

        "`assume` admits the change" is read as: of this input alone, whatever else could change with it.
        """
        must = frozenset(x for x in self.circuit.inputs if self.environment.guard(x).must)
        return self.excited(state) | {x for x in self.willing(state) & must if self.admits(state ^ {x})}


_recent: deque[World] = deque(maxlen=4)


def world_of(circuit: Circuit, environment: Environment) -> World:
    """The world of a circuit in an environment: the one that was made last for the two, with what it knows."""
    for world in _recent:
        if world.circuit is circuit and world.environment is environment:
            return world
    _recent.append(World(circuit, environment))
    return _recent[-1]
