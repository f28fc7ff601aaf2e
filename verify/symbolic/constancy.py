"""What is constant in the end: an argument about the states that a fair run goes on visiting for ever.

Take a run without end, and the states W that it visits again and again; some formula `far` holds in all of them, and
so do the clauses that hold in every reachable state. A set K of variables is known to be constant in W.

* If of no two states that satisfy all this and agree on K one lets `v` rise and the other lets `v` fall, then `v` does
  not do both in W. It is constant there, and joins K.
* If `v` is in K and of no two such states it presses in one and not in the other, then it presses in all of W or in
  none. In all it cannot: the run is fair (an excited node, or a `must` input that may change, does not wait for ever;
  a burst is finished). So it presses in no state of W, which is one more thing that is known.

Each step is a question about two copies of the state that agree on K; no values of K need to be known. When nothing
satisfies all that is known, W is empty: there is no such run. When all nodes are in K, the run comes to rest.

Justice towards each excitation: Lehmann, Pnueli and Stavi, "Impartiality, justice and fairness", 1981 (recalled).
"""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Callable, Container, Iterable, Sequence
from dataclasses import dataclass
from functools import cached_property

from pysat.solvers import Solver

from settled.encodings.clauses import Clauses
from settled.encodings.motions import Motion, motions, pressing
from settled.encodings.smtlib import script
from settled.encodings.system import System
from settled.models.logic import FALSE, TRUE, Expr, and_, not_, or_, rename, support, var, xor
from settled.verify.asking import has_model
from settled.verify.limits import Limits
from settled.verify.symbolic.certificates import BATCH, CertificateFailed, Clause, batched, expression, impossible
from settled.verify.symbolic.formula import SOLVER, Progress

CONSTANT, AT_REST = "constant", "at rest"


@dataclass(frozen=True)
class Step:
    """One step of the argument: a variable joins K (`constant`) or presses no more (`at rest`)."""

    name: str
    becomes: str


Choice = Callable[[str], Step | None]


def other(name: str) -> str:
    """The variable of the second copy."""
    return f"{name} other"


class World:
    """What the steps about a system mean. `held`: variables that are constant from the beginning."""

    def __init__(self, made: System, held: Iterable[str]) -> None:
        self.system, self.held = made, tuple(held)
        self.copy = {v: var(other(v)) for v in made.variables}
        self._first = {other(v): v for v in made.variables}
        moving = motions(made.circuit, made.environment)
        self.motions: dict[str, Motion] = {v: m for v, m in moving.items() if v not in self.held}
        self.presses = {v: e for v, e in pressing(made.circuit, made.environment).items() if v in self.motions}

    def first(self, *expressions: Expr) -> set[str]:
        """The variables that expressions over both copies read, as those of the first."""
        return {self._first.get(name, name) for name in support(*expressions)}

    def second(self, e: Expr) -> Expr:
        """An expression over the second copy."""
        return rename([e], self.copy)[0]

    def same(self, name: str) -> Expr:
        """The copies agree on a variable."""
        return not_(xor(var(name), self.copy[name]))

    def refutes(self, step: Step) -> Expr:
        """Two states that speak against a step."""
        if step.becomes == AT_REST:
            presses = self.presses[step.name]
            return and_(presses, not_(self.second(presses)))
        motion = self.motions[step.name]
        return and_(motion.rises, self.second(motion.falls))

    def gained(self, step: Step) -> Expr:
        """What is known of two states after a step."""
        if step.becomes == CONSTANT:
            return self.same(step.name)
        calm = not_(self.presses[step.name])
        return and_(calm, self.second(calm))


