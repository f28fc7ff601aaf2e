"""Equivalence refuted by SAT: the fewest input changes after which the outputs differ, in circuits of any width.

Both circuits are unrolled change by change. That no fewer changes do is certain when every response of both has one
end, which three-valued simulation has to show, and when each start state has one partner at most.
"""

from __future__ import annotations

from dataclasses import replace

from settled.models.states import Run, members
from settled.verify import known_responses
from settled.verify.engines import Engine
from settled.verify.explicit.scheduled_replies import ScheduledReplies, Schedules
from settled.verify.limits import Limits
from settled.verify.matching.classes import Classes
from settled.verify.matching.cuts import own_cut
from settled.verify.matching.guesses import Different, Rules, Sides, only_partners, watch
from settled.verify.matching.unrolled import Machine, Unrolled, rounds_needed
from settled.verify.pairing import Schedule, environment_of_other
from settled.verify.questions import Answer, Differs, Task, undecided
from settled.verify.settled_states import Settled

NAME = "shortest difference, by SAT on both circuits unrolled change by change"
MOST = 64


def differs(task: Task, question: Differs) -> Answer:
    """`refuted` when the outputs can differ after so many changes. Takes half of the time that is left."""
    if question.transients or (task.environment.changes == "burst" and task.environment.assume):
        return undecided("neither transients nor bursts under assumptions are unrolled", NAME)
    limits = replace(task.limits, seconds=task.limits.spent() + task.limits.left() / 2)
    rules = task.environment, environment_of_other(task.environment, question)
    if not only_partners(question.other, rules[1], limits):
        return undecided(f"start states of {question.other.name} have the same inputs", NAME)
    sides = Settled(task.circuit, own_cut(task.circuit)), Settled(question.other, own_cut(question.other))
    found = unrolled(sides, rules, question, limits)
    if isinstance(found, str):
        return undecided(found, NAME)
    for side, environment in zip(sides, rules, strict=True):
        known = known_responses.proof(Task(side.circuit, environment, limits))
        if isinstance(known, str):
            return undecided(f"the outputs differ, but perhaps sooner, too: {known}", NAME)
    return refutation(sides, rules, question, found)


def unrolled(sides: Sides, rules: Rules, question: Differs, limits: Limits) -> Unrolled | str:
    """Both circuits as long as it takes for the outputs to differ; or why they were not seen to differ."""
    rounds = [rounds_needed(side, environment, limits) for side, environment in zip(sides, rules, strict=True)]
    if rounds[0] is None or rounds[1] is None:
        return "the circuits may not settle"
    machines = Machine(sides[0], "original", rounds[0]), Machine(sides[1], "other", rounds[1])
    made = Unrolled(machines, rules, limits)
    try:
        made.alike = [*Classes(sides, watch(sides, rules, question.outputs, limits, strict=False)).pairs().items()]
    except Different:
        return "no start state has a partner"
    while True:
        made.settle_alike()
        if made.apart(question.outputs):
            return made
        if made.length == MOST:
            return f"no sequence of {MOST} input changes shows a difference"
        made.one_more()


def refutation(sides: Sides, rules: Rules, question: Differs, found: Unrolled) -> Answer:
    """The runs of both sides in step, by one schedule of each response."""
    titles = "the original", "the other circuit"
    runs: list[Run] = []
    places: list[list[int]] = []
    for side, environment, title, states in zip(sides, rules, titles, found.states(), strict=True):
        replies = ScheduledReplies(Schedules(side.circuit, side.cut), environment, question.outputs, found.limits)
        path, stops = [states[0]], []
        for before, after in zip(states, states[1:], strict=False):
            stops.append(len(path) - 1)
            change = schedule((before ^ after) & side.circuit.input_mask, environment.changes)
            path += replies.run_to(before, change, after)[1:]
        runs.append(Run(title, tuple(path), None, side.circuit.name))
        places.append(stops)
    in_step = [[a, b] for a, b in zip(*places, strict=True)]
    facts = {"fewest_changes": found.length, "in_step": in_step, "partners": 1}
    return Answer("refuted", NAME, runs=tuple(runs), facts=facts)


def schedule(moved: int, how: str) -> Schedule:
    """A change of these inputs, one after the other under `burst`."""
    return tuple(members(moved)) if how == "burst" else (moved,)


ENGINE = Engine(NAME, rank=7, answers={Differs: differs}, apart=True)
