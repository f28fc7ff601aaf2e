"""Families of handshake circuits with a size: pipelines and rings of C-elements.

A stage is `c_i = C(c_{i-1}, ~c_{i+1})`, a C-element with one inverted input (Muller 1955, recalled).
"""

from __future__ import annotations

from math import comb

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, and_, not_, or_, var

Case = tuple[Circuit, Environment]


def c_element(own: str, one: Expr, two: Expr) -> Expr:
    """Follows its inputs when they agree, else keeps its value."""
    return or_(and_(one, two), and_(var(own), or_(one, two)))


def closed(name: str, excitation: dict[str, Expr], high: set[str], winners: str) -> Case:
    """A circuit without inputs that starts with the nodes in `high` at 1."""
    nodes = tuple(excitation)
    circuit = Circuit(name, (), nodes, excitation, nodes, winners=winners)
    return circuit, Environment(mode="input-output", start={n: int(n in high) for n in nodes})


def pipeline(stages: int, ends: bool = True, inverters: bool = False, winners: str = "any") -> Case:
    """A pipeline that starts empty. `ends`: producer `e` and consumer `k` are nodes, else they have no delay;
    `inverters`: the inverter of each stage is a node `n_i`."""
    names = [f"c{i}" for i in range(1, stages + 1)]
    first, last = (var("e"), var("k")) if ends else (not_(var("c1")), var(names[-1]))
    before = [first, *map(var, names[:-1])]
    after = [not_(e) for e in (*map(var, names[1:]), last)]
    excitation: dict[str, Expr] = {"e": not_(var("c1"))} if ends else {}
    for i, (own, left, right) in enumerate(zip(names, before, after, strict=True), 1):
        if inverters:
            excitation[f"n{i}"] = right
            right = var(f"n{i}")
        excitation[own] = c_element(own, left, right)
    excitation |= {"k": var(names[-1])} if ends else {}
    return closed(f"pipeline of {stages}", excitation, {n for n in excitation if n[0] == "n"}, winners)


def ring(stages: int, changes: int, winners: str = "any") -> Case:
    """A ring whose neighbours differ in `changes` places."""
    names = [f"c{i}" for i in range(stages)]
    excitation = {
        n: c_element(n, var(names[i - 1]), not_(var(names[(i + 1) % stages]))) for i, n in enumerate(names)
    }
    high = {n for i, n in enumerate(names) if i < changes and i % 2}
    return closed(f"ring of {stages}", excitation, high, winners)


def ring_states(stages: int, changes: int) -> int:
    """The number of total states that a live ring reaches."""
    return 2 * comb(stages, changes)
