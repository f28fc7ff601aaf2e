"""Seeded random pairs of circuits to compare: equal in behaviour and different in make, or different in both."""

from __future__ import annotations

from dataclasses import replace
from random import Random
from typing import Any, NamedTuple

from oracle import decide
from random_circuits import STYLES, gate, random_case

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import Expr, and_, const, ite, not_, rename, substitute, var


class Pair(NamedTuple):
    """Two circuits with the same inputs, in one environment, compared on `outputs`."""

    original: Circuit
    other: Circuit
    environment: Environment
    outputs: tuple[str, ...]


def random_pair(seed: int | str, **limits: Any) -> Pair:
    """Two circuits to compare: one rewritten, recoded, enlarged or broken, or two unrelated ones."""
    rng = Random(f"pair {seed}")
    base = random_case(f"pair {seed}", **limits | {"mode": "fundamental"})
    for attempt in range(10 if rng.random() < 0.8 else 0):
        if all(decide(*base, check, {}).verdict == "proved" for check in ("settles", "race-free")):
            break
        base = random_case(f"pair {seed} {attempt}", **limits | {"mode": "fundamental"})
    original, environment = base
    other = rng.choice((rewritten, recoded, recoded, enlarged, broken, unrelated))(rng, original)
    return Pair(original, replace(other, name="other"), environment, original.outputs)


def rewritten(rng: Random, circuit: Circuit) -> Circuit:
    """Every excitation in another form: split by the value of a signal, or by De Morgan's laws."""

    def again(e: Expr) -> Expr:
        name = rng.choice([*circuit.inputs, *circuit.nodes])
        split = (rename([e], {name: const(v)})[0] for v in (1, 0))
        return ite(var(name), *split) if rng.random() < 0.5 else not_(and_(not_(e), not_(and_(e, var(name)))))

    return replace(circuit, excitation={n: again(e) for n, e in circuit.excitation.items()})


def recoded(rng: Random, circuit: Circuit) -> Circuit:
    """Some nodes kept as their inverse under another name; the old name is a defined signal."""
    turned = {n: not_(var(f"{n}_n")) for n in circuit.nodes if rng.random() < 0.6}

    def leaf(e: Expr) -> Expr:
        return turned.get(e.name, e)

    excitation = {}
    for n, e in circuit.excitation.items():
        (new,) = substitute([e], leaf)
        excitation[f"{n}_n" if n in turned else n] = not_(new) if n in turned else new
    defined = dict(zip(circuit.defined, substitute(list(circuit.defined.values()), leaf), strict=True))
    return replace(circuit, nodes=tuple(excitation), excitation=excitation, defined=defined | turned)


def enlarged(rng: Random, circuit: Circuit) -> Circuit:
    """One more node, which the others may read instead of one of theirs: a delay, or a gate that nobody reads."""
    name = rng.choice(circuit.nodes)
    extra = {"x": var(name) if rng.random() < 0.5 else gate(rng, [*circuit.inputs, *circuit.nodes])}
    reader = rng.choice(circuit.nodes)
    excitation = dict(circuit.excitation)
    if extra["x"] is var(name):
        excitation[reader] = rename([excitation[reader]], {name: var("x")})[0]
    return replace(circuit, nodes=(*circuit.nodes, "x"), excitation=excitation | extra)


def broken(rng: Random, circuit: Circuit) -> Circuit:
    """One excitation replaced by a gate."""
    name = rng.choice(circuit.nodes)
    return replace(circuit, excitation={**circuit.excitation, name: gate(rng, [*circuit.inputs, *circuit.nodes])})


def unrelated(rng: Random, circuit: Circuit) -> Circuit:
    """Other excitations for the same nodes."""
    made = rng.choice(STYLES)(rng, "".join(circuit.inputs), "".join(circuit.nodes))
    return replace(circuit, excitation=made)
