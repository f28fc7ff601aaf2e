"""Boolean expressions: the one language in which gates, guards, properties and encodings are written.

Expressions are hash-consed (equal expressions are the same object, so `is` compares them) and every walk over
them goes through `fold`, which does not recurse: a chain of 100,000 gates is as good as one gate.
"""

from __future__ import annotations

import operator
import re
from collections.abc import Callable, Iterable, Iterator, Mapping, Sequence
from functools import reduce
from typing import Any, TypeVar
from weakref import WeakValueDictionary

T = TypeVar("T")


class Expr:
    """One expression. Make it with the functions below, never directly.

    `op` is one of `const`, `var`, `stable`, `excited`, `not`, `and`, `or`, `xor`, `ite`; `name` is the signal of
    a `var` or `excited` leaf and `"0"` or `"1"` of a constant; `args` are the operands (`ite`: condition, then, else).
    `stable` and `excited` speak of a circuit; `Circuit.resolve` replaces them by plain expressions.
    """

    __slots__ = ("__weakref__", "args", "name", "op")
    op: str
    args: tuple[Expr, ...]
    name: str

    def __repr__(self) -> str:
        return f"Expr({to_text(self)!r})"

    def __reduce__(self) -> tuple[Any, ...]:
        return (_unflatten, (_flatten(self),))


_table: WeakValueDictionary[tuple[Any, ...], Expr] = WeakValueDictionary()


def _make(op: str, args: tuple[Expr, ...] = (), name: str = "") -> Expr:
    key = (op, name, *map(id, args))
    found = _table.get(key)
    if found is None:
        found = object.__new__(Expr)
        found.op, found.args, found.name = op, args, name
        _table[key] = found
    return found


FALSE = _make("const", name="0")
TRUE = _make("const", name="1")
STABLE = _make("stable")


def const(value: int | bool) -> Expr:
    """The constant 0 or 1."""
    return TRUE if value else FALSE


def var(name: str) -> Expr:
    """The present value of a signal."""
    return _make("var", name=name)


def excited(name: str) -> Expr:
    """True where the node `name` is excited."""
    return _make("excited", name=name)


def not_(e: Expr) -> Expr:
    """Negation; a double one cancels."""
    if e.op == "const":
        return const(e is FALSE)
    return e.args[0] if e.op == "not" else _make("not", (e,))


def _nary(op: str, args: Iterable[Expr], unit: Expr, zero: Expr) -> Expr:
    kept = list(dict.fromkeys(a for a in args if a is not unit))
    if zero in kept:
        return zero
    if not kept:
        return unit
    return kept[0] if len(kept) == 1 else _make(op, tuple(kept))


def and_(*args: Expr) -> Expr:
    """Conjunction of any number of operands; of none, 1."""
    return _nary("and", args, TRUE, FALSE)


def or_(*args: Expr) -> Expr:
    """Disjunction of any number of operands; of none, 0."""
    return _nary("or", args, FALSE, TRUE)


def xor(*args: Expr) -> Expr:
    """Odd parity of any number of operands; of none, 0."""
    kept = [a for a in args if a.op != "const"]
    flip = sum(a is TRUE for a in args) % 2
    if not kept:
        return const(flip)
    body = kept[0] if len(kept) == 1 else _make("xor", tuple(kept))
    return not_(body) if flip else body


def ite(condition: Expr, then: Expr, otherwise: Expr) -> Expr:
    """`condition ? then : otherwise`."""
    if condition.op == "const":
        return then if condition is TRUE else otherwise
    return then if then is otherwise else _make("ite", (condition, then, otherwise))


def topological(roots: Iterable[Expr]) -> Iterator[Expr]:
    """Every sub-expression of `roots` once, operands before what uses them."""
    seen: set[Expr] = set()
    for root in roots:
        stack = [(root, iter(root.args))]
        while stack:
            e, rest = stack[-1]
            if e in seen:
                stack.pop()
                continue
            for child in rest:
                if child not in seen:
                    stack.append((child, iter(child.args)))
                    break
            else:
                seen.add(e)
                stack.pop()
                yield e


def fold(roots: Sequence[Expr], visit: Callable[[Expr, list[T]], T]) -> list[T]:
    """Compute `visit(expression, values of its operands)` bottom-up, each shared part once; the roots' values."""
    done: dict[Expr, T] = {}
    for e in topological(roots):
        done[e] = visit(e, [done[a] for a in e.args])
    return [done[r] for r in roots]


ZERO, ONE = 0, 1
"""Where a program keeps the words of all zeros and of all ones."""


