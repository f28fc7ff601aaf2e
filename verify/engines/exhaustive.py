"""The exhaustive engine: explores every reachable total state, layer by layer, and reads the answer off the graph.

Nothing beats it on small circuits. A limit that ends the search early leaves refutations among the states that were
reached (they are reachable all the same) and `undecided` otherwise.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

import numpy as np

from settled.encodings.packed import Packed, TooWide
from settled.models.states import Behaviour, Run, Situation
from settled.verify.engines import Engine
from settled.verify.explicit.changes_thrice import ThreeChanges
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.hazards import Watch, flickering, least_flicker, rest_of_response
from settled.verify.explicit.oscillations import least_oscillation
from settled.verify.explicit.progress import changeable, dead_ends, least_evasion
from settled.verify.explicit.races import Pair, Races
from settled.verify.explicit.withdrawals import least_withdrawal
from settled.verify.limits import LimitReached
from settled.verify.questions import (
    Answer,
    Deadlocks,
    Diverges,
    DivergesAfterThree,
    Evades,
    Flickers,
    Oscillates,
    Reaches,
    Task,
    Withdraws,
    undecided,
)

NAME = "exhaustive search"
SAMPLE = 2_000
FEW = 10


def explored(task: Task) -> Graph:
    """The graph of the task, explored once, and further when a limit ended it. Raises `LimitReached` when too wide."""
    graph: Graph | None = task.memory.get("graph")
    if graph is not None and graph.unfinished is None:
        graph.limits = task.limits
        return graph
    if graph is None:
        try:
            graph = task.memory["graph"] = Graph(Packed(task.circuit, task.environment), task.limits)
        except TooWide as wide:
            raise LimitReached(str(wide)) from None
    else:
        graph.explore(task.limits)
    if graph.unfinished is None:
        audit(graph, task)
    return graph


class AuditFailed(Exception):
    """The explored graph disagrees with the executable meaning: a fault in this program, never a verdict."""


def audit(graph: Graph, task: Task) -> None:
    """Check by the executable meaning that the set of reached states is closed under moves.

    All states of small graphs, an evenly spaced sample of 2,000 of large ones; states with more than ten excited nodes
    have too many moves to be walked one by one and are left out.
    """
    behaviour = Behaviour(task.circuit, task.environment)
    low, mask = graph.packed.state_bits, int(graph.packed.state_mask)
    after: dict[int, int] = {}
    for word in graph.vertices[:: max(1, len(graph) // SAMPLE)].tolist():
        at = Situation(word & mask, word >> low)
        if behaviour.excited(at.state).bit_count() <= FEW:
            after.update((s.state | s.outstanding << low, word) for s in behaviour.moves(at))
    words = np.fromiter(after, np.uint64, len(after))
    for missing in words[graph.index(words) < 0].tolist():
        raise AuditFailed(f"a move from total state {after[missing]:#x} leaves the explored set")


def ranged(graph: Graph) -> dict[str, int]:
    """What the search covered."""
    return {
        "total_states": len(np.unique(graph.vertices & graph.packed.state_mask)),
        "stable_states": int((graph.excited == 0).sum()) if not graph.packed.burst else _stable(graph),
        "input_changes": _changes(graph),
    }


def _stable(graph: Graph) -> int:
    return len(np.unique(graph.vertices[graph.excited == 0] & graph.packed.state_mask))


def _changes(graph: Graph) -> int:
    if not graph.packed.fundamental:
        return int(np.bitwise_count(changeable(graph.packed, graph.vertices)).sum())
    edges = graph.change_edges
    if not graph.packed.burst:
        return len(edges.source)
    first = graph.vertices[edges.source] ^ graph.vertices[edges.target]
    burst = (first & graph.packed.input_mask) | graph.packed.outstanding(graph.vertices[edges.target])
    return len(np.unique(np.stack([edges.source.astype(np.uint64), burst]), axis=1).T)


def run(graph: Graph, title: str, path: Sequence[int], loop: int | None = None) -> Run:
    """The run through these vertices."""
    mask = int(graph.packed.state_mask)
    return Run(title, tuple(v & mask for v in path), loop, graph.packed.circuit.name)


def proved(graph: Graph, exercised: bool) -> Answer:
    """The answer when nothing wrong was found: `proved`, or `undecided` when a limit ended the search."""
    if graph.unfinished is not None:
        return undecided(graph.unfinished, NAME)
    return Answer("proved", NAME, ranged=ranged(graph), exercised=exercised)


def refuted(graph: Graph, runs: Sequence[Run], facts: Mapping[str, Any] | None = None) -> Answer:
    """The answer when something wrong was found."""
    return Answer("refuted", NAME, runs=tuple(runs), ranged=ranged(graph), facts=facts or {})


def reaches(task: Task, question: Reaches) -> Answer:
    """Look for a reachable total state with `bad` true."""
    graph = explored(task)
    bad = graph.packed.holds([question.bad], graph.vertices)
    stable = graph.excited == 0
    if question.only_stable:
        bad &= stable
    if bad.any():
        return refuted(graph, [run(graph, "the run to it", graph.least_runs(np.flatnonzero(bad))[0])])
    return proved(graph, bool(stable.any()) if question.only_stable else True)


def oscillates(task: Task, _: Oscillates) -> Answer:
    """Look for a sustained oscillation."""
    graph = explored(task)
    found = least_oscillation(graph)
    if found is None:
        return proved(graph, bool(len(graph.change_edges.source) or len(graph.step_edges.source)))
    path, loop = found
    facts = {} if graph.unfinished else {"some_run_settles": not len(graph.restless)}
    return refuted(graph, [run(graph, "once round the oscillation", path, loop)], facts)


def diverges(task: Task, _: Diverges) -> Answer:
    """Look for an input change with two ends."""
    graph = explored(task)
    found = Races(graph).least()
    if found is None:
        return proved(graph, len(graph.change_edges.source) > 0)
    return refuted(graph, race_runs(graph, found))


def race_runs(graph: Graph, paths: Pair) -> list[Run]:
    """The runs of a critical race."""
    titles = ("one ordering", "another ordering")
    return [run(graph, title, path) for title, path in zip(titles, paths, strict=True)]


def flickers(task: Task, question: Flickers) -> Answer:
    """Look for a signal that changes twice in one response."""
    graph = explored(task)
    watch = Watch(graph, question.signals)
    bad = flickering(graph, watch)
    if not bad:
        return proved(graph, len(graph.change_edges.source) > 0)
    found = least_flicker(graph, watch, bad)
    assert found is not None, "a signal that flickers has a run that shows it"
    return run_with_hazard(graph, *found)


def run_with_hazard(graph: Graph, path: Sequence[int], signal: str) -> Answer:
    """The answer that shows a hazard, from the run up to the second change of the signal."""
    shown = run(graph, "the run through the hazard", [*path, *rest_of_response(graph, path[-1])])
    return refuted(graph, [shown], {"signal": signal, "offending_step": len(path) - 1})


def diverges_after_three(task: Task, _: DivergesAfterThree) -> Answer:
    """Look for an essential hazard."""
    graph = explored(task)
    three = ThreeChanges(graph)
    found = three.least()
    if found is None:
        return proved(graph, three.exercised)
    titles = [f"after {'one change' if number == 1 else 'three changes'}" for number in found.changes]
    if titles[0] == titles[1]:
        titles[1] += ", another ordering"
    runs = [run(graph, title, path) for title, path in zip(titles, found.runs, strict=True)]
    return refuted(graph, runs, {"input": task.circuit.inputs[found.bit.bit_length() - 1]})


def withdraws(task: Task, question: Withdraws) -> Answer:
    """Look for a step that takes away an excitation."""
    graph = explored(task)
    found = least_withdrawal(graph, question.excepted)
    return proved(graph, True) if found is None else refuted(graph, [run(graph, "the run to it", found)])


def deadlocks(task: Task, _: Deadlocks) -> Answer:
    """Look for a dead end."""
    graph = explored(task)
    found = dead_ends(graph)
    if not len(found):
        return proved(graph, True)
    return refuted(graph, [run(graph, "the run to it", graph.least_runs(found)[0])])


def evades(task: Task, question: Evades) -> Answer:
    """Look for a fair run that evades a goal."""
    graph = explored(task)
    found = least_evasion(graph, question.source, question.target)
    if found is None:
        return proved(graph, bool(graph.packed.holds([question.source], graph.vertices).any()))
    return refuted(graph, [run(graph, "the run without the goal", *found)])


ENGINE = Engine(
    NAME,
    rank=10,
    answers={
        Reaches: reaches,
        Oscillates: oscillates,
        Diverges: diverges,
        Flickers: flickers,
        DivergesAfterThree: diverges_after_three,
        Withdraws: withdraws,
        Deadlocks: deadlocks,
        Evades: evades,
    },
)
