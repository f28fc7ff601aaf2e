"""Hypothesis strategies of circuits and environments, in flat form so that failures shrink quickly.

A gate is one tuple of whole numbers; its sources are taken modulo the number of signals, so that every draw is a
circuit and the smallest draws are the plainest circuits.
"""

from __future__ import annotations

from typing import Any

from hypothesis import assume
from hypothesis import strategies as st
from oracle_world import Unaskable, World
from random_circuits import CHANGES, DEFINED, INPUTS, NODES, random_options

from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.logic import Expr, and_, const, ite, not_, or_, var, xor

Draw = tuple[int, int, int, int, int]
WORDS = st.tuples(st.integers(0, 5), *[st.integers(0, 7)] * 4)


def expression(word: Draw, names: str, own: Expr) -> Expr:
    """The gate of one word: kind, three sources, and which of them are inverted; `own` is the gate's own signal."""
    kind, *sources, inverted = word
    pins = [var(names[s % len(names)]) if names else const(1) for s in sources]
    one, two, three = (not_(p) if inverted >> i & 1 else p for i, p in enumerate(pins))
    makes = (
        lambda: and_(one, two),
        lambda: or_(one, two),
        lambda: xor(one, two),
        lambda: ite(one, two, three),
        lambda: ite(one, two, own),
        lambda: or_(and_(one, two), and_(own, or_(one, two))),
    )
    return makes[kind]()


@st.composite
def circuits(draw: st.DrawFn, max_nodes: int = 5, max_inputs: int = 3) -> Circuit:
    """A circuit of one to `max_nodes` nodes and up to `max_inputs` inputs, all of its nodes and definitions outputs."""
    ins = INPUTS[: draw(st.integers(0, max_inputs))]
    words = draw(st.lists(WORDS, min_size=1, max_size=max_nodes))
    inner = NODES[: len(words)]
    defined = {
        n: expression(w, ins + inner, const(0))
        for n, w in zip(DEFINED, draw(st.lists(WORDS, max_size=1)), strict=False)
    }
    return Circuit(
        name="drawn",
        inputs=tuple(ins),
        nodes=tuple(inner),
        excitation={n: expression(w, ins + inner, var(n)) for n, w in zip(inner, words, strict=True)},
        outputs=(*inner, *defined),
        defined=defined,
        winners=draw(st.sampled_from(("any", "one"))),
    )


@st.composite
def environments(
    draw: st.DrawFn, circuit: Circuit, modes: tuple[str, ...] = ("fundamental", "input-output")
) -> Environment:
    """An environment of a circuit, whose `start` fixes any of its inputs and nodes; there may be no start state."""
    mode = draw(st.sampled_from(modes))
    names = "".join(circuit.inputs + circuit.nodes)
    must = st.booleans() if mode == "input-output" else st.just(False)
    guards = draw(st.dictionaries(st.sampled_from(circuit.inputs or ("-",)), st.tuples(WORDS, WORDS, must)))
    fixed = draw(st.dictionaries(st.sampled_from(circuit.inputs + circuit.nodes), st.integers(0, 1), max_size=2))
    return Environment(
        mode=mode,
        changes=draw(st.sampled_from(CHANGES)) if mode == "fundamental" else "single",
        assume=tuple(expression(w, "".join(circuit.inputs), const(1)) for w in draw(st.lists(WORDS, max_size=1))),
        start=fixed,
        guards={
            x: Guard(expression(rises, names, const(1)), expression(falls, names, const(1)), pressed)
            for x, (rises, falls, pressed) in guards.items()
            if x in circuit.inputs
        },
    )


@st.composite
def cases(
    draw: st.DrawFn, max_nodes: int = 5, max_inputs: int = 3, modes: tuple[str, ...] = ("fundamental", "input-output")
) -> tuple[Circuit, Environment]:
    """A circuit and an environment with at least one start state."""
    circuit = draw(circuits(max_nodes, max_inputs))
    environment = draw(environments(circuit, modes))
    try:
        World(circuit, environment).starts()
    except Unaskable:
        assume(False)
    return circuit, environment


@st.composite
def options(draw: st.DrawFn, circuit: Circuit, environment: Environment, check: str) -> dict[str, Any]:
    """Options of a check on a circuit."""
    return random_options(draw(st.randoms(use_true_random=False)), circuit, environment, check)
