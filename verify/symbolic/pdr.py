"""Property-directed reachability (Bradley 2011, "SAT-based model checking without unrolling"; Eén, Mishchenko and
Brayton 2011, "Efficient implementation of property directed reachability"; both recalled) on one copy of a system.

Frame k is a set of clauses that are true in every state reachable in k steps or fewer. A clause is kept in the last
frame it is known for (delta sets). A cube that leads to the bad states is blocked in a frame when the query
"frame before, not the cube, every literal of the cube may become true" has no model; the core over these `may`
literals is a generalised cube already.
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable, Sequence
from dataclasses import dataclass, field
from heapq import heappop, heappush

from settled.models.logic import Expr, support
from settled.verify.symbolic.formula import Cube, Formula, Progress, Query

RETIRED = 1_000
DROPS = 40


@dataclass(frozen=True)
class Invariant:
    """Clauses that are true in every reachable state, inductive together, and exclude the bad states."""

    clauses: tuple[Cube, ...]


@dataclass(frozen=True)
class Path:
    """States of the system from a start state to a bad one, each as a cube of all its literals."""

    states: tuple[Cube, ...]


@dataclass(frozen=True)
class Obligation:
    """Every state of `cube` can move into `then`, and so on to a bad state."""

    cube: Cube
    then: Obligation | None = None


@dataclass
class Frame:
    """The clauses known last for this frame, as cubes that they forbid, and the solver for it and all later ones."""

    query: Query
    cubes: set[Cube] = field(default_factory=set)
    retired: int = 0


class Pdr:
    """One question: can a state with `bad` true be reached?

    `seeds`: clauses known to be true in every reachable state and inductive together.
    """

    def __init__(self, formula: Formula, bad: Expr, progress: Progress, seeds: Iterable[Cube] = ()) -> None:
        self.formula = formula
        self.bad = self.formula.literal(bad)
        self.progress, self.seeds = progress, list(seeds)
        self.start = Query(self.formula, progress, [[self.formula.start], *self.seeds])
        self.lifting = Query(self.formula, progress)
        self.frames = [Frame(self.start)]
        self._last: dict[Cube, int] = {}
        self._about: dict[int, set[Cube]] = defaultdict(set)
        self._free = self._choices(bad)

    def _choices(self, bad: Expr) -> list[int]:
        names = [*self.formula.system.selectors, *support(bad)]
        known = set(self.formula.state)
        return list(dict.fromkeys(v for v in map(self.formula.variable, names) if v not in known))

    # ---- the search ----------------------------------------------------------------------------------------------

    def run(self) -> Invariant | Path:
        """Decide. Raises `LimitReached`."""
        if self.start.solve([self.bad]):
            return Path((self._state(self.start.model()),))
        while True:
            self.frames.append(Frame(self._solver(len(self.frames))))
            self.progress.at(f"frame {len(self.frames) - 1} of the symbolic search")
            if (inductive := self._propagate()) is not None:
                return Invariant(tuple(sorted(tuple(-lit for lit in cube) for cube in inductive) + self.seeds))
            found = self._strengthen()
            if found is not None:
                return found

    def _strengthen(self) -> Path | None:
        """Exclude the bad states from the last frame, or find a path to one."""
        last = self.frames[-1].query
        while last.solve([self.bad]):
            model = last.model()
            chosen = [model[v - 1] for v in self._free]
            cube = self._lift(model, chosen, [-self.bad])
            path = self._block(Obligation(cube), len(self.frames) - 1)
            if path is not None:
                return path
            last = self.frames[-1].query
        return None

    def _block(self, first: Obligation, frame: int) -> Path | None:
        """Exclude a cube from a frame, and before it whatever leads there; or a path."""
        count = 0
        queue: list[tuple[int, int, Obligation]] = []
        waiting = [(frame, first)]
        while waiting or queue:
            for at, obligation in waiting:
                count += 1
                if self.start.solve(obligation.cube):
                    return self._path(obligation)
                heappush(queue, (at, count, obligation))
            at, _, obligation = heappop(queue)
            waiting = self._work(at, obligation)
        return None

    def _work(self, at: int, obligation: Obligation) -> list[tuple[int, Obligation]]:
        """Block an obligation, or put another before it; what is to be done next."""
        before = self._before(at, obligation.cube)
        if isinstance(before, Obligation):
            again = Obligation(before.cube, obligation)
            return [(at - 1, again), (at, obligation)]
        cube = before
        while at < len(self.frames) - 1 and (core := self._inductive(at + 1, obligation.cube)) is not None:
            cube, at = core, at + 1
        cube = self._smaller(at, cube)
        self._learn(at, cube)
        return [(at + 1, obligation)] if at + 1 < len(self.frames) else []

    def _before(self, at: int, cube: Cube) -> Obligation | Cube:
        """A cube of the frame before that leads into `cube`; or the generalised cube, if there is none."""
        frame = self.frames[at - 1]
        if self._blocked(frame, cube):
            return self._with_start(cube, frame.query.core())
        model = frame.query.model()
        chosen = [model[v - 1] for v in self.formula.selectors]
        return Obligation(self._lift(model, chosen, [-self.formula.may[lit] for lit in cube]))

    def _blocked(self, frame: Frame, cube: Cube) -> bool:
        """Whether no state of the frame outside the cube moves into it."""
        if frame.retired > RETIRED and frame is not self.frames[0]:
            self._renew(frame)
        outside = frame.query.fresh()
        frame.query.add([-outside, *(-lit for lit in cube)])
        frame.retired += 1
        found = frame.query.solve([outside, *(self.formula.may[lit] for lit in cube)])
        frame.query.add([-outside])
        return not found

    def _inductive(self, at: int, cube: Cube) -> Cube | None:
        """The generalised cube when it is blocked in frame `at`."""
        frame = self.frames[at - 1]
        return self._with_start(cube, frame.query.core()) if self._blocked(frame, cube) else None

    def _with_start(self, cube: Cube, core: set[int]) -> Cube:
        """The literals of `cube` whose `may` is in the core, and more if a start state would be excluded."""
        kept = tuple(lit for lit in cube if self.formula.may[lit] in core)
        if not self.start.solve(kept):
            return kept
        self.start.solve(cube)
        needed = self.start.core()
        return tuple(lit for lit in cube if lit in needed or self.formula.may[lit] in core)

    def _smaller(self, at: int, cube: Cube) -> Cube:
        """Drop literals while the cube stays blocked and no start state is in it, within a budget of failures."""
        failures = 0
        for lit in cube:
            if failures >= DROPS or len(cube) == 1:
                break
            if lit not in cube:
                continue
            rest = tuple(k for k in cube if k != lit)
            smaller = None if self.start.solve(rest) else self._inductive(at, rest)
            if smaller is None:
                failures += 1
            else:
                cube = smaller
        return cube

    # ---- frames --------------------------------------------------------------------------------------------------

    def _solver(self, at: int) -> Query:
        known = [cube for frame in self.frames[at:] for cube in frame.cubes]
        return Query(self.formula, self.progress, [*self.seeds, *([-lit for lit in cube] for cube in sorted(known))])

    def _renew(self, frame: Frame) -> None:
        frame.query.close()
        frame.query, frame.retired = self._solver(self.frames.index(frame)), 0

    def _learn(self, at: int, cube: Cube) -> None:
        """Exclude a cube from the frames up to `at`, and forget the cubes within it that are known for no more."""
        within = set.intersection(*(self._about[lit] for lit in cube))
        for inner in [c for c in within if self._last[c] <= at]:
            self._forget(inner)
        for frame in self.frames[1 : at + 1]:
            frame.query.add([-lit for lit in cube])
        self._keep(at, cube)

    def _forget(self, cube: Cube) -> None:
        self.frames[self._last.pop(cube)].cubes.discard(cube)
        for lit in cube:
            self._about[lit].discard(cube)

    def _keep(self, at: int, cube: Cube) -> None:
        self._last[cube] = at
        self.frames[at].cubes.add(cube)
        for lit in cube:
            self._about[lit].add(cube)

    def _move(self, cube: Cube) -> None:
        """A cube is excluded from one more frame."""
        at = self._last[cube]
        self.frames[at].cubes.discard(cube)
        self.frames[at + 1].query.add([-lit for lit in cube])
        self._keep(at + 1, cube)

    def _propagate(self) -> list[Cube] | None:
        """Move clauses on to the frames after; the clauses of an inductive frame when there is one."""
        for at in range(1, len(self.frames) - 1):
            for cube in sorted(self.frames[at].cubes):
                if cube in self.frames[at].cubes and (core := self._inductive(at + 1, cube)) is not None:
                    if core == cube:
                        self._move(cube)
                    else:
                        self._learn(at + 1, core)
            if not self.frames[at].cubes:
                return [c for frame in self.frames[at + 1 :] for c in frame.cubes]
        return None

    # ---- states --------------------------------------------------------------------------------------------------

    def _state(self, model: list[int]) -> Cube:
        return tuple(model[v - 1] for v in self.formula.state)

    def _lift(self, model: list[int], chosen: Sequence[int], none_of: Sequence[int]) -> Cube:
        """The literals of the model's state that, with the chosen selectors, exclude the clause `none_of`."""
        wanted = self.lifting.fresh()
        self.lifting.add([-wanted, *none_of])
        state = self._state(model)
        assert not self.lifting.solve([wanted, *chosen, *state]), "a state that leads on lifts to a cube that does"
        core = self.lifting.core()
        self.lifting.add([-wanted])
        return tuple(lit for lit in state if lit in core)

    def _path(self, obligation: Obligation) -> Path:
        """Concrete states through the cubes, from the start state that the last query found."""
        states = [self._state(self.start.model())]
        at = obligation.then
        while at is not None:
            states.append(self._step(states[-1], at.cube))
            at = at.then
        return Path(tuple(states))

    def _step(self, state: Cube, target: Cube) -> Cube:
        """A state of `target` one step after `state` in which nothing moves that need not."""
        may = self.formula.may
        found = self.lifting.solve([*state, *(may[lit] for lit in target)])
        assert found, "a state of a lifted cube leads on"
        model = self.lifting.model()
        fixed = {abs(lit): lit for lit in target}
        stays = (lit if model[abs(may[lit]) - 1] == may[lit] else -lit for lit in state)
        return tuple(fixed.get(abs(lit), lit) for lit in stays)
