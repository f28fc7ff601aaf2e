"""Equivalence refuted by SAT: the fewest input changes after which the outputs differ, in circuits of any width.

Both circuits are unrolled change by change. A start state of the one with one partner at most has no good partner when
the runs of the two come to differ. That no fewer changes do is certain when every response of both has one end, which
three-valued simulation has to show; where it does not, the runs of one schedule stand if they differ.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import replace
from itertools import pairwise

from settled.models.states import Run, members
from settled.verify import known_responses
from settled.verify.engines import Engine
from settled.verify.explicit.scheduled_replies import ScheduledReplies, Schedules
from settled.verify.limits import Limits
from settled.verify.matching.classes import Classes
from settled.verify.matching.cuts import own_cut
from settled.verify.matching.guesses import Different, Rules, Sides, only_partners, watch
from settled.verify.matching.lonely import lonely_start
from settled.verify.matching.unrolled import Machine, Unrolled, rounds_needed
from settled.verify.pairing import Schedule, both_need_partners, environment_of_other
from settled.verify.questions import Answer, Differs, Task, undecided
from settled.verify.settled_states import Settled

NAME = "shortest difference, by SAT on both circuits unrolled change by change"
MOST, FEW = 40, 8
"""How many changes are looked at; few where the circuits have little in common inside, which makes it hard."""

TITLES = "the original", "the other circuit"


def differs(task: Task, question: Differs) -> Answer:
    """`refuted` when the outputs can differ after so many changes. Takes half of the time that is left."""
    if question.transients or (task.environment.changes == "burst" and task.environment.assume):
        return undecided("neither transients nor bursts under assumptions are unrolled", NAME)
    limits = replace(task.limits, seconds=task.limits.spent() + task.limits.left() / 2)
    rules = task.environment, environment_of_other(task.environment, question)
    if not partners_are_sure(task, question, limits):
        return undecided("start states have the same inputs, so that it is open which go together", NAME)
    sides = Settled(task.circuit, own_cut(task.circuit)), Settled(question.other, own_cut(question.other))
    alone = without_partner(sides, rules, both_need_partners(task.environment, question), limits)
    if alone is not None:
        return alone
    found = unrolled(sides, rules, question, limits)
    return undecided(found, NAME) if isinstance(found, str) else refutation(sides, rules, question, found)


def partners_are_sure(task: Task, question: Differs, limits: Limits) -> bool:
    """Whether each start state of a side that needs partners has one partner at most."""
    if only_partners(question.other, environment_of_other(task.environment, question), limits):
        return True
    both = both_need_partners(task.environment, question)
    return both and only_partners(task.circuit, task.environment, limits)


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
        akin = 3 * len(made.alike) > len(sides[0].cut)
        if made.length >= (MOST if akin else FEW):
            return f"no sequence of {made.length} input changes shows a difference"
        made.one_more()


def without_partner(sides: Sides, rules: Rules, both: bool, limits: Limits) -> Answer | None:
    """A start state with none of the other side under its inputs; `both`: whether the other side's need one, too."""
    for title, turn in zip(TITLES[: 1 + both], (1, -1), strict=False):
        state = lonely_start(sides[::turn], rules[::turn], limits)
        if state is not None:
            run = Run(f"{title}: a start state without a partner", (state,), None, sides[::turn][0].circuit.name)
            return Answer("refuted", NAME, runs=(run,), facts={"fewest_changes": 0})
    return None


def refutation(sides: Sides, rules: Rules, question: Differs, found: Unrolled) -> Answer:
    """The runs of both sides in step, by one schedule of each response."""
    replies = [
        ScheduledReplies(Schedules(side.circuit, side.cut), environment, question.outputs, found.limits)
        for side, environment in zip(sides, rules, strict=True)
    ]
    paths, in_step = in_lockstep(replies, found)
    if not apart(replies, paths):
        return undecided("the outputs may differ, but not by the schedule that was followed", NAME)
    facts = {"fewest_changes": len(in_step), "in_step": in_step, "partners": 1}
    sure = (known_responses.shown(Task(s.circuit, e, found.limits)) for s, e in zip(sides, rules, strict=True))
    if len(in_step) > 1 and not all(sure):
        facts["perhaps_fewer"] = True
    runs = [Run(t, tuple(p), None, s.circuit.name) for t, p, s in zip(TITLES, paths, sides, strict=True)]
    return Answer("refuted", NAME, runs=tuple(runs), facts=facts)


def in_lockstep(replies: Sequence[ScheduledReplies], found: Unrolled) -> tuple[list[list[int]], list[list[int]]]:
    """The total states that both sides go through until their outputs differ, and where each change finds them.

    It ends sooner when a guard of the original forbids the next change.
    """
    original, other = found.states()
    paths, in_step = [[original[0]], [other[0]]], []
    left = replies[0].behaviour
    for before, after in pairwise(original):
        change = (before ^ after) & left.circuit.input_mask
        if apart(replies, paths) or change & ~left.allowed(paths[0][-1]):
            break
        in_step.append([len(path) - 1 for path in paths])
        for side, path in zip(replies, paths, strict=True):
            then = schedule(change, found.environment.changes)
            path += side.run_to(path[-1], then, side.run(path[-1], then)[-1])[1:]
    return paths, in_step


def apart(replies: Sequence[ScheduledReplies], paths: Sequence[Sequence[int]]) -> bool:
    """Whether the outputs differ at the ends of two paths."""
    for side, path in zip(replies, paths, strict=True):
        side.evaluate([path[-1]])
    return len({side.value(path[-1]) for side, path in zip(replies, paths, strict=True)}) > 1


def schedule(moved: int, how: str) -> Schedule:
    """A change of these inputs, one after the other under `burst`."""
    return tuple(members(moved)) if how == "burst" else (moved,)


ENGINE = Engine(NAME, rank=7, answers={Differs: differs}, apart=True)
