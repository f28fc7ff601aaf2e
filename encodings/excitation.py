"""A circuit as z3 formulas over present and next-state values: excitation, stability and the hold-or-follow step."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import z3

from settled.models.circuit import Circuit
from settled.models.logic import TRUE, Expr, fold


def formulas(roots: Sequence[Expr], values: Mapping[str, Any]) -> list[Any]:
    """z3 formulas of `roots`, with the formula or variable that `values` gives for each signal."""

    def visit(e: Expr, args: list[Any]) -> Any:
        if e.op == "var":
            return values[e.name]
        if e.op == "const":
            return z3.BoolVal(e is TRUE)
        if e.op == "xor":
            total = args[0]
            for a in args[1:]:
                total = z3.Xor(total, a)
            return total
        return {"not": z3.Not, "and": z3.And, "or": z3.Or, "ite": z3.If}[e.op](*args)

    return fold(roots, visit)


def copy(circuit: Circuit, tag: str) -> dict[str, Any]:
    """One z3 variable for each input and node, named by number (names of nets may be unfit for SMT-LIB) and `tag`."""
    return {s: z3.Bool(f"s{i}{tag}") for i, s in enumerate(circuit.signals)}


def stable(circuit: Circuit, present: Mapping[str, Any]) -> Any:
    """The formula that no node is excited."""
    return formulas([circuit.is_stable], present)[0]


def step(circuit: Circuit, present: Mapping[str, Any], following: Mapping[str, Any]) -> Any:
    """The transition relation while inputs are held: each node holds or follows (semantics of `winners = "any"`),
    or exactly one node follows and all others hold (`"one"`)."""
    targets = formulas([circuit.excitation[n] for n in circuit.nodes], present)
    kept = [following[x] == present[x] for x in circuit.inputs]
    moved = [following[n] != present[n] for n in circuit.nodes]
    lawful = [z3.Implies(m, following[n] == t) for n, m, t in zip(circuit.nodes, moved, targets, strict=True)]
    if circuit.winners == "one":
        return z3.And(*kept, *lawful, z3.PbEq([(m, 1) for m in moved], 1))
    moves = dict(zip(circuit.nodes, moved, strict=True))
    apart = [z3.Not(z3.And(moves[a], moves[b])) for a, b in circuit.exclusive]
    return z3.And(*kept, *lawful, *apart, z3.Or(*moved))
