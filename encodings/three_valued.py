"""Three-valued simulation as formulas: a value is two expressions, whether it can be 0 and whether it can be 1.

Operators are extended one by one, as in `settled.models.three_valued`; unknown is both. Where all operands are known
the result is one plain expression and its negation, so that what no change reaches costs nothing.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from settled.models.logic import Expr, and_, fold, not_, or_, rebuild

Rails = tuple[Expr, Expr]


def known(e: Expr) -> Rails:
    """The known value `e`."""
    return not_(e), e


def join(a: Rails, b: Rails) -> Rails:
    """The least upper bound: unknown where the two differ."""
    return or_(a[0], b[0]), or_(a[1], b[1])


def unknown(a: Rails) -> Expr:
    """Whether the value is unknown."""
    return and_(*a)


def rails(roots: Sequence[Expr], values: Mapping[str, Rails]) -> list[Rails]:
    """The ternary values of expressions over inputs and nodes that have the given values."""

    def visit(e: Expr, args: list[Rails]) -> Rails:
        if e.op == "var":
            return values[e.name]
        if all(zero is not_(one) for zero, one in args):
            return known(rebuild(e, [one for _, one in args]))
        return _operator(e.op, args)

    return fold(roots, visit)


def _operator(op: str, args: list[Rails]) -> Rails:
    if op == "not":
        return args[0][1], args[0][0]
    if op == "ite":
        (c0, c1), (t0, t1), (e0, e1) = args
        return or_(and_(c1, t0), and_(c0, e0)), or_(and_(c1, t1), and_(c0, e1))
    zeros, ones = [a[0] for a in args], [a[1] for a in args]
    if op == "and":
        return or_(*zeros), and_(*ones)
    if op == "or":
        return and_(*zeros), or_(*ones)
    zero, one = args[0]
    for z, o in args[1:]:
        zero, one = or_(and_(zero, z), and_(one, o)), or_(and_(zero, o), and_(one, z))
    return zero, one
