"""What a user would otherwise script with general libraries: the same question as guarded commands.

A command moves one signal where its guard is true; observers move along with it. `winners = "one"` throughout.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from functools import partial, reduce
from typing import Any

from settled.encodings.excitation import formulas
from settled.encodings.monitors import counted
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import (
    FALSE,
    TRUE,
    Expr,
    and_,
    evaluate,
    fold,
    ite,
    not_,
    or_,
    rename,
    support,
    topological,
    var,
)
from settled.verify.questions import Flickers, Question, Reaches, Withdraws
from settled.verify.stable_states import start_conditions, start_states


@dataclass(frozen=True)
class Commands:
    """`commands`: guard and new values. The question: can a state with `bad` true be reached from `start`?

    The first `signals` variables are those of the circuit; `first`: values of the others in a start state.
    """

    circuit: Circuit
    environment: Environment
    variables: tuple[str, ...]
    commands: tuple[tuple[Expr, dict[str, Expr]], ...]
    start: Expr
    first: dict[str, Expr]
    bad: Expr


def commands(circuit: Circuit, environment: Environment, question: Question) -> Commands:
    """The question as guarded commands."""
    assert circuit.winners == "one" and environment.changes == "single"
    found = [(guard, {name: not_(var(name))}) for name, guard in _movers(circuit, environment)]
    first: dict[str, Expr] = {}
    if isinstance(question, Withdraws):
        bad = or_(*(_withdrawn(circuit, *command, question.excepted) for command in found))
    elif isinstance(question, Reaches):
        (bad,) = circuit.resolve(question.bad)
    else:
        assert isinstance(question, Flickers) and len(question.signals) == 1
        (signal,) = circuit.resolve(circuit.signal(question.signals[0]))
        observers, bad = counted("watch", signal, circuit.is_stable, 1)
        first = {o.name: o.first for o in observers}
        found = [(guard, {**new, **{o.name: o.following for o in observers}}) for guard, new in found]
    start = and_(*start_conditions(circuit, environment), *(same(var(v), e) for v, e in first.items()))
    return Commands(circuit, environment, (*circuit.signals, *first), tuple(found), start, first, bad)


def same(one: Expr, other: Expr) -> Expr:
    """Where two expressions have the same value."""
    return ite(one, other, not_(other))


def _movers(circuit: Circuit, environment: Environment) -> Iterator[tuple[str, Expr]]:
    yield from circuit.is_excited.items()
    assume = and_(*circuit.resolve(*environment.assume))
    calm = circuit.is_stable if environment.mode == "fundamental" else TRUE
    for x in circuit.inputs:
        guard = environment.guard(x)
        rises, falls = circuit.resolve(guard.rises, guard.falls)
        yield x, and_(calm, ite(var(x), falls, rises), rename([assume], {x: not_(var(x))})[0])


def _withdrawn(circuit: Circuit, guard: Expr, new: dict[str, Expr], excepted: tuple[str, ...]) -> Expr:
    lost = []
    for n, excited in circuit.is_excited.items():
        if n not in new and n not in excepted and set(new) & set(support(excited)):
            lost.append(and_(excited, not_(rename([excited], new)[0])))
    return and_(guard, or_(*lost))


# ---- the peers -------------------------------------------------------------------------------------------------------


def spacer(asked: Commands) -> str:
    """z3's engine for Horn clauses, one rule a command."""
    import z3

    engine = z3.Fixedpoint()
    engine.set(engine="spacer")
    for option in ("xform.slice", "xform.inline_linear", "xform.inline_eager"):
        engine.set(option, False)
    now = {v: z3.Bool(f"v{i}") for i, v in enumerate(asked.variables)}
    reached = z3.Function("R", *([z3.BoolSort()] * (len(now) + 1)))
    failed = z3.Function("Bad", z3.BoolSort())
    engine.register_relation(reached, failed)
    engine.declare_var(*now.values())
    here = reached(*now.values())
    engine.rule(here, formulas([asked.start], now), "start")
    for number, (guard, new) in enumerate(asked.commands):
        then = dict(zip(new, formulas(list(new.values()), now), strict=True))
        after = reached(*(then.get(v, x) for v, x in now.items()))
        engine.rule(after, [here, *formulas([guard], now)], f"command{number}")
    engine.rule(failed(), [here, *formulas([asked.bad], now)], "bad")
    return {"sat": "refuted", "unsat": "proved"}[str(engine.query(failed()))]


