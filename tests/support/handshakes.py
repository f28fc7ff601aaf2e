"""Families of handshake circuits with a size: pipelines and rings of C-elements, arbiters, a ring with a token.

A stage of a pipeline or ring is `c_i = C(c_{i-1}, ~c_{i+1})`: a C-element with one inverted input (Muller 1955,
recalled).
"""

from __future__ import annotations

from itertools import combinations
from math import comb

from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.logic import Expr, and_, not_, or_, rename, var

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


def open_pipeline(stages: int) -> Case:
    """A pipeline with separate inverters between a sender, which offers with `rin`, and a receiver, which takes with
    `aout`: the four-phase protocol at either end, written as guards."""
    circuit, environment = pipeline(stages, inverters=True)
    ends = {"e": var("rin"), "k": var("aout")}
    nodes = tuple(n for n in circuit.nodes if n not in ends)
    excitation = dict(zip(nodes, rename([circuit.excitation[n] for n in nodes], ends), strict=True))
    first, last = var("c1"), var(f"c{stages}")
    guards = {"rin": Guard(not_(first), first, must=True), "aout": Guard(last, not_(last), must=True)}
    start = {n: environment.start[n] for n in nodes} | {"rin": 0, "aout": 0}
    opened = Circuit(f"open pipeline of {stages}", ("rin", "aout"), nodes, excitation, nodes)
    return opened, Environment(mode="input-output", start=start, guards=guards)


def ring(stages: int, changes: int, winners: str = "any") -> Case:
    """A ring whose neighbours differ in `changes` places."""
    names = [f"c{i}" for i in range(stages)]
    excitation = {n: c_element(n, var(names[i - 1]), not_(var(names[(i + 1) % stages]))) for i, n in enumerate(names)}
    high = {n for i, n in enumerate(names) if i < changes and i % 2}
    return closed(f"ring of {stages}", excitation, high, winners)


def ring_states(stages: int, changes: int) -> int:
    """The number of total states that a live ring reaches."""
    return 2 * comb(stages, changes)


def arbiter_tree(clients: int, winners: str = "any") -> Case:
    """A tree of mutual-exclusion elements. Client i asks with `r<i>` and is granted by `g<i>`.

    Inside, `q` keeps a winner until the element above has been released, so that the next winner asks afresh.
    """
    requests = tuple(f"r{i}" for i in range(clients))
    excitation: dict[str, Expr] = {}
    pairs: list[tuple[str, str]] = []
    waiting = [(r, r.replace("r", "g")) for r in requests]
    while len(waiting) > 2:
        two = [waiting[i : i + 2] for i in range(0, len(waiting), 2)]
        waiting = [_inner(pair, excitation, pairs) if len(pair) == 2 else pair[0] for pair in two]
    last = (waiting[0][1], waiting[1][1])
    excitation |= grants((waiting[0][0], waiting[1][0]), last)
    guards = {r: Guard(not_(var(r.replace("r", "g"))), var(r.replace("r", "g")), must=True) for r in requests}
    start = dict.fromkeys((*requests, *excitation), 0)
    exclusive = (*pairs, last)
    nodes = tuple(excitation)
    circuit = Circuit(f"arbiter of {clients}", requests, nodes, excitation, winners=winners, exclusive=exclusive)
    return circuit, Environment(mode="input-output", start=start, guards=guards)


def _inner(users: list[tuple[str, str]], excitation: dict[str, Expr], pairs: list[tuple[str, str]]) -> tuple[str, str]:
    """An element between two users, each a request and a grant; gives the request and the grant of the one above."""
    number = len(pairs)
    up, down = f"up{number}", f"down{number}"
    pairs.append((f"h{number}a", f"h{number}b"))
    excitation |= grants((users[0][0], users[1][0]), pairs[-1])
    kept = [f"q{number}a", f"q{number}b"]
    for own, side, (_, granted) in zip(kept, pairs[-1], users, strict=True):
        excitation[own] = c_element(own, var(side), not_(var(down)))
        excitation[granted] = and_(var(own), var(down))
    excitation[up] = or_(*map(var, kept))
    return up, down


def grants(requests: tuple[str, str], names: tuple[str, str]) -> dict[str, Expr]:
    """The excitations of a mutual-exclusion element."""
    return {own: and_(var(r), not_(var(o))) for own, o, r in zip(names, reversed(names), requests, strict=True)}


def two_clients(clients: int) -> Expr:
    """True where two clients of an arbiter have asked and been granted."""
    using = [and_(var(f"r{i}"), var(f"g{i}")) for i in range(clients)]
    return or_(*(and_(a, b) for a, b in combinations(using, 2)))


def token_ring(cells: int, winners: str = "any") -> Case:
    """A ring in which cell i offers a turn with `t<i>`, the user answers with `d<i>`, and the token `c<i>` goes on."""
    excitation: dict[str, Expr] = {}
    for i in range(cells):
        before, after = var(f"c{(i - 1) % cells}"), var(f"c{(i + 1) % cells}")
        own, done = var(f"c{i}"), var(f"d{i}")
        excitation[f"c{i}"] = or_(and_(before, not_(after), done), and_(own, or_(before, not_(after), done)))
        excitation[f"t{i}"] = and_(before, not_(own))
    users = tuple(f"d{i}" for i in range(cells))
    guards = {d: Guard(var(f"t{d[1:]}"), not_(var(f"t{d[1:]}")), must=True) for d in users}
    start = dict.fromkeys((*users, *excitation), 0) | {"c0": 1}
    circuit = Circuit(f"token ring of {cells}", users, tuple(excitation), excitation, winners=winners)
    return circuit, Environment(mode="input-output", start=start, guards=guards)


def two_turns(cells: int) -> Expr:
    """True where two users of a token ring have a turn that they have not ended."""
    having = [and_(var(f"t{i}"), not_(var(f"d{i}"))) for i in range(cells)]
    return or_(*(and_(a, b) for a, b in combinations(having, 2)))
