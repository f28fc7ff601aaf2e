"""Two-level logic read off a circuit: the product terms of a signal, and the one that covers a change of the inputs.

A sum of products has no static-1 hazard for a change when one product stays 1 throughout (Huffman 1957, "The design
and use of hazard-free switching networks"; recalled).
"""

from __future__ import annotations

from collections.abc import Sequence

from settled.models.circuit import Circuit
from settled.models.logic import Expr, escape, var
from settled.models.states import value

Product = frozenset[tuple[str, bool]]
"""Literals: signals with the value that they must have."""


Watched = tuple[Circuit, Sequence[int]]
"""A circuit with the stable total states before and after a change."""


class NotTwoLevel(Exception):
    """The signal is no sum of products of inputs and feedback lines."""


def products(circuit: Circuit, signal: str) -> list[Product]:
    """The product terms of a signal, gates between it and its inputs or feedback lines looked through.

    Raises `NotTwoLevel`.
    """
    return _terms(circuit, circuit.signal(signal), True, frozenset())


def _terms(circuit: Circuit, e: Expr, wanted: bool, passed: frozenset[str]) -> list[Product]:
    """The terms of `e`, or of its inverse when 0 is `wanted`; `passed`: gates that have been looked through."""
    if e.op == "var":
        if e.name in circuit.excitation and e.name not in passed:
            return _terms(circuit, circuit.excitation[e.name], wanted, passed | {e.name})
        return [frozenset([(e.name, wanted)])]
    if e.op == "not":
        return _terms(circuit, e.args[0], not wanted, passed)
    if e.op not in ("and", "or"):
        raise NotTwoLevel
    parts = [_terms(circuit, a, wanted, passed) for a in e.args]
    if (e.op == "or") == wanted:
        return [term for part in parts for term in part]
    if any(len(part) != 1 for part in parts):
        raise NotTwoLevel
    return [frozenset().union(*(part[0] for part in parts))]


def covering(circuit: Circuit, signal: str, states: Sequence[int]) -> list[Product]:
    """The product terms of a signal that are 1 in all of these total states. Raises `NotTwoLevel`."""
    return [term for term in products(circuit, signal) if all(_holds(circuit, term, s) for s in states)]


def _holds(circuit: Circuit, term: Product, state: int) -> bool:
    literals = sorted(term)
    values = value(circuit, [var(name) for name, _ in literals], state)
    return all(bool(v) == wanted for v, (_, wanted) in zip(values, literals, strict=True))


def lost(sides: tuple[Watched, Watched], signal: str) -> str | None:
    """The product term that covers a change in the first circuit when none does in the second, as text.

    None when that is not what differs.
    """
    first, second = sides
    try:
        kept, left = covering(first[0], signal, first[1]), covering(second[0], signal, second[1])
    except NotTwoLevel:
        return None
    if left or not kept:
        return None
    literals = sorted(kept[0], key=lambda literal: first[0].place[literal[0]])
    return " & ".join(("" if wanted else "~") + escape(name).strip() for name, wanted in literals)