@dataclass(frozen=True)
class Derivation:
    """The argument about runs far out in which `far` holds. `clauses` hold in every reachable state of the system.

    `closed`: nothing satisfies all that is known in the end, so there is no such run.
    """

    world: World
    far: Expr
    clauses: tuple[Clause, ...]
    steps: tuple[Step, ...]
    closed: bool

    def statement(self, numbers: Container[int] | None = None) -> Expr:
        """That some step fails, the ones before it granted; or, if closed, that something is left after the last.

        `numbers`: of the steps in question, all of them if None.
        """
        known = and_(self.world.system.always, self.far, *map(expression, self.clauses))
        before = and_(*(self.world.same(v) for v in self.world.held))
        failures = []
        for i, step in enumerate(self.steps):
            if numbers is None or i in numbers:
                failures.append(and_(before, self.world.refutes(step)))
            before = and_(before, self.world.gained(step))
        return and_(known, self.world.second(known), or_(*failures, before if self.closed else FALSE))

    def near(self, numbers: Sequence[int]) -> Expr:
        """That one of some steps in a row fails, granted only what is known near them."""
        steps = [self.steps[i] for i in numbers]
        read = self.world.first(*map(self.world.refutes, steps))
        clauses = self._about(sorted(read))
        around = read | {v for clause in clauses for v, _ in clause}
        known = and_(self.world.system.always, self.far, *map(expression, clauses))
        granted = [self.world.same(v) for v in self.world.held if v in around]
        granted += [self.world.gained(step) for step in self.steps[: numbers[0]] if step.name in around]
        failures, before = [], TRUE
        for step in steps:
            failures.append(and_(before, self.world.refutes(step)))
            before = and_(before, self.world.gained(step))
        return and_(known, self.world.second(known), *granted, or_(*failures))

    def _about(self, names: Iterable[str]) -> list[Clause]:
        return list(dict.fromkeys(self.clauses[i] for name in names for i in self._places.get(name, ())))

    @cached_property
    def _places(self) -> dict[str, list[int]]:
        found: dict[str, list[int]] = defaultdict(list)
        for i, clause in enumerate(self.clauses):
            for name, _ in clause:
                found[name].append(i)
        return found

    def script(self) -> str:
        """The statement as a script of SMT-LIB 2.6: `n17` is a variable, `n17_other` the same in the second state."""
        words = [f"{step.name}: {step.becomes}" for step in self.steps]
        table = [f"{n} = {v}" for v, n in self._numbers.items()]
        first = ["in turn, what a fair run does in the end:", *words, "expected answer: unsat", *table]
        return self._script(self.statement(), first)

    @cached_property
    def _numbers(self) -> dict[str, str]:
        return {v: f"n{i}" for i, v in enumerate(self.world.system.variables)}

    def _script(self, statement: Expr, comments: Sequence[str] = ()) -> str:
        names = self._numbers | {other(v): f"{n}_other" for v, n in self._numbers.items()}
        return script([statement], names, comments)

    def check(self, limits: Limits) -> None:
        """Let z3 confirm all steps: those for which what is near suffices piece by piece, the others as a whole.

        Raises `CertificateFailed`, and `LimitReached` when time is up.
        """
        left: set[int] = set()
        for numbers in batched(range(len(self.steps)), BATCH):
            if not impossible(self._script(self.near(numbers)), limits):
                left |= set(numbers)
        if not impossible(self._script(self.statement(left)), limits):
            raise CertificateFailed("what is constant in the end: a step does not follow")

    def as_data(self) -> list[list[str]]:
        """For the result document: names and what becomes of them, in order."""
        return [[step.name, step.becomes] for step in self.steps]