class Program:
    """Expressions made ready for evaluation again and again. `reads`: the signals that need a value."""

    def __init__(self, roots: Sequence[Expr]) -> None:
        order = list(topological(roots))
        self.reads = [e.name for e in order if e.op == "var"]
        self._lines: list[tuple[Callable[[Any, Any], Any], int, int]] = []
        place = {FALSE: ZERO, TRUE: ONE} | {e: 2 + i for i, e in enumerate(e for e in order if e.op == "var")}
        for e in order:
            if e.op in ("stable", "excited"):
                raise ValueError(f"`{to_text(e)}` must be resolved against a circuit first")
            if e.args:
                place[e] = self._compiled(e.op, [place[a] for a in e.args])
        self._roots = [place[r] for r in roots]

    def _compiled(self, op: str, args: list[int]) -> int:
        """Append what computes an operator from the values at `args`; the place of its value."""
        if op == "not":
            return self._line(operator.xor, args[0], ONE)
        if op == "ite":
            chosen = self._line(operator.and_, args[0], args[1])
            other = self._line(operator.and_, self._line(operator.xor, args[0], ONE), args[2])
            return self._line(operator.or_, chosen, other)
        function = {"and": operator.and_, "or": operator.or_, "xor": operator.xor}[op]
        return reduce(lambda total, place: self._line(function, total, place), args)

    def _line(self, function: Callable[[Any, Any], Any], first: int, second: int) -> int:
        self._lines.append((function, first, second))
        return 1 + len(self.reads) + len(self._lines)

    def run(self, values: Mapping[str, Any], one: Any = 1) -> list[Any]:
        """The roots' values; see `evaluate`."""
        return self.run_in_order([values[name] for name in self.reads], one)

    def run_in_order(self, values: Iterable[Any], one: Any = 1) -> list[Any]:
        """The roots' values, given those of the signals in the order of `reads`."""
        done = [one ^ one, one, *values]
        for function, first, second in self._lines:
            done.append(function(done[first], done[second]))
        return [done[r] for r in self._roots]


def evaluate(roots: Sequence[Expr], values: Mapping[str, Any], one: Any = 1) -> list[Any]:
    """Values of `roots` under `values`, bit-parallel: words may be 0/1, long integers or numpy arrays.

    `one` is the word with every bit set that is in use. Raises `KeyError` for a signal without a value;
    `stable` and `excited` must have been resolved.
    """
    return Program(roots).run(values, one)


def rebuild(e: Expr, args: list[Expr]) -> Expr:
    """The expression `e` with other operands."""
    if not args:
        return e
    if e.op == "not":
        return not_(args[0])
    if e.op == "ite":
        return ite(*args)
    return {"and": and_, "or": or_, "xor": xor}[e.op](*args)


def substitute(roots: Sequence[Expr], leaves: Callable[[Expr], Expr]) -> list[Expr]:
    """Replace each leaf (`var`, `stable`, `excited`) of `roots` by `leaves(leaf)`."""
    return fold(roots, lambda e, args: rebuild(e, args) if e.args or e.op == "const" else leaves(e))


def rename(roots: Sequence[Expr], names: Mapping[str, Expr]) -> list[Expr]:
    """Replace the variables that `names` lists; all other leaves stay."""
    return substitute(roots, lambda e: names.get(e.name, e) if e.op == "var" else e)


def support(*roots: Expr) -> list[str]:
    """Names of the signals that `roots` read, in order of first appearance."""
    return list(dict.fromkeys(e.name for e in topological(roots) if e.op in ("var", "excited")))


# ---- text ------------------------------------------------------------------------------------------------------

_PLAIN = re.compile(r"[A-Za-z_][A-Za-z0-9_$]*(\[[0-9]+\])*(\.[A-Za-z_][A-Za-z0-9_$]*(\[[0-9]+\])*)*\Z")
_STRENGTH = {"ite": 0, "or": 1, "xor": 2, "and": 3, "not": 4}
_SIGN = {"or": " | ", "xor": " ^ ", "and": " & "}


def escape(name: str) -> str:
    """`name` as it is written in an expression: with a backslash and a final blank where IEEE 1364 needs them."""
    return name if _PLAIN.match(name) and name not in ("stable", "excited") else f"\\{name} "


def leaf_text(e: Expr) -> str:
    """A leaf as expressions of a property file have it."""
    named = {"var": escape(e.name), "excited": f"excited({escape(e.name)})", "stable": "stable"}
    return named.get(e.op, e.name)


def to_text(e: Expr, leaf: Callable[[Expr], str] = leaf_text) -> str:
    """`e` in the operators of IEEE 1364 with the fewest parentheses; it reads back as the same function.

    `leaf` writes variables, constants, `stable` and `excited`.
    """

    def visit(e: Expr, args: list[tuple[str, int]]) -> tuple[str, int]:
        if e.op in ("var", "const", "stable", "excited"):
            return leaf(e), 5
        own = _STRENGTH[e.op]
        least = own if e.op == "not" else own + 1
        inner = [text if strength >= least else f"({text})" for text, strength in args]
        if e.op == "not":
            return "~" + inner[0], own
        return (f"{inner[0]} ? {inner[1]} : {inner[2]}" if e.op == "ite" else _SIGN[e.op].join(inner)), own

    return fold([e], visit)[0][0]


# ---- pickling without recursion ----------------------------------------------------------------------------------


def _flatten(root: Expr) -> list[tuple[str, str, tuple[int, ...]]]:
    order = list(topological([root]))
    place = {e: i for i, e in enumerate(order)}
    return [(e.op, e.name, tuple(place[a] for a in e.args)) for e in order]


def _unflatten(rows: list[tuple[str, str, tuple[int, ...]]]) -> Expr:
    made: list[Expr] = []
    for op, name, args in rows:
        made.append(_make(op, tuple(made[i] for i in args), name))
    return made[-1]
