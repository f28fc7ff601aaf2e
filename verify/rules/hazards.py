"""Hazards: which signals change more than once in a response."""

from __future__ import annotations

from dataclasses import replace

from settled.encodings.monitors import counted
from settled.encodings.system import Restraint, system
from settled.models.logic import FALSE, and_, not_, var
from settled.verify.questions import Flickers, Question
from settled.verify.rules import Established, Failure, Outcome, Rule
from settled.verify.symbolic.certificates import Proof
from settled.verify.symbolic.reach import Reacher, Trail

ONCE = (
    "Observers hold the value each signal had when the circuit was last stable with nothing outstanding, and whether "
    "it has changed since; no state is reachable in which a signal that has changed has its old value again."
)


def observers(reacher: Reacher, question: Flickers) -> Outcome:
    """A signal changes twice in a response when, having had another value, it has again the one it had in rest."""
    proofs = []
    for signal in question.signals:
        (body,) = reacher.circuit.resolve(var(signal))
        watching, twice = counted(signal, body, reacher.base.rest, 1)
        found = reacher.reach(reacher.base.observed(watching), twice, f"`{signal}` never changes twice in one response")
        if isinstance(found, Trail):
            return _failure(reacher, reacher.shortest(found), signal)
        proofs.append(found)
    return Established(ONCE, tuple(proofs))


def _failure(reacher: Reacher, trail: Trail, signal: str) -> Failure:
    run = trail.run("the run through the hazard")
    rest = _to_rest(reacher, trail)
    facts = {"signal": signal, "offending_step": len(run.states) - 1, "settles": rest is not None}
    more = rest.run(run.title).states[1:] if rest is not None else ()
    return Failure((replace(run, states=(*run.states, *more)),), facts)


def _to_rest(reacher: Reacher, trail: Trail) -> Trail | None:
    """From the last state of a trail to the end of the response, or None when it has none."""
    base = system(reacher.circuit, reacher.environment, Restraint(picks=FALSE))
    here = and_(*(var(v) if trail.states[-1][v] else not_(var(v)) for v in base.variables))
    found = reacher.reach(replace(base, start=here), base.rest, "the response has no end")
    return None if isinstance(found, Proof) else found


RULES: dict[type[Question], list[Rule]] = {Flickers: [observers]}
