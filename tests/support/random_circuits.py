"""Seeded random circuits, environments and questions, small enough for the naive oracle.

The mixture is made for balance: circuits that settle and circuits that do not, latches and gates, guards that bind
and guards that do not. `random_case` gives a circuit and an environment with at least one start state,
`random_question` also the options of a check.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import replace
from random import Random
from typing import Any, NamedTuple

from oracle import FUNDAMENTAL_ONLY
from oracle_world import Unaskable, World, world_of

from settled.models.circuit import Circuit
from settled.models.environment import Environment, Guard
from settled.models.logic import STABLE, Expr, and_, const, excited, ite, not_, or_, var, xor

INPUTS, NODES, DEFINED = "abc", "pqrst", "uv"
MODES = ("fundamental", "fundamental", "fundamental", "input-output")
CHANGES = ("single", "simultaneous", "burst")


class Question(NamedTuple):
    """A circuit in an environment and the options of a check."""

    circuit: Circuit
    environment: Environment
    options: dict[str, Any]


# ---- expressions -----------------------------------------------------------------------------------------------------


def literal(rng: Random, names: Sequence[str]) -> Expr:
    """A signal or its inverse."""
    leaf = var(rng.choice(names))
    return not_(leaf) if rng.random() < 0.5 else leaf


def table(rng: Random, names: Sequence[str]) -> Expr:
    """A random function of all of `names`, as a tree of choices."""
    if not names:
        return const(rng.getrandbits(1))
    return ite(var(names[0]), table(rng, names[1:]), table(rng, names[1:]))


def gate(rng: Random, names: Sequence[str]) -> Expr:
    """A gate with one to three inputs, some of them inverted."""
    pins = [literal(rng, names) for _ in range(rng.choice((1, 2, 2, 2, 3)))]
    made = rng.choice((and_, or_, and_, or_, xor))(*pins)
    return not_(made) if rng.random() < 0.4 else made


def product_sum(rng: Random, names: Sequence[str]) -> Expr:
    """Two products of two literals, or-ed: where static hazards live."""
    return or_(*(and_(literal(rng, names), literal(rng, names)) for _ in range(2)))


def storage(rng: Random, own: str, names: Sequence[str]) -> Expr:
    """A latch or a C-element in one gate, which reads its own output."""
    one, two, self = literal(rng, names), literal(rng, names), var(own)
    return rng.choice(
        (ite(one, two, self), or_(and_(one, two), and_(self, or_(one, two))), and_(not_(one), or_(two, self)))
    )


def condition(rng: Random, names: Sequence[str]) -> Expr:
    """A guard or the expression of a property: one or two literals."""
    pins = [literal(rng, names) for _ in range(rng.choice((1, 2, 2)))]
    return rng.choice((and_, and_, or_, xor))(*pins)


# ---- circuits --------------------------------------------------------------------------------------------------------

Excitation = dict[str, Expr]


def tables(rng: Random, inputs: str, nodes: str) -> Excitation:
    """Random functions of two or three signals each: much feedback, many races."""
    return {n: table(rng, rng.sample(inputs + nodes, min(rng.choice((2, 3)), len(inputs + nodes)))) for n in nodes}


def forward(rng: Random, inputs: str, nodes: str) -> Excitation:
    """Gates that read inputs and earlier nodes only: no feedback."""
    made: Excitation = {}
    for i, n in enumerate(nodes):
        made[n] = rng.choice((gate, gate, product_sum))(rng, inputs + nodes[:i] or n)
    return made


def pieces(rng: Random, inputs: str, nodes: str) -> Excitation:
    """Latches, C-elements, cross-coupled pairs and gates, each reading what stands before it."""
    made: Excitation = {}
    left = nodes
    while left:
        known = inputs + nodes[: len(made)]
        if len(left) > 1 and known and rng.random() < 0.35:
            made |= cross_coupled(rng, left[0], left[1], known)
        elif known:
            made[left[0]] = rng.choice((storage(rng, left[0], known), gate(rng, known)))
        else:
            made[left[0]] = gate(rng, nodes)
        left = nodes[len(made) :]
    return made


def cross_coupled(rng: Random, one: str, two: str, names: str) -> Excitation:
    """Two gates that each read the other: NOR latch, NAND latch or mutual exclusion."""
    s, r = literal(rng, names), literal(rng, names)
    kind = rng.choice(("nor", "nand", "arbiter"))
    if kind == "nor":
        return {one: not_(or_(r, var(two))), two: not_(or_(s, var(one)))}
    if kind == "nand":
        return {one: not_(and_(r, var(two))), two: not_(and_(s, var(one)))}
    return {one: and_(r, not_(var(two))), two: and_(s, not_(var(one)))}


def mixed(rng: Random, inputs: str, nodes: str) -> Excitation:
    """Any gate or storage anywhere."""
    names = inputs + nodes
    return {n: rng.choice((gate(rng, names), storage(rng, n, names), product_sum(rng, names))) for n in nodes}


def rivals(rng: Random, inputs: str, nodes: str) -> Excitation:
    """Random functions of an input and two nodes each: one input change excites several nodes at once."""
    return {
        n: table(rng, [*rng.sample(inputs, min(1, len(inputs))), *rng.sample(nodes, min(2, len(nodes)))]) for n in nodes
    }


def divider(rng: Random, inputs: str, nodes: str) -> Excitation:
    """Two latches in a ring with an inversion, open in turn: the divider by two; other gates beside it."""
    made = rng.choice((tables, pieces))(rng, inputs, nodes)
    if inputs and len(nodes) > 1:
        one, two = rng.sample(nodes, 2)
        clock = var(rng.choice(inputs))
        made[one] = ite(clock, not_(var(two)), var(one))
        made[two] = ite(clock, var(two), var(one))
    return made


def standoff(rng: Random, inputs: str, nodes: str) -> Excitation:
    """Two nodes that hold each other when they rise together; the first to rise alone hands over to a third."""
    made = rng.choice((tables, pieces))(rng, inputs, nodes)
    if inputs and len(nodes) > 2:
        one, two, third = rng.sample(nodes, 3)
        p, q, w, x = map(var, (one, two, third, rng.choice(inputs)))
        made[one] = and_(x, not_(w), or_(not_(q), p))
        made[two] = and_(x, not_(w), or_(not_(p), q))
        made[third] = and_(x, or_(xor(p, q), w))
    return made


def reset(rng: Random, inputs: str, nodes: str) -> Excitation:
    """One of the other styles, each node cleared or preset by the first input."""
    made = rng.choice((tables, pieces, mixed))(rng, inputs, nodes)
    clear = var(inputs[0]) if inputs else const(0)
    return {n: and_(not_(clear), e) if rng.random() < 0.7 else or_(clear, e) for n, e in made.items()}


Style = Callable[[Random, str, str], Excitation]
STYLES: tuple[Style, ...] = (tables, forward, pieces, pieces, mixed, reset)
RACY: tuple[Style, ...] = (tables, rivals, rivals, divider, standoff, pieces, mixed)


def random_circuit(
    rng: Random, nodes: int = 5, inputs: int = 3, winners: str | None = None, styles: Sequence[Style] = STYLES
) -> Circuit:
    """A circuit of one to `nodes` nodes and up to `inputs` inputs; seldom with none."""
    ins = INPUTS[: rng.randint(1, inputs) if inputs and rng.random() < 0.95 else 0]
    inner = NODES[: rng.choice((*range(1, nodes + 1), *range(2, nodes + 1)))]
    excitation = rng.choice(styles)(rng, ins, inner)
    defined = {name: gate(rng, ins + inner) for name in DEFINED[: rng.choice((0, 0, 1, 2))]}
    signals = [*inner, *defined]
    outputs = tuple(sorted(rng.sample(signals, rng.randint(1, len(signals)))))
    return Circuit(
        name=f"{ins}{inner}",
        inputs=tuple(ins),
        nodes=tuple(inner),
        excitation=excitation,
        outputs=outputs,
        defined=defined,
        winners=winners or rng.choice(("any", "any", "one")),
    )


# ---- environments ----------------------------------------------------------------------------------------------------


def random_environment(
    rng: Random, circuit: Circuit, mode: str | None = None, changes: str | None = None
) -> Environment:
    """An environment for a circuit; without `start` values. Raises `Unaskable` when nothing can start under it."""
    signals = [*circuit.inputs, *circuit.nodes, *circuit.defined]
    mode = mode or rng.choice(MODES)
    often = rng.choice((0, 0, 0.4, 0.8))
    guarded = [x for x in circuit.inputs if rng.random() < often]
    guards = {x: Guard(condition(rng, signals), condition(rng, signals)) for x in guarded}
    if mode == "input-output":
        must = {
            x: Guard(guards[x].rises, guards[x].falls, True) if x in guards else Guard(must=True) for x in signals[:1]
        }
        guards |= must if circuit.inputs and rng.random() < 0.5 else {}
    pair = rng.sample(circuit.inputs, 2) if len(circuit.inputs) > 1 and rng.random() < 0.4 else []
    assume = (not_(and_(*(literal(rng, [x]) for x in pair))),) if pair else ()
    found = Environment(mode=mode, assume=assume, guards=guards)
    return replace(found, changes=changes or rng.choice(CHANGES)) if mode == "fundamental" else found


def with_start(rng: Random, circuit: Circuit, environment: Environment) -> Environment:
    """The environment with some signals' values in one of its start states as `start`."""
    world = world_of(circuit, environment)
    state = rng.choice(sorted(world.starts(), key=sorted))
    signals = [*circuit.inputs, *circuit.nodes, *circuit.defined]
    named = rng.sample(signals, rng.choice((0, 0, len(signals) // 2, len(signals))))
    return replace(environment, start={s: int(world.signal(s, state)) for s in named})


def random_case(
    seed: int | str,
    nodes: int = 5,
    inputs: int = 3,
    mode: str | None = None,
    changes: str | None = None,
    winners: str | None = None,
    styles: Sequence[Style] = STYLES,
) -> tuple[Circuit, Environment]:
    """A circuit and an environment with at least one start state; the same for the same arguments."""
    rng = Random(f"case {seed}")
    while True:
        circuit = random_circuit(rng, nodes, inputs, winners, styles)
        try:
            return circuit, with_start(rng, circuit, random_environment(rng, circuit, mode, changes))
        except Unaskable:
            continue


# ---- questions -------------------------------------------------------------------------------------------------------


def random_question(seed: int | str, check: str, **limits: Any) -> Question:
    """A case that `check` can be asked of, with random options; `limits` as for `random_case`."""
    rng = Random(f"{check} {seed}")
    if check in FUNDAMENTAL_ONLY:
        limits["mode"] = "fundamental"
    if check in ("race-free", "essential-hazard-free"):
        limits.setdefault("styles", RACY)
    circuit, environment = random_case(f"{check} {seed}", **limits)
    return Question(circuit, environment, random_options(rng, circuit, environment, check))


def random_options(rng: Random, circuit: Circuit, environment: Environment, check: str) -> dict[str, Any]:
    """Options of a check on this circuit."""
    signals = [*circuit.inputs, *circuit.nodes, *circuit.defined]
    maker = OPTIONS.get(check)
    return maker(rng, signals, world_of(circuit, environment)) if maker else {}


def _bounds(rng: Random, _signals: list[str], _world: World) -> dict[str, Any]:
    return rng.choice(
        ({}, {"at-least": 0, "at-most": 1}, {"at-least": 1, "at-most": 2}, {"at-most": 2}, {"at-least": 2})
    )


def _signals(rng: Random, signals: list[str], _world: World) -> dict[str, Any]:
    return {"signals": sorted(rng.sample(signals, rng.randint(1, len(signals))))} if rng.random() < 0.6 else {}


def _expression(rng: Random, signals: list[str], world: World) -> Expr:
    leaves = [literal(rng, signals) for _ in range(rng.randint(1, 3))]
    if rng.random() < 0.3:
        leaves.append(rng.choice((STABLE, not_(STABLE), excited(rng.choice(world.circuit.nodes)))))
    return and_(*leaves)


def _never(rng: Random, signals: list[str], world: World) -> dict[str, Any]:
    when = rng.choice(({}, {"when": "always"}, {"when": "stable"}))
    return {"expr": and_(_expression(rng, signals, world), _expression(rng, signals, world)), **when}


def _always(rng: Random, signals: list[str], world: World) -> dict[str, Any]:
    options = _never(rng, signals, world)
    return {**options, "expr": not_(options["expr"])}


def _except(rng: Random, _signals: list[str], world: World) -> dict[str, Any]:
    nodes = world.circuit.nodes
    return {"except": sorted(rng.sample(nodes, rng.randint(1, len(nodes))))} if rng.random() < 0.3 else {}


def _leads(rng: Random, signals: list[str], world: World) -> dict[str, Any]:
    to = or_(_expression(rng, signals, world), _expression(rng, signals, world))
    return {"from": rng.choice((literal(rng, signals), _expression(rng, signals, world))), "to": to}


def _sequence(rng: Random, _signals: list[str], world: World) -> dict[str, Any]:
    vectors = [rng.choice(world.vectors()) for _ in range(rng.randint(1, 3))]
    return {"sequence": [{x: int(x in v) for x in world.circuit.inputs} for v in vectors]}


OPTIONS: dict[str, Callable[[Random, list[str], World], dict[str, Any]]] = {
    "stable-states": _bounds,
    "hazard-free": _signals,
    "never": _never,
    "always": _always,
    "speed-independent": _except,
    "leads-to": _leads,
    "initialises": _sequence,
}
