"""Where each variable may move and what may not wait for ever, as conditions on one total state, from the definitions.

A variable moves only out of states in which its condition holds; the converse is not promised (whether the input
vectors of a larger step are admitted is left out). What presses is exact.
"""

from __future__ import annotations

from dataclasses import dataclass

from settled.encodings.system import outstanding, waiting_inputs
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.logic import TRUE, Expr, and_, ite, not_, or_, rename, var


@dataclass(frozen=True)
class Motion:
    """Where a variable may rise and fall."""

    rises: Expr
    falls: Expr


def motions(circuit: Circuit, environment: Environment) -> dict[str, Motion]:
    """For each input and node, and under `burst` for what is outstanding."""
    waiting = waiting_inputs(circuit, environment)
    rest = and_(circuit.is_stable, *(not_(var(outstanding(x))) for x in waiting))
    begins = rest if environment.mode == "fundamental" else TRUE
    alone = environment.changes == "single" if environment.mode == "fundamental" else circuit.winners == "one"
    found: dict[str, Motion] = {}
    for x in circuit.inputs:
        picked = and_(begins, allowed(circuit, environment, x))
        moves = and_(picked, admitted(circuit, environment, x)) if alone else picked
        moves = or_(var(outstanding(x)), picked) if waiting else moves
        found[x] = _when(var(x), moves, moves)
    for n in circuit.nodes:
        found[n] = _when(var(n), circuit.excitation[n], not_(circuit.excitation[n]))
    for x in waiting:
        found[outstanding(x)] = _when(var(outstanding(x)), and_(begins, allowed(circuit, environment, x)), TRUE)
    return found


def _when(now: Expr, rises: Expr, falls: Expr) -> Motion:
    return Motion(and_(not_(now), rises), and_(now, falls))


def pressing(circuit: Circuit, environment: Environment) -> dict[str, Expr]:
    """What may not wait for ever, and where it presses: nodes, `must` inputs, and what is outstanding of a burst.

    A fair run does not stay among states in all of which one of them presses with the same value; nor does it stay
    with something outstanding all the time.
    """
    found = dict(circuit.is_excited)
    for x in circuit.inputs:
        if environment.guard(x).must:
            found[x] = and_(allowed(circuit, environment, x), admitted(circuit, environment, x))
    return found | {outstanding(x): var(outstanding(x)) for x in waiting_inputs(circuit, environment)}


def allowed(circuit: Circuit, environment: Environment, name: str) -> Expr:
    """Where the guard of an input lets it change."""
    guard = environment.guard(name)
    rises, falls = circuit.resolve(guard.rises, guard.falls)
    return ite(var(name), falls, rises)


def admitted(circuit: Circuit, environment: Environment, name: str) -> Expr:
    """Where the input vector with one input inverted satisfies `assume`."""
    return and_(*rename(circuit.resolve(*environment.assume), {name: not_(var(name))}))
