"""Progress: whether a fair run can evade a goal."""

from __future__ import annotations

from dataclasses import replace

from settled.encodings.monitors import SAVED, evading, waiting_for
from settled.encodings.motions import pressing
from settled.encodings.system import System
from settled.models.logic import FALSE, Expr, and_
from settled.verify.questions import Evades, Question
from settled.verify.rules import Established, Failure, Outcome, Rule
from settled.verify.symbolic.certificates import Proof
from settled.verify.symbolic.constancy import Finder, World, quiet
from settled.verify.symbolic.reach import Reacher, Trail

KEPT = "clauses about what a run that waits for the goal does"
NOTHING = (
    "Signal by signal it follows what is constant in the end of a fair run that waits for the goal for ever, and that "
    "nothing constant presses to move; in the end no state is left."
)


def waiting(reacher: Reacher, question: Evades) -> tuple[System, Expr]:
    """The system that observes whether the goal is to come, and the condition that it is, now."""
    observer, far = waiting_for(*reacher.circuit.resolve(question.source, question.target))
    return reacher.base.observed([observer]), far


def constant_in_the_end(reacher: Reacher, question: Evades) -> Outcome:
    """If the argument of `constancy` leaves no state in which a fair run may wait for ever, the goal is always reached.

    Where it leaves some, a reachable state in which a run may end while it waits is looked for: there is one, or the
    proof that there is none says more about all states.
    """
    made, far = waiting(reacher, question)
    world = World(made, ())
    finder = Finder(world, far, reacher.known, reacher.progress)
    if not finder.run() and not (finder.learn(reacher.about(made)) and finder.run()):
        found = reacher.reach(made, and_(far, quiet(world)), "no run ends while it waits for the goal")
        if isinstance(found, Trail):
            return Failure((reacher.shortest(found).run("the run without the goal"),))
        finder.learn(found.clauses)
        finder.run()
    derivation = finder.derivation()
    finder.close()
    if not derivation.closed:
        return None
    return Established(NOTHING, (Proof(made, FALSE, derivation.clauses, KEPT),), (derivation,))


def no_return(reacher: Reacher, question: Evades) -> Outcome:
    """Exact: a fair run can wait for the goal for ever when a saved state of it comes again by a fair run."""
    waits, far = waiting(reacher, question)
    made, again = evading(waits, far, pressing(reacher.circuit, reacher.environment))
    found = reacher.reach(made, again, "no fair run that waits for the goal comes again to a state that it has left")
    if isinstance(found, Proof):
        return Established("No state in which a run waits for the goal comes again by a fair run that waits.", (found,))
    return _failure(reacher.shortest(found))


def _failure(trail: Trail) -> Failure:
    entry = max(i for i, s in enumerate(trail.states) if not s[SAVED])
    before = replace(trail, states=trail.states[: entry + 1]).run("the run without the goal")
    around = replace(trail, states=trail.states[entry:]).run("").states
    if len(around) == 1:
        return Failure((before,))
    return Failure((replace(before, states=(*before.states, *around[1:-1]), loop=len(before.states) - 1),))


RULES: dict[type[Question], list[Rule]] = {Evades: [constant_in_the_end, no_return]}
