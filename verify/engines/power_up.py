"""Exhaustive search from power-up: every internal state, every ordering, through a sequence of input vectors."""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np

from settled.encodings.packed import Places, TooWide
from settled.models.states import Behaviour, Run
from settled.verify.engines import Engine
from settled.verify.engines.exhaustive import AuditFailed
from settled.verify.explicit.oscillations import least_oscillation
from settled.verify.explicit.power_up import PowerUp, Sequenced
from settled.verify.limits import LimitReached
from settled.verify.power_up import end_facts, lasting_values, start_facts, ternary_facts
from settled.verify.questions import Answer, PowersUp, Task, undecided

NAME = "exhaustive search from power-up"


def powers_up(task: Task, question: PowersUp) -> Answer:
    """Look for two ends, or an oscillation, among all runs from power-up."""
    try:
        graph = PowerUp(Sequenced(task.circuit, question.vectors), task.limits)
    except TooWide as wide:
        raise LimitReached(str(wide)) from None
    lasso = least_oscillation(graph)
    if lasso is not None:
        return _oscillates(question, graph, *lasso)
    if len(graph.ends) > 1:
        return _parts(task, question, graph)
    if graph.unfinished is not None:
        return undecided(graph.unfinished, NAME)
    if (state := graph.escaping(Behaviour(task.circuit, task.environment))) is not None:
        raise AuditFailed(f"a step from total state {state:#x} leaves the explored set")
    facts = {"end": end_facts(task.circuit, _states(graph)[0]), **_facts(task, question, graph)}
    return Answer("proved", NAME, ranged=_ranged(graph), facts=facts)


def _parts(task: Task, question: PowersUp, graph: PowerUp) -> Answer:
    paths = [graph.run_states(path) for path in graph.least_runs(graph.ends, 2)]
    apart = paths[0][0] != paths[1][0]
    titles = ("from one power-up state", "from another power-up state" if apart else "in another ordering")
    runs = [Run(title, states, None, task.circuit.name) for title, states in zip(titles, paths, strict=True)]
    facts = _facts(task, question, graph)
    return Answer("refuted", NAME, runs=tuple(runs), ranged=_ranged(graph), facts={"ends": len(graph.ends), **facts})


def _oscillates(question: PowersUp, graph: PowerUp, path: Sequence[int], loop: int) -> Answer:
    circuit = graph.packed.circuit
    states = graph.run_states(path)
    run = Run("once round the oscillation", states, len(states) - len(path) + loop, circuit.name)
    applied = graph.packed.applied(graph.vertices)
    (place,) = graph.index(np.array(path[loop : loop + 1], np.uint64))
    here = applied == applied[place]
    moving = [core for core in graph.cores if here[core[0]]]
    lasting = lasting_values(circuit, _words(graph, np.concatenate([np.flatnonzero(graph.end & here), *moving])))
    facts = {"ternary": ternary_facts(circuit, question.vectors[: int(applied[place]) + 1], lasting)}
    return Answer("refuted", NAME, runs=(run,), ranged=_ranged(graph), facts=facts)


def _facts(task: Task, question: PowersUp, graph: PowerUp) -> dict[str, Any]:
    ends = _states(graph)
    ternary = ternary_facts(task.circuit, question.vectors, lasting_values(task.circuit, ends))
    return {"ternary": ternary, **start_facts(task.circuit, task.environment, ends)}


def _states(graph: PowerUp) -> list[int]:
    return _words(graph, graph.ends)


def _words(graph: PowerUp, place: Places) -> list[int]:
    states: list[int] = (graph.vertices[place] & graph.packed.state_mask).tolist()
    return states


def _ranged(graph: PowerUp) -> dict[str, int]:
    return {
        "power_up_states": 1 << graph.packed.nodes,
        "total_states": len(np.unique(graph.vertices & graph.packed.state_mask)),
        "input_vectors": len(graph.packed.vectors),
    }


ENGINE = Engine(NAME, rank=10, answers={PowersUp: powers_up})
