"""Races: whether the response to a change has more than one end."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from settled.encodings.system import outstanding, waiting_inputs
from settled.encodings.twins import PARTED, twin, twins
from settled.models.logic import Expr, and_, not_, or_, rename, support, var
from settled.verify.questions import Diverges, Oscillates
from settled.verify.rules import Established, Failure, Outcome, settling
from settled.verify.symbolic.certificates import Proof
from settled.verify.symbolic.reach import Reacher, Trail, without_repeats


def no_disabling_ring(reacher: Reacher, _: Diverges) -> Outcome:
    """If no reachable total state has a disabling ring, and every run settles, each change has one end.

    A disabling ring is a non-empty set of excited nodes each of which loses its excitation when some other excited
    member switches; or one node, when the switching of another excited node takes away its excitation and it would
    not be excited back, had it switched just before. Outstanding inputs of a burst switch and disable as nodes do.

    Why it holds: without rings the members of a set that may switch at once may also switch one after the other, so
    single switches decide. Two excited nodes i, j of a state then join again: by switching the other, or, when j
    disables i, because i after j goes back. By induction along the strongly connected parts of what a response can
    reach, all exits of a part have the same end: either the part is a single state, or, since runs settle, some node
    is excited in all of its states and leaves it from each, and neighbouring exits join (compare Newman 1942).
    The case that `assume` lets an arrival prevent another is left out.
    """
    waiting = waiting_inputs(reacher.circuit, reacher.environment)
    if waiting and reacher.environment.assume:
        return None
    found = reacher.reach(reacher.base, ring(reacher), "no reachable state has a disabling ring")
    if isinstance(found, Trail):
        return None
    settled = settles(reacher)
    if settled is None:
        return None
    rule = f"No disabling ring is reachable, and every run settles, so each change has one end. {settled.rule}"
    return Established(rule, (found, *settled.proofs))


def settles(reacher: Reacher) -> Established | None:
    """The first rule that shows that every run settles."""
    for rule in settling.RULES[Oscillates]:
        found = rule(reacher, Oscillates())
        if isinstance(found, Established):
            return found
        if found is not None:
            return None
    return None


def ring(reacher: Reacher) -> Expr:
    """Whether there is a disabling ring: a state, and a choice of its members."""
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
        reads_itself = n in support(circuit.excitation[n])
        alone += [and_(lost, not_(_flipped(now, s, n))) for s, lost in loses.items() if reads_itself]
    return or_(and_(or_(*member.values()), *rules), *alone)


def _flipped(e: Expr, *names: str) -> Expr:
    return rename([e], {n: not_(var(n)) for n in names})[0]


def two_runs(reacher: Reacher, _: Diverges) -> Outcome:
    """Exact: two runs that part in a stable state and end in different ones, searched side by side."""
    made, apart = twins(reacher.circuit, reacher.environment)
    found = reacher.reach(made, apart, "no two runs that part in a stable state end in different ones")
    if isinstance(found, Proof):
        return Established(
            "Two runs side by side that part at a change never end in different stable states.", (found,)
        )
    return _failure(reacher, found)


def _failure(reacher: Reacher, trail: Trail) -> Failure:
    first = trail.run("one ordering")
    names: Mapping[str, str] = {v: twin(v) for v in reacher.circuit.signals if twin(v) in trail.states[0]}
    parted = next(i for i, s in enumerate(trail.states) if s[PARTED])
    common = Trail(trail.system, trail.states[:parted]).run("").states
    own = Trail(trail.system, trail.states[parted:]).run("another ordering", names)
    second = replace(own, states=without_repeats([*common, *own.states]))
    return Failure((first, second))


RULES = {Diverges: [no_disabling_ring, two_runs]}
