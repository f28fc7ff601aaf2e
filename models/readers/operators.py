"""Two-operand operators whose chains come out as one expression of many operands, as people write them."""

from __future__ import annotations

from settled.models.logic import Expr, and_, or_, xor


def both(a: Expr, b: Expr) -> Expr:
    """Conjunction."""
    return and_(*_operands("and", a), b)


def either(a: Expr, b: Expr) -> Expr:
    """Disjunction."""
    return or_(*_operands("or", a), b)


def differ(a: Expr, b: Expr) -> Expr:
    """Exclusive disjunction."""
    return xor(*_operands("xor", a), b)


def _operands(op: str, e: Expr) -> tuple[Expr, ...]:
    return e.args if e.op == op else (e,)
