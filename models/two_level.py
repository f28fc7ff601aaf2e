"""Minimal two-level form of an expression: a smallest sum of products, as one would write it after a Karnaugh map.

For reading only: a minimal form leaves out consensus terms, which are exactly what keeps hazards away, so nothing is
ever decided on it.
"""

from __future__ import annotations

from itertools import product
from typing import Any

from settled.models.logic import FALSE, TRUE, Expr, and_, evaluate, not_, or_, support, var

LARGEST = 8
"""Signals that an expression may read; the minimiser takes too long beyond."""


def sum_of_products(e: Expr) -> Expr | None:
    """A minimal sum of products equal to `e`; None when `e` reads more than eight signals."""
    names = support(e)
    if len(names) > LARGEST:
        return None
    from sympy import Symbol
    from sympy.logic.boolalg import SOPform

    vectors = list(product((0, 1), repeat=len(names)))
    ones = [list(v) for v in vectors if evaluate([e], dict(zip(names, v, strict=True)))[0]]
    if len(ones) in (0, len(vectors)):
        return TRUE if ones else FALSE
    symbols = [Symbol(f"s{i}") for i in range(len(names))]
    return _expression(SOPform(symbols, ones), {s: var(n) for s, n in zip(symbols, names, strict=True)})


def _expression(form: Any, signals: dict[Any, Expr]) -> Expr:
    if form in signals:
        return signals[form]
    args = [_expression(a, signals) for a in sorted(form.args, key=str)]
    return {"Not": lambda a: not_(a), "And": and_, "Or": or_}[type(form).__name__](*args)
