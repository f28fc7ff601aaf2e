"""Settling: no fair run goes on for ever while the inputs are held."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

from settled.encodings.monitors import SAVED, counted, returning
from settled.encodings.system import Restraint, system
from settled.models.circuit import loops
from settled.models.logic import TRUE, and_, const, not_, rename, support, var
from settled.verify.questions import Oscillates, Question
from settled.verify.rules import Established, Failure, Outcome, Rule
from settled.verify.stable_states import Query
from settled.verify.symbolic.certificates import Proof
from settled.verify.symbolic.constancy import Finder, World
from settled.verify.symbolic.reach import Reacher, Trail

MOST = 2
ALL_CONSTANT = "Node by node it follows that it is constant in the end of a fair run with the inputs held: it settles."


def no_loops(reacher: Reacher, _: Oscillates) -> Outcome:
    """A circuit whose only loops are nodes that, all else held, keep what they have switched to, settles.

    Along a topological order: when all that a node reads is constant for good, it switches at most once more, and in
    a fair run it does not wait for ever; so it is constant for good, too.
    """
    if restless_loops(reacher):
        return None
    return Established("No node can go round by itself and none reads itself through others: every fair run settles.")


def restless_loops(reacher: Reacher) -> list[list[str]]:
    """The loops of the circuit, those left out that are one node which keeps what it has switched to."""
    circuit = reacher.circuit
    return [loop for loop in loops(circuit.nodes, circuit.excitation) if len(loop) > 1 or not _keeps(reacher, loop[0])]


def _keeps(reacher: Reacher, node: str) -> bool:
    """Whether a node, all else held, is no longer excited once it has switched, whatever the rest is."""
    at = [rename([reacher.circuit.excitation[node]], {node: const(v)})[0] for v in (0, 1)]
    query = Query()
    query.clauses().require(at[0], not_(at[1]))
    return query.true_variables() is None


def constant_in_the_end(reacher: Reacher, _: Oscillates) -> Outcome:
    """If by the argument of `constancy` every node is constant in the end while the inputs are held, runs settle.

    `no_loops` for loops that what is reachable, or what other nodes come to, keeps from going round.
    """
    made = reacher.base
    finder = Finder(World(made, made.environs), TRUE, reacher.known, reacher.progress)
    finder.run()
    moving, derivation = finder.moving, finder.derivation()
    finder.close()
    return None if moving else Established(ALL_CONSTANT, (), (derivation,))


def few_changes(reacher: Reacher, _: Oscillates) -> Outcome:
    """If each node of a set that cuts all loops changes at most k times in each response, for some k, runs settle.

    From some moment on the nodes of the set are constant; the others read one another without a loop, so they switch
    a bounded number of times after it (see `no_loops`). Such responses are even finite, fair or not.
    """
    if reacher.environment.mode != "fundamental":
        return None
    proofs = []
    for node in cut(reacher):
        proof = _bounded(reacher, node)
        if proof is None:
            return None
        proofs.append(proof)
    rule = "Every loop goes through a node that changes only so many times in a response, so every run comes to rest."
    return Established(rule, tuple(proofs))


def _bounded(reacher: Reacher, node: str) -> Proof | None:
    for most in range(1, MOST + 1):
        watching, more = counted(node, var(node), reacher.base.rest, most)
        claim = f"`{node}` never changes more than {most} times in one response"
        found = reacher.reach(reacher.base.observed(watching), more, claim)
        if isinstance(found, Proof):
            return found
    return None


def cut(reacher: Reacher) -> list[str]:
    """A set of nodes that lies on every loop (not a smallest one): the busiest node of each loop, again and again."""
    circuit = reacher.circuit
    left, chosen = restless_loops(reacher), []
    while left:
        loop = left.pop()
        inside = set(loop)
        read = {n: [r for r in support(circuit.excitation[n]) if r in inside] for n in loop}
        readers = {n: sum(n in r for r in read.values()) for n in loop}
        busiest = max(loop, key=lambda n: (readers[n] * len(read[n]), -circuit.place[n]))
        chosen.append(busiest)
        rest = [n for n in loop if n != busiest]
        parts = loops(rest, {n: circuit.excitation[n] for n in rest})
        left += [part for part in parts if len(part) > 1 or not _keeps(reacher, part[0])]
    return sorted(chosen, key=circuit.place.__getitem__)


def no_loop_goes_round(reacher: Reacher, _: Oscillates) -> Outcome:
    """If no loop can go round by itself, from any reachable state with all else held, no fair run goes on for ever.

    In a sustained oscillation take a loop (a set of nodes that read one another) of which a node moves while all that
    the loop reads from outside is constant; its own moves alone, from the same state, are a fair run of the loop.
    """
    proofs = []
    for loop in restless_loops(reacher):
        made, round_ = returning(reacher.circuit, reacher.environment, loop)
        found = reacher.reach(made, round_, f"the loop through `{loop[0]}` never goes round by itself")
        if isinstance(found, Trail):
            return None
        proofs.append(found)
    rule = "No loop, left to itself in a reachable state with all else held, comes back to a state it has left."
    return Established(rule, tuple(proofs))


def no_return(reacher: Reacher, _: Oscillates) -> Outcome:
    """Exact: a sustained oscillation exists when a saved unstable state comes again by a fair run, the inputs held."""
    made, round_ = returning(reacher.circuit, reacher.environment, reacher.circuit.nodes)
    found = reacher.reach(made, round_, "no fair run with the inputs held comes back to an unstable state")
    if isinstance(found, Proof):
        return Established("No reachable unstable state comes again by a fair run with the inputs held.", (found,))
    return _failure(reacher, reacher.shortest(found))


def _failure(reacher: Reacher, trail: Trail) -> Failure:
    entry = max(i for i, s in enumerate(trail.states) if not s[SAVED])
    before = replace(trail, states=trail.states[: entry + 1]).run("once round the oscillation")
    around = replace(trail, states=trail.states[entry:]).run("").states
    run = replace(before, states=(*before.states, *around[1:-1]), loop=len(before.states) - 1)
    return Failure((run,), _ways_out(reacher, trail.states[entry]))


def _ways_out(reacher: Reacher, state: Mapping[str, int]) -> dict[str, bool]:
    """`some_run_settles` is false when no run settles from here with the inputs held; else it is left open."""
    circuit = reacher.circuit
    base = system(circuit, reacher.environment, Restraint(dict.fromkeys(circuit.inputs, TRUE)))
    here = and_(*(var(v) if state[v] else not_(var(v)) for v in base.variables))
    found = reacher.reach(replace(base, start=here), circuit.is_stable, "no run settles from here")
    return {"some_run_settles": False} if isinstance(found, Proof) else {}


RULES: dict[type[Question], list[Rule]] = {
    Oscillates: [no_loops, constant_in_the_end, few_changes, no_loop_goes_round, no_return]
}
