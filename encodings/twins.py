"""Two runs of one circuit side by side (self-composition): the same until a change begins, each on its own after it.

In a stable total state the runs may part: the environment makes one change or picks one burst for both. From then on
the second run has its own nodes (and, under `burst`, its own order of arrival), and no further change begins.
"""

from __future__ import annotations

from settled.encodings.system import May, Restraint, System, after, outstanding, system, waiting_inputs
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import FALSE, Expr, and_, ite, not_, or_, rename, var, xor

PARTED, PARTS = "runs parted", "runs part"


def twin(name: str) -> str:
    """The variable of the second run."""
    return f"{name} twin"


def twins(circuit: Circuit, environment: Environment) -> tuple[System, Expr]:
    """The system of two runs, and the condition that both have ended in different stable total states.

    The first run has the circuit's own names. Before the runs part, the variables of the second are 0.
    """
    parted = var(PARTED)
    first = system(circuit, environment, Restraint(picks=not_(parted)))
    second = system(circuit, environment, Restraint(picks=FALSE))
    parts = and_(var(PARTS), first.rest, not_(parted))
    own = second.base if waiting_inputs(circuit, environment) else circuit.nodes
    names = {v: var(twin(v)) for v in (*own, *second.selectors)}
    may = dict(first.may)
    for v in own:
        follow = rename(second.may[v], names)
        may[twin(v)] = _begun(parted, parts, _at_parting(first, v), (follow[0], follow[1]))
    may[PARTED] = not_(or_(parted, parts)), or_(parted, parts)
    begins = and_(first.start, not_(parted), *(not_(var(twin(v))) for v in own))
    own_selectors = (twin(v) for v in second.selectors)
    made = System(
        circuit,
        environment,
        may,
        (*first.selectors, *own_selectors, PARTS),
        begins,
        first.always,
        first.rest,
        first.restraint,
    )
    apart = or_(*(xor(var(n), names[n]) for n in circuit.nodes))
    return made, and_(parted, first.rest, rename([second.rest], names)[0], apart)


def _at_parting(first: System, name: str) -> Expr:
    """The second run's first value: as in the stable state, the whole burst outstanding."""
    inputs = {outstanding(x): x for x in first.circuit.inputs}
    if name not in inputs:
        return var(name)
    x = inputs[name]
    return or_(var(after(name)), xor(var(x), var(after(x))))


def _begun(parted: Expr, parts: Expr, value: Expr, follow: May) -> May:
    """0 before the runs part, `value` when they do, and after it what `follow` says."""
    zero, one = follow
    return ite(parted, zero, not_(and_(parts, value))), ite(parted, one, and_(parts, value))