class Finder:
    """Looks for the steps; what is learnt on the way (`learn`) makes more of them possible."""

    def __init__(self, world: World, far: Expr, clauses: Sequence[Clause], progress: Progress) -> None:
        self.world, self.far, self.progress = world, far, progress
        self.steps: list[Step] = []
        self.clauses: list[Clause] = []
        self._count, self._empty = 0, False
        self._solver = Solver(name=SOLVER)
        self._tseitin = Clauses(self._fresh, self._solver.add_clause)
        self._constant = set(world.held)
        self._calm: set[str] = set()
        self._pairs = {v: (self._tseitin.variable(v), self._tseitin.variable(other(v))) for v in world.system.variables}
        self._moves = {v: self._both(m.rises, m.falls) for v, m in world.motions.items()}
        self._presses = {v: self._both(e, e) for v, e in world.presses.items()}
        self._reads = {v: support(e) for v, e in world.presses.items()}
        self._require(world.system.always, far)
        for v in world.held:
            self._add(equal(self._pairs[v]))
        self.learn(clauses)

    def learn(self, clauses: Iterable[Clause]) -> bool:
        """Use more clauses that hold in every reachable state; whether there are any."""
        known = set(self.clauses)
        more = [clause for clause in clauses if clause not in known]
        self.clauses += more
        self._require(*map(expression, more))
        return bool(more)

    def close(self) -> None:
        """Free the solver."""
        self._solver.delete()

    @property
    def closed(self) -> bool:
        """Whether nothing satisfies all that is known."""
        return not self._solve([])

    @property
    def moving(self) -> list[str]:
        """The variables that are not known to be constant."""
        return [v for v in self.world.motions if v not in self._constant]

    def derivation(self) -> Derivation:
        """The argument as far as it goes."""
        return Derivation(self.world, self.far, tuple(self.clauses), tuple(self.steps), self.closed)

    def run(self) -> bool:
        """Take every step that can be taken, first those about what `far` speaks of and its neighbours; whether that
        leaves nothing."""
        near = self._near()
        begun = dict.fromkeys(v for v in (*support(self.far), *self.world.held) for v in (v, *near[v]))
        self._spread(begun, near, self._ripe)
        while not self.closed and self._spread(dict.fromkeys(self.world.motions), near, self._open):
            pass
        return self.closed

    def _spread(self, todo: dict[str, None], near: dict[str, set[str]], which: Choice) -> bool:
        """Take the steps that `which` offers about variables, then about those near by; whether there were any."""
        before = len(self.steps)
        while todo and not self._empty:
            name = next(iter(todo))
            del todo[name]
            while not self._empty and (step := which(name)) is not None and self._follows(step):
                self._take(step)
                todo |= dict.fromkeys(sorted(near[name]))
        return len(self.steps) > before

    def _ripe(self, name: str) -> Step | None:
        """The next step about a variable, unless it says that it does not press and this reads what may yet move."""
        step = self._open(name)
        if step is None or step.becomes == CONSTANT or self._constant.issuperset(self._reads[name]):
            return step
        return None

    def _open(self, name: str) -> Step | None:
        """The next step about a variable."""
        if name not in self.world.motions:
            return None
        if name not in self._constant:
            return Step(name, CONSTANT)
        return Step(name, AT_REST) if name in self.world.presses and name not in self._calm else None

    def _follows(self, step: Step) -> bool:
        """Whether no two states speak against the step."""
        self.progress.at(f"{len(self._constant)} of {len(self.world.motions)} signals constant in the end")
        one, two = self._moves[step.name] if step.becomes == CONSTANT else self._presses[step.name]
        return not self._solve([one, two if step.becomes == CONSTANT else -two])

    def _take(self, step: Step) -> None:
        self.steps.append(step)
        (self._constant if step.becomes == CONSTANT else self._calm).add(step.name)
        calm = [[-lit] for lit in self._presses[step.name]] if step.becomes == AT_REST else []
        self._add(calm or equal(self._pairs[step.name]))

    def _near(self) -> dict[str, set[str]]:
        """For each variable those whose conditions read it, and those that share a clause with it."""
        found: dict[str, set[str]] = defaultdict(set)
        for name, motion in self.world.motions.items():
            for read in support(motion.rises, motion.falls, self.world.presses.get(name, TRUE)):
                found[read].add(name)
        for clause in self.clauses:
            for v, _ in clause:
                found[v] |= {w for w, _ in clause if w in self.world.motions}
        return found

    # ---- the solver ----------------------------------------------------------------------------------------------

    def _fresh(self) -> int:
        self._count += 1
        return self._count

    def _both(self, one: Expr, two: Expr) -> tuple[int, int]:
        """The literals of an expression over the first copy and of one over the second."""
        return self._tseitin.literal(one), self._tseitin.literal(self.world.second(two))

    def _require(self, *expressions: Expr) -> None:
        self._tseitin.require(*expressions, *map(self.world.second, expressions))

    def _add(self, clauses: Iterable[Sequence[int]]) -> None:
        for clause in clauses:
            self._empty |= self._solver.add_clause(list(clause), no_return=False) is False

    def _solve(self, assumptions: Sequence[int]) -> bool:
        return has_model(self._solver, assumptions, self.progress.tick)


def equal(pair: tuple[int, int]) -> list[list[int]]:
    """The clauses that make two variables equal."""
    one, two = pair
    return [[-one, two], [one, -two]]


def quiet(world: World) -> Expr:
    """Nothing presses: a run may end here."""
    return and_(*(not_(e) for e in world.presses.values()))
