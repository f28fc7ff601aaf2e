"""Every cause of a critical race or a hazard: all input changes that fail, grouped by what went wrong.

Of a race, the nearest end of each change is set against each other end; of a hazard, each signal is followed by itself.
Every such failure is shown by its least runs, whose cause it is counted under; a cause is shown by the least of those.
"""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, field
from typing import Any

import numpy as np

from settled.models.states import Behaviour, Run
from settled.verify.causes import explain, hazard_identity, race_identity
from settled.verify.causes.core import Cores
from settled.verify.causes.late_gates import hazard_cause
from settled.verify.engines.exhaustive import explored, race_runs, refuted, run_with_hazard
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.hazards import Watch, flickering, least_flickers, still_changing
from settled.verify.explicit.normal_form import Measure, measure
from settled.verify.explicit.races import Changes, Races, least_beginnings
from settled.verify.limits import LimitReached
from settled.verify.properties import Kind
from settled.verify.questions import Answer, Diverges, Flickers, Question, Task
from settled.verify.replay import replay

Path = list[int]


@dataclass(frozen=True)
class Failure:
    """One input change that fails: its number, the vertex before it (as index), the ways on from there, the signal."""

    change: int
    source: int
    ways: tuple[Path, ...]
    signal: str = ""


@dataclass(frozen=True)
class Cause:
    """A cause: its identity, how many input changes fail by it, the least of these failures as an answer."""

    id: str
    explains: int
    answer: Answer


@dataclass
class Causes:
    """The causes found, those with the least runs first; `reason` says why there may be more."""

    found: list[Cause] = field(default_factory=list)
    reason: str | None = None


def every_cause(task: Task, question: Question) -> Causes | None:
    """All causes of a refuted race or hazard, as far as the limits reach; None for other questions."""
    if not isinstance(question, Diverges | Flickers):
        return None
    try:
        graph = explored(task)
    except LimitReached as reached:
        return Causes(reason=str(reached))
    behaviour = Behaviour(task.circuit, task.environment)
    found = racing(graph, behaviour) if isinstance(question, Diverges) else flickers(graph, behaviour, question)
    groups: dict[str, list[Failure]] = {}
    reason = graph.unfinished
    try:
        for id_, failure in found:
            groups.setdefault(id_, []).append(failure)
            task.limits.check(f"at {len(groups)} causes")
    except LimitReached as reached:
        reason = str(reached)
    shown = [(*least(graph, failures), id_, failures) for id_, failures in groups.items()]
    shown.sort(key=lambda one: one[0])
    causes = [Cause(id_, len({f.change for f in failures}), answer) for _, answer, id_, failures in shown]
    return Causes(causes, reason)


def racing(graph: Graph, behaviour: Behaviour) -> Iterator[tuple[str, Failure]]:
    """The failures of all critical races, each with the identity of its cause; short ones first."""
    races, cores = Races(graph), Cores(behaviour, graph.limits)
    _, steps = graph.lengths(races.changes.source[races.numbers])
    for number in races.numbers[np.lexsort((steps, races.inputs))].tolist():
        first, *others = races.endings(number)
        for other in others:
            events = cores.events([_states(graph, first), _states(graph, other)], 0)
            yield race_identity(events), Failure(number, int(races.changes.source[number]), (first, other))


def flickers(graph: Graph, behaviour: Behaviour, question: Flickers) -> Iterator[tuple[str, Failure]]:
    """The failures of all hazards, each with the identity of its cause; short ones first."""
    watch, changes = Watch(graph, question.signals), Changes.of(graph)
    bad = flickering_changes(graph, watch, changes)
    failing = np.flatnonzero(bad)
    rounds, steps = graph.lengths(changes.source[failing])
    for number in failing[np.lexsort((steps, rounds))].tolist():
        source = int(changes.source[number])
        vertex = int(graph.vertices[source])
        ways = least_flickers(graph, watch, vertex, changes.targets(graph, number), int(bad[number]))
        for signal, way in ways.items():
            fault = hazard_cause(behaviour, _states(graph, way), signal, 0, len(way) - 1)
            yield hazard_identity(signal, fault), Failure(number, source, (way,), signal)


def flickering_changes(graph: Graph, watch: Watch, changes: Changes) -> Any:
    """For each input change the packed set of watched signals that change twice in some run of its response."""
    edges, value = graph.change_edges, watch(graph.vertices)
    once, twice = still_changing(graph, watch)
    moved = value[edges.source] ^ value[edges.target]
    found = np.zeros(len(changes.source), np.uint64)
    np.bitwise_or.at(found, changes.group, moved & once[edges.target] | ~moved & twice[edges.target])
    return found & np.uint64(flickering(graph, watch))


def least(graph: Graph, failures: list[Failure]) -> tuple[Measure, Answer]:
    """The least of several failures with the same cause, from a start state on, and what it is compared by."""
    sources = np.array([f.source for f in failures])
    count = len(failures[0].ways)
    rounds, steps = graph.lengths(sources)
    ahead = np.array([measure(graph.packed, f.ways)[:3] for f in failures])
    lengths = count * rounds + ahead[:, 0], count * steps + ahead[:, 1], ahead[:, 2]
    found = []
    for i, before in zip(*least_beginnings(graph, sources, lengths, count), strict=True):
        paths = [before[:-1] + way for way in failures[i].ways]
        found.append((measure(graph.packed, paths), paths, failures[i].signal))
    judged, paths, signal = min(found)
    if signal:
        return judged, run_with_hazard(graph, paths[0], signal)
    return judged, refuted(graph, race_runs(graph, (paths[0], paths[1])))


def _states(graph: Graph, path: Path) -> Path:
    return [vertex & int(graph.packed.state_mask) for vertex in path]


def grouped(
    kind: Kind, behaviour: Behaviour, question: Question, causes: Causes
) -> tuple[list[Run], list[dict[str, Any]]]:
    """All runs, cause by cause, and the causes as facts. Raises `ReplayFailed` when the evidence of one fails."""
    runs: list[Run] = []
    listed = []
    for cause in causes.found:
        claim, facts = replay(kind, behaviour, question, cause.answer)
        facts |= explain(behaviour, question, cause.answer.runs, facts)
        places = list(range(len(runs), len(runs) + len(cause.answer.runs)))
        listed.append({"id": cause.id, "explains": cause.explains, "claim": claim, "traces": places, **facts})
        runs += cause.answer.runs
    return runs, listed
