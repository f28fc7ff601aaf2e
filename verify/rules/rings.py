"""Disabling rings: whether a total state with one can be reached.

A proof that none can is worth having before other questions are asked: its clauses tell much about the circuit.
"""

from __future__ import annotations

from settled.encodings.system import outstanding, waiting_inputs
from settled.models.logic import Expr, and_, not_, or_, rename, support, var
from settled.verify.limits import LimitReached
from settled.verify.symbolic.certificates import Proof
from settled.verify.symbolic.reach import Reacher, Trail

SHARE = 0.5
FEWEST = 8


def search(reacher: Reacher) -> Proof | Trail:
    """Look for a reachable ring, once. Raises `LimitReached`."""
    if "ring" not in reacher.memory:
        claim = "no reachable state has a disabling ring"
        reacher.memory["ring"] = reacher.reach(reacher.base, ring(reacher), claim)
    found: Proof | Trail = reacher.memory["ring"]
    return found


def prepare(reacher: Reacher) -> None:
    """Look for a ring, within a share of the time, for the sake of the clauses of a proof."""
    if len(reacher.circuit.nodes) < FEWEST:
        return
    try:
        with reacher.within(SHARE):
            search(reacher)
    except LimitReached:
        reacher.progress.tick()


def ring(reacher: Reacher) -> Expr:
    """Whether there is a disabling ring: a state, and a choice of its members.

    A non-empty set of excited nodes each of which loses its excitation when some other excited member switches; or one
    node, when the switching of another excited node takes away its excitation and it would not be excited back, had it
    switched just before. Outstanding inputs of a burst switch and disable as nodes do.
    """
    circuit = reacher.circuit
    waiting = waiting_inputs(circuit, reacher.environment)
    moves = {**circuit.is_excited, **{x: var(outstanding(x)) for x in waiting}}
    member = {n: var(f"{n} in ring") for n in circuit.nodes}
    rules, alone = [], []
    for n in circuit.nodes:
        now = moves[n]
        loses = {s: and_(now, moves[s], not_(_flipped(now, s))) for s in support(now) if s in moves and s != n}
        taken = or_(*(and_(member[s], lost) for s, lost in loses.items() if s in member))
        rules.append(or_(not_(member[n]), taken))
        if n in support(circuit.excitation[n]):
            alone += [and_(lost, not_(_flipped(now, s, n))) for s, lost in loses.items()]
    return or_(and_(or_(*member.values()), *rules), *alone)


def _flipped(e: Expr, *names: str) -> Expr:
    return rename([e], {n: not_(var(n)) for n in names})[0]