def diagrams(asked: Commands) -> str:
    """Reachability with CUDD: dynamic reordering, a relation for each command, one after the other."""
    from dd import cudd

    manager = cudd.BDD()
    manager.configure(reordering=True)
    for v in asked.variables:
        manager.declare(v, f"{v}'")

    def visit(e: Expr, args: list[Any]) -> Any:
        if e.op == "var":
            return manager.var(e.name)
        if e.op == "const":
            return manager.true if e is TRUE else manager.false
        if e.op == "not":
            return ~args[0]
        return manager.ite(*args) if e.op == "ite" else reduce(partial(manager.apply, e.op), args)

    start, bad = fold([asked.start, asked.bad], visit)
    relations = []
    for guard, new in asked.commands:
        parts = fold([guard, *new.values()], visit)
        equal = [manager.apply("<=>", manager.var(f"{v}'"), f) for v, f in zip(new, parts[1:], strict=True)]
        relations.append((reduce(lambda a, b: a & b, equal, parts[0]), list(new), {f"{v}'": v for v in new}))
    reached, before = start, manager.false
    while reached != before:
        if reached & bad != manager.false:
            return "refuted"
        before = reached
        for relation, moved, back in relations:
            reached = reached | manager.let(back, cudd.and_exists(reached, relation, moved))
    return "proved"


def breadth_first(asked: Commands) -> str:
    """Search over integers, with successors as Python code that is written out for the question."""
    after = compiled(asked)
    starts = [_with_observers(asked, state) for state in start_states(asked.circuit, asked.environment)]
    seen, todo = set(starts), starts
    while todo:
        fresh: list[int] = []
        for state in todo:
            found, bad = after(state)
            if bad:
                return "refuted"
            for s in found:
                if s not in seen:
                    seen.add(s)
                    fresh.append(s)
        todo = fresh
    return "proved"


def _with_observers(asked: Commands, state: int) -> int:
    values = {s: state >> i & 1 for i, s in enumerate(asked.circuit.signals)}
    first = evaluate(list(asked.first.values()), values)
    return state | sum(v << (i + len(asked.circuit.signals)) for i, v in enumerate(first))


def compiled(asked: Commands) -> Callable[[int], tuple[list[int], int]]:
    """A function from a state to its successors and whether it is bad."""
    roots = [asked.bad, *(e for guard, new in asked.commands for e in (guard, *new.values()))]
    name: dict[Expr, str] = {}
    lines = ["def after(s):", " found = []"]
    for number, e in enumerate(topological(roots)):
        name[e] = f"t{number}"
        args = [name[a] for a in e.args]
        lines.append(f" t{number} = {_code(e, args, asked.variables)}")
    place = {v: i for i, v in enumerate(asked.variables)}
    for guard, new in asked.commands:
        kept = ((1 << len(place)) - 1) & ~sum(1 << place[v] for v in new)
        moved = " | ".join([f"s & {kept}", *(f"{name[e]} << {place[v]}" for v, e in new.items())])
        lines.append(f" if {name[guard]}: found.append({moved})")
    lines.append(f" return found, {name[asked.bad]}")
    space: dict[str, Any] = {}
    exec("\n".join(lines), space)
    return space["after"]


def _code(e: Expr, args: list[str], variables: tuple[str, ...]) -> str:
    if e.op == "var":
        return f"s >> {variables.index(e.name)} & 1"
    if e.op == "const":
        return str(int(e is not FALSE))
    if e.op == "not":
        return f"1 - {args[0]}"
    if e.op == "ite":
        return f"{args[1]} if {args[0]} else {args[2]}"
    return {"and": " & ", "or": " | ", "xor": " ^ "}[e.op].join(args)


PEERS: dict[str, Callable[[Commands], str]] = {
    "z3 Spacer": spacer,
    "CUDD": diagrams,
    "breadth-first": breadth_first,
}
