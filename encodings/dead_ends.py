"""Dead ends as an expression: total states in which no node is excited and no input may change.

A dead end is where the environment can do nothing either, so the expression says for which present states no set of
inputs may change together; the sets are not spelt out but decided input by input, as in a decision diagram (Bryant
1986, recalled).
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence

from settled.models.circuit import Circuit
from settled.models.components import components
from settled.models.environment import Environment
from settled.models.logic import FALSE, TRUE, Expr, and_, const, ite, not_, or_, rename, support, var


def dead_end(circuit: Circuit, environment: Environment) -> Expr:
    """True in exactly the dead ends among the total states that `assume` admits, over inputs and nodes.

    Under `burst` of the states with nothing outstanding: an outstanding input may always change. A burst may begin
    exactly where its first member may change alone.
    """
    may = {}
    for x in circuit.inputs:
        guard = environment.guard(x)
        rises, falls = circuit.resolve(guard.rises, guard.falls)
        may[x] = ite(var(x), falls, rises)
    assume = circuit.resolve(*environment.assume)
    fundamental = environment.mode == "fundamental"
    together = environment.changes == "simultaneous" if fundamental else circuit.winners == "any"
    groups = _together(circuit.inputs, assume) if together else [[x] for x in circuit.inputs]
    return and_(circuit.is_stable, *(not_(_some_change(group, _about(group, assume), may)) for group in groups))


def _about(group: Sequence[str], assume: Sequence[Expr]) -> Expr:
    """The assumptions that a change of the group can break."""
    return and_(*(e for e in assume if set(group) & set(support(e))))


def _together(inputs: Sequence[str], assume: Sequence[Expr]) -> list[list[str]]:
    """The inputs in groups that no assumption connects: where some set may change, some set within a group may."""
    linked: dict[str, list[str]] = {x: [] for x in inputs}
    for e in assume:
        read = support(e)
        for x in read:
            linked[x] += read
    return components(linked)


def _some_change(group: Sequence[str], assume: Expr, may: Mapping[str, Expr]) -> Expr:
    """Whether some non-empty part of the group may change at once into a vector that satisfies `assume`."""
    done: dict[tuple[int, Expr, bool], Expr] = {}

    def rest(i: int, left: Expr, changed: bool) -> Expr:
        """With the first `i` inputs given their next values, under which `left` remains of the assumptions."""
        if left is FALSE or i == len(group) or (left is TRUE and changed):
            return left if changed else FALSE
        if (i, left, changed) not in done:
            x = group[i]
            low, high = (rename([left], {x: const(v)})[0] for v in (0, 1))
            falls = or_(rest(i + 1, high, changed), and_(may[x], rest(i + 1, low, True)))
            rises = or_(rest(i + 1, low, changed), and_(may[x], rest(i + 1, high, True)))
            done[i, left, changed] = ite(var(x), falls, rises)
        return done[i, left, changed]

    return rest(0, assume, False)
