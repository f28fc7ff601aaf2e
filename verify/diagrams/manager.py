"""The decision diagrams of one task: variables in an order taken from the circuit, and sets of packed states.

A set is a diagram over the variables of a state. Where several nodes switch in one step, each variable has a second
one beside it for its value after the step.
"""

from __future__ import annotations

import operator
from collections.abc import Iterable, Iterator, Mapping, Sequence
from functools import reduce
from typing import Any

from settled.models.circuit import Circuit
from settled.models.logic import FALSE, TRUE, Expr, fold, ite, not_, support, var
from settled.verify.limits import Limits

Set = Any
"""A diagram of the library."""

SHARE = 0.75
SMALL = 1 << 28


class Missing(Exception):
    """The library for decision diagrams is not installed."""


def library() -> Any:
    """The bindings of CUDD. Raises `Missing`."""
    try:
        from dd import cudd
    except ImportError as error:
        raise Missing("the optional library dd (CUDD) is not installed") from error
    return cudd


def out_of_memory(error: Exception) -> bool:
    """Whether an operation of the library failed for want of memory, in its own words: it then gets no node."""
    return any(words in str(error) for words in ("NULL", "run out of memory", "compose failed", "cofactor failed"))


def then(name: str) -> str:
    """The variable for the value after a step."""
    return f"{name} then"


def ordered(circuit: Circuit) -> list[str]:
    """Inputs and nodes, depth first from the outputs: what is read stands near its reader."""
    reads = {n: support(circuit.excitation[n]) for n in circuit.nodes}
    roots = [*support(*map(circuit.signal, circuit.outputs)), *circuit.signals]
    done: dict[str, None] = {}
    seen: set[str] = set()
    for root in roots:
        stack: list[tuple[str, Iterator[str]]] = [(root, iter(reads.get(root, ())))]
        while stack:
            name, rest = stack[-1]
            seen.add(name)
            child = next((r for r in rest if r not in seen), None)
            if child is not None:
                stack.append((child, iter(reads.get(child, ()))))
            else:
                done[name] = None
                stack.pop()
    return list(done)


class Diagrams:
    """A manager of diagrams with dynamic reordering, within the limits of the task.

    `variables`: those of a state, in the order of the bits of a packed state, least significant first.
    `order`: the same as they first lie in the diagrams; `doubled`: those with a variable for the value after a step.
    """

    def __init__(self, variables: Sequence[str], order: Sequence[str], doubled: Iterable[str], limits: Limits) -> None:
        self.cudd = library()
        self.limits = limits
        self.variables = tuple(variables)
        self.place = {v: i for i, v in enumerate(self.variables)}
        most = int(SHARE * limits.megabytes) << 20
        self.manager = self.cudd.BDD(memory_estimate=min(SMALL, most))
        self.manager.configure(max_memory=most)
        twice = set(doubled)
        for v in order:
            self.manager.declare(v, *([then(v)] if v in twice else []))
            if v in twice:
                self.manager.group({v: 2})
        self._inverse = {v: ~self.manager.var(v) for v in self.variables}
        self.true, self.false = self.manager.true, self.manager.false
        self._known: dict[Expr, Set] = {}

    def check(self, progress: str) -> None:
        """Say how far the work has come. Raises `LimitReached`."""
        self.limits.check(progress)

    # ---- making sets ---------------------------------------------------------------------------------------------

    def of(self, e: Expr) -> Set:
        """The set of states in which an expression over the variables is true."""
        if e not in self._known:
            (self._known[e],) = fold([e], self._visit)
        return self._known[e]

    def _visit(self, e: Expr, args: list[Set]) -> Set:
        if e.op == "var":
            return self.manager.var(e.name)
        if e.op == "const":
            return self.true if e is TRUE else self.false
        if e.op == "not":
            return ~args[0]
        if e.op == "ite":
            return self.manager.ite(*args)
        total = args[0]
        for a in args[1:]:
            total = self.manager.apply(e.op, total, a)
        return total

    def point(self, state: int) -> Set:
        """The set of one packed state."""
        return self.manager.cube({v: bool(state >> i & 1) for i, v in enumerate(self.variables)})

    def flipped(self, f: Set, names: Sequence[str]) -> Set:
        """The states of `f` with some variables inverted."""
        return self.manager.let({v: self._inverse[v] for v in names}, f) if names else f

    def renamed(self, f: Set, names: Mapping[str, str]) -> Set:
        """The set with other variables, all at once."""
        return self.manager.let(dict(names), f) if names else f

    def union(self, sets: Iterable[Set]) -> Set:
        """All states of the sets."""
        return reduce(operator.or_, sets, self.false)

    def without(self, f: Set, names: Iterable[str]) -> Set:
        """The states that are in `f` for some values of the variables `names`."""
        return self.manager.exist(names, f)

    # ---- looking into sets ---------------------------------------------------------------------------------------

    def holds(self, f: Set, state: int) -> bool:
        """Whether a packed state is in a set."""
        while f.var is not None:
            f = _branch(f, state >> self.place[f.var] & 1)
        return f == self.true

    def nearest(self, f: Set, state: int) -> int:
        """A state of the non-empty set `f` that differs little from `state`."""
        found = state
        while f.var is not None:
            bit = 1 << self.place[f.var]
            kept = _branch(f, found & bit)
            if kept == self.false:
                found ^= bit
                kept = _branch(f, found & bit)
            f = kept
        return found

    def count(self, f: Set, names: Sequence[str]) -> int:
        """The number of states of `f`, told apart by the variables `names`, which it is over."""
        level = {v: i for i, v in enumerate(sorted(names, key=self.manager.level_of_var))}
        size = len(level)

        def visit(name: str | None, low: tuple[int, int], high: tuple[int, int]) -> tuple[int, int]:
            at = level[name] if name is not None else size
            return at, sum(number << (below - at - 1) for below, number in (low, high))

        at, number = self._folded(f, (size, 0), (size, 1), lambda v: (v[0], (1 << (size - v[0])) - v[1]), visit)
        return number << at

    def expression(self, f: Set) -> Expr:
        """A set as an expression that shares what the diagram shares."""
        return self._folded(f, FALSE, TRUE, not_, lambda name, low, high: ite(var(name), high, low))

    def _folded(self, root: Set, zero: Any, one: Any, negate: Any, visit: Any) -> Any:
        """Bottom-up over a diagram, each node once; `visit(variable, low, high)`."""
        done: dict[int, Any] = {int(self.true): one, int(self.false): zero}
        stack = [root]
        while stack:
            f = stack[-1]
            if int(f) in done:
                stack.pop()
                continue
            whole = ~f if f.negated else f
            if int(whole) in done:
                done[int(f)] = negate(done[int(whole)])
                continue
            low, high = whole.low, whole.high
            missing = [g for g in (low, high) if int(g) not in done]
            if missing:
                stack += missing
            else:
                done[int(whole)] = visit(whole.var, done[int(low)], done[int(high)])
        return done[int(root)]


def _branch(f: Set, value: int) -> Set:
    child = f.high if value else f.low
    return ~child if f.negated else child
