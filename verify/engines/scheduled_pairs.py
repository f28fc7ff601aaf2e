"""Equivalence of circuits of any width, by one run of each response.

A difference that one run of each side shows is a difference. When none is found, nothing but the number of ends of the
responses is left to be known: both circuits are asked whether they settle and have no critical race. If so, every
response has the one end that was looked at.
"""

from __future__ import annotations

from dataclasses import replace
from itertools import islice

from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.verify import known_responses
from settled.verify.engines import Engine, able, attempt
from settled.verify.engines.pair_search import certificate_of, ranged
from settled.verify.explicit.pairs import PairSearch, rows
from settled.verify.explicit.refutations import Refutation
from settled.verify.explicit.scheduled_replies import ScheduledReplies, Schedules
from settled.verify.explicit.starts import some_cut
from settled.verify.limits import Limits
from settled.verify.pairing import both_need_partners, environment_of_other
from settled.verify.questions import Answer, Differs, Diverges, Oscillates, Question, Task, undecided
from settled.verify.stable_states import start_states

NAME = "search over pairs of stable states by one run of each response"
STARTS = 5_000
TURN = 10.0
"""Seconds that each engine gets in the first round of a question about one circuit alone."""

MIDDLE = range(20, 60)
"""Numbers of nodes for which decision diagrams are likely to decide first, and an exhaustive search last."""


def differs(task: Task, question: Differs) -> Answer:
    """Look for a start state without a good partner."""
    if question.transients:
        return undecided("one schedule shows no transients", NAME)
    other = environment_of_other(task.environment, question)
    sides = [(task.circuit, task.environment), (question.other, other)]
    left, right = (replies(*side, question, task.limits) for side in sides)
    lefts, rights = (starts(*side, task.limits) for side in sides)
    both = both_need_partners(task.environment, question)
    begin = rows(lefts, rights, task.circuit.input_mask, (True, both), task.limits)
    search = PairSearch(left, right, task.limits)
    found = search.run(begin)
    if found is not None:
        runs, facts = Refutation(search, ("the original", "the other circuit")).of(found)
        if found.changes > 1 and not all(known_responses.shown(Task(*side, task.limits)) for side in sides):
            facts["perhaps_fewer"] = True
        return Answer("refuted", NAME, runs=runs, ranged=ranged(search), facts=facts)
    for circuit, environment in sides:
        open_ = open_outcomes(task, circuit, environment)
        if open_:
            return undecided(f"no run shows a difference, but {open_}", NAME)
    exercised = any(search.lawful[a] for row in begin for a, _ in row.pairs)
    certificate = certificate_of(task.circuit, question.other, search.good())
    return Answer("proved", NAME, ranged=ranged(search), exercised=exercised, certificate=certificate)


def replies(circuit: Circuit, environment: Environment, question: Differs, limits: Limits) -> ScheduledReplies:
    """One run of each response of a circuit."""
    schedule = Schedules(circuit, some_cut(circuit.excitation))
    return ScheduledReplies(schedule, environment, question.outputs, limits)


def starts(circuit: Circuit, environment: Environment, limits: Limits) -> list[int]:
    """All start states. Raises `LimitReached` when they are too many to be paired one by one."""
    found = list(islice(start_states(circuit, environment), STARTS + 1))
    if len(found) > STARTS:
        limits.refuse(f"{circuit.name} has more than {STARTS:,} start states; give more of them with `start`")
    return sorted(found)


def open_outcomes(task: Task, circuit: Circuit, environment: Environment) -> str:
    """Why it is not known that every response has one end; empty when it is."""
    asked: tuple[tuple[Question, str], ...] = ((Oscillates(), "settles"), (Diverges(), "has no critical race"))
    for question, what in asked:
        if not is_proved(task, circuit, environment, question):
            return f"it is not proved that {circuit.name} {what}"
    return ""


def is_proved(task: Task, circuit: Circuit, environment: Environment, question: Question) -> bool:
    """Whether some engine proves it: all have a short turn each, then what time is left."""
    for seconds in (TURN, task.limits.left()):
        for engine in in_order(circuit, question):
            turn = replace(task.limits, seconds=min(task.limits.seconds, task.limits.spent() + seconds))
            answer = attempt(engine, Task(circuit, environment, turn), question)
            if answer.verdict != "undecided":
                return answer.verdict == "proved"
    return False


def in_order(circuit: Circuit, question: Question) -> list[Engine]:
    """The engines that answer, the likeliest to decide first."""
    quick = [e for e in able(question) if e.rank < ENGINE.rank]
    rest = [e for e in able(question) if e.rank > ENGINE.rank]
    return quick + (rest[::-1] if len(circuit.nodes) in MIDDLE else rest)


ENGINE = Engine(NAME, rank=8, answers={Differs: differs}, apart=True)
