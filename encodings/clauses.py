"""Clauses for SAT solvers from the same expressions (Tseitin 1968, recalled): one literal a sub-expression."""

from __future__ import annotations

from collections.abc import Callable, Iterable

from settled.models.logic import TRUE, Expr, topological


class Clauses:
    """Turns expressions into literals over numbered variables; clauses go to `emit` as they arise.

    Signals get variables through `variable(name)`; the same expression always gets the same literal. Several
    copies of a circuit are several `Clauses` that share `fresh` and `emit`.
    """

    def __init__(self, fresh: Callable[[], int], emit: Callable[[list[int]], object]) -> None:
        self._fresh, self._emit = fresh, emit
        self._literal: dict[Expr, int] = {}
        self.names: dict[str, int] = {}

    def variable(self, name: str) -> int:
        """The variable of a signal; a new one at the first call."""
        if name not in self.names:
            self.names[name] = self._fresh()
        return self.names[name]

    def literal(self, e: Expr) -> int:
        """A literal that is equivalent to `e`."""
        for part in topological([e]) if e not in self._literal else ():
            if part not in self._literal:
                self._literal[part] = self._define(part)
        return self._literal[e]

    def require(self, *expressions: Expr) -> None:
        """Demand that the expressions are true."""
        for e in expressions:
            self._emit([self.literal(e)])

    def _define(self, e: Expr) -> int:
        if e.op == "var":
            return self.variable(e.name)
        if e.op == "not":
            return -self._literal[e.args[0]]
        args = [self._literal[a] for a in e.args]
        if e.op == "xor":
            return self._parity(args)
        out = self._fresh()
        for clause in _definition(e, out, args):
            self._emit(clause)
        return out

    def _parity(self, args: list[int]) -> int:
        total = args[0]
        for b in args[1:]:
            a, total = total, self._fresh()
            for clause in ([-total, a, b], [-total, -a, -b], [total, -a, b], [total, a, -b]):
                self._emit(clause)
        return total


def _definition(e: Expr, out: int, args: list[int]) -> Iterable[list[int]]:
    if e.op == "const":
        return [[out if e is TRUE else -out]]
    if e.op == "and":
        return [*([-out, a] for a in args), [out, *(-a for a in args)]]
    if e.op == "or":
        return [*([out, -a] for a in args), [-out, *args]]
    if e.op == "ite":
        c, t, f = args
        return [[-c, -out, t], [-c, out, -t], [c, -out, f], [c, out, -f], [-out, t, f], [out, -t, -f]]
    raise ValueError(f"no clauses for `{e.op}`: resolve the expression against a circuit first")
