"""Equivalence without a search over states: nodes that correspond, on every loop of both circuits, and equal functions.

For circuits that were refactored: other names, other gates, other latches. The correspondence is guessed by simulation
and proved by SAT; the theorem is in `settled.verify.matching.proving`. Both circuits must settle and be free from
critical races, each by itself; what comes of it when they are not is found by the searches over pairs of states.
"""

from __future__ import annotations

from dataclasses import replace
from typing import Any

from settled.verify import known_responses
from settled.verify.engines import Engine
from settled.verify.engines.scheduled_pairs import is_proved
from settled.verify.matching.classes import Classes
from settled.verify.matching.cuts import JointCut, Loops, Pairs, own_cut
from settled.verify.matching.guesses import Different, Guesses, Partner, watch
from settled.verify.matching.proving import Correspondence
from settled.verify.pairing import environment_of_other
from settled.verify.questions import Answer, Differs, Diverges, Oscillates, Question, Task, undecided
from settled.verify.settled_states import Settled

NAME = "corresponding nodes on every loop, guessed by simulation, proved by SAT, re-checked by z3"
ATTEMPTS = 20


def differs(task: Task, question: Differs) -> Answer:
    """`proved` when corresponding nodes cut all loops and both circuits settle without critical races."""
    if question.transients:
        return undecided("corresponding nodes say nothing of transients", NAME)
    try:
        found = correspondence(half(task), question)
    except Different as seen:
        return undecided(str(seen), NAME)
    if found is None:
        return undecided("no corresponding nodes were found that lie on every loop of both circuits", NAME)
    for side in (task, found.facing_task(task.limits)):
        if not one_end(side):
            return undecided(f"it is not proved that {side.circuit.name} settles, and always in one state", NAME)
    found.confirm(task.limits)
    exercised = known_responses.exercised(found.left, task)
    return Answer("proved", NAME, exercised=exercised, certificate=certificate(found.pairs))


def correspondence(task: Task, question: Differs) -> Correspondence | None:
    """Pairs that cut all loops and are proved to correspond: like-named nodes, or else those that behave alike.

    Raises `Different` when simulation shows that the circuits are not equivalent.
    """
    circuits = task.circuit, question.other
    cuts = own_cut(circuits[0]), own_cut(circuits[1])
    named = {n: Partner(n, False) for n in cuts[0] if n in circuits[1].excitation}
    found = refined(task, question, {n: [p] for n, p in named.items()}, named)
    if found is not None:
        return found
    sides = Settled(circuits[0], cuts[0]), Settled(circuits[1], cuts[1])
    rules = task.environment, environment_of_other(task.environment, question)
    seen = watch(sides, rules, question.outputs, task.limits)
    classes = Classes(sides, seen)
    classes.refine(task.limits)
    return refined(task, question, seen.partners(circuits), classes.pairs())


def refined(task: Task, question: Differs, partners: Guesses, likely: Pairs) -> Correspondence | None:
    """Pairs that are proved to correspond; those that are refuted are not tried again."""
    for _ in range(ATTEMPTS):
        pairs = JointCut(Loops(task.circuit), Loops(question.other), partners, likely).run()
        if pairs is None:
            return None
        made = Correspondence(task, question, pairs)
        refuted = {n: pairs[n] for n in made.wrong_nodes(task.limits)}
        if not refuted:
            return None if made.wrong_outputs(task.limits) else made
        likely = {n: p for n, p in likely.items() if n not in refuted}
        partners = {n: [p for p in found if p != refuted.get(n)] for n, found in partners.items()}
    return None


def one_end(task: Task) -> bool:
    """Whether every run of a circuit settles and every change has one end."""
    if isinstance(known_responses.proof(task), known_responses.Established):
        return True
    needed: tuple[Question, ...] = (Oscillates(), Diverges())
    return all(is_proved(half(task), task.circuit, task.environment, question) for question in needed)


def half(task: Task) -> Task:
    """The task with half of the time that is left: some failures are for other engines to find."""
    return replace(task, limits=replace(task.limits, seconds=task.limits.spent() + task.limits.left() / 2))


def certificate(pairs: Pairs) -> dict[str, Any]:
    """The pairs: a node of the original, `=` or `~` for the inverse, a node of the other circuit."""
    listed = [[n, "~" if p.inverse else "=", p.node] for n, p in pairs.items()]
    return {"kind": "cut correspondence", "pairs": listed}


ENGINE = Engine(NAME, rank=6, answers={Differs: differs}, apart=True)
