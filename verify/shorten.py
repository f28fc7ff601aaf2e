"""Every refutation in its normal form (see `explicit.normal_form`), whichever engine found it first.

A failure that is known bounds the search for the least one: no run of it has more input changes. So exhaustive search
is asked once more, only that deep. Where that takes too many total states, it is asked for the least runs from the same
start state in which nothing switches but what switches in the runs known. Beyond that, switchings that a failure along
one run does not need are left out.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import replace
from functools import reduce
from itertools import pairwise
from operator import or_

import numpy as np

from settled.encodings.packed import Packed, TooWide, Words
from settled.models.circuit import Circuit
from settled.models.environment import Environment
from settled.models.states import Behaviour, Run
from settled.verify.engines import attempt, exhaustive
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.stable_counts import least_miscount, least_round
from settled.verify.limits import LimitReached, Limits
from settled.verify.needed import only_needed
from settled.verify.questions import Answer, Deadlocks, Flickers, Question, Reaches, StableCount, Task, Withdraws

STATES, SECONDS = 300_000, 10.0
"""Total states that a search for shorter runs may visit, and the time that both may take."""

LISTED = 18
"""Inputs and nodes of a circuit of which every total state is looked at."""

ALONG_ONE_RUN = (Deadlocks, Flickers, Reaches, Withdraws)
"""Questions of which even a search that a limit ended finds the least run."""


def shortened(task: Task, question: Question, answer: Answer) -> Answer:
    """A refutation with the least runs that can be found at little cost."""
    if isinstance(question, StableCount):
        return _least_count(task, question, answer)
    if type(question) not in exhaustive.ENGINE.answers or _is_least(task, question, answer):
        return answer
    for graph in _graphs(task, question, answer):
        again = attempt(exhaustive.ENGINE, replace(task, limits=graph.limits, memory={"graph": graph}), question)
        if again.verdict == "refuted":
            kept = {k: v for k, v in answer.facts.items() if k not in again.facts or k == "some_run_settles"}
            return replace(answer, runs=again.runs, facts={**again.facts, **kept})
    behaviour = Behaviour(task.circuit, task.environment)
    return only_needed(behaviour, question, answer, Limits(min(SECONDS, task.limits.seconds)))


def _least_count(task: Task, question: StableCount, answer: Answer) -> Answer:
    """The least input vector with too few or too many stable states, of a circuit whose total states can be listed."""
    circuit, limits = task.circuit, replace(task.limits, seconds=SECONDS)
    if len(circuit.signals) > LISTED:
        return answer
    packed = Packed(circuit, task.environment)
    found = least_miscount(packed, question.least, question.most)
    assert found is not None, "a refutation has an input vector that shows it"
    vector, states = found
    shown = states[: max(question.least, (question.most or 0) + 1)]
    try:
        runs = [Run(f"stable state {i}", (s,), None, circuit.name) for i, s in enumerate(shown, 1)]
        runs = runs or [least_round(packed, vector, answer.runs[0].title, limits)]
    except LimitReached:
        return answer
    values = {x: vector >> i & 1 for i, x in enumerate(circuit.inputs)}
    return replace(answer, runs=tuple(runs), facts={"vector": values, "stable_internal_states": len(shown)})


def _is_least(task: Task, question: Question, answer: Answer) -> bool:
    """Whether exhaustive search has found the runs in a way that leaves no shorter ones out."""
    graph: Graph | None = task.memory.get("graph")
    complete = graph is not None and graph.unfinished is None
    return answer.method == exhaustive.NAME and (complete or isinstance(question, ALONG_ONE_RUN))


def _graphs(task: Task, question: Question, answer: Answer) -> Iterator[Graph]:
    """What to search: everything within the depth of the failure, else what moves in its runs."""
    limits = replace(task.limits, states=min(STATES, task.limits.states), seconds=min(SECONDS, task.limits.seconds))
    start = answer.runs[0].states[0]
    moving = reduce(or_, (state ^ start for run in answer.runs for state in run.states))
    most = depth(task.circuit, answer)
    attempts: list[Callable[[], Graph]] = [
        lambda: Graph(Packed(task.circuit, task.environment), limits, most=most),
        lambda: Graph(Moving(task.circuit, task.environment, moving), limits, np.array([start], np.uint64), most),
    ]
    for search in attempts:
        try:
            graph = search()
        except (LimitReached, TooWide):
            continue
        if graph.search.done or isinstance(question, ALONG_ONE_RUN):
            yield graph


def depth(circuit: Circuit, answer: Answer) -> int:
    """How many input changes a run of a failure can have that has no more of them in all than the one known."""
    counts = [_changes(circuit, run) for run in answer.runs]
    return counts[0] if len(counts) == 1 else sum(counts) // 2 + 1


def _changes(circuit: Circuit, run: Run) -> int:
    states = [*run.states, *(run.states[run.loop : run.loop + 1] if run.loop is not None else ())]
    return sum((a ^ b) & circuit.input_mask != 0 for a, b in pairwise(states))


class Moving(Packed):
    """A circuit in which only the inputs and nodes in a packed set switch; the others may still be excited."""

    def __init__(self, circuit: Circuit, environment: Environment, moving: int) -> None:
        super().__init__(circuit, environment)
        self.moving = np.uint64(moving)

    def movers(self, excited: Words) -> Words:
        """The nodes that may switch in each vertex."""
        return excited & self.moving

    def allowed(self, vertices: Words) -> Words:
        """The inputs that may change in each vertex."""
        return super().allowed(vertices) & self.moving
