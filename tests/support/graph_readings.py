"""What the explicit graph says of each input change on its own: its ends, how far they are, what it passes."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np

from settled.encodings.packed import Bits, Packed, Places
from settled.models.states import Behaviour, Run, walk
from settled.verify.explicit.graph import Graph
from settled.verify.limits import Limits
from settled.verify.session import Session


@dataclass(frozen=True)
class Response:
    """One input change and all that may follow, in packed total states.

    * `before`: the stable total state; `after`: the state just after the change.
    * `ends`: each end with the number of steps, the change included, of the shortest run to it.
    * `oscillates`: whether a fair run can go round for ever; `passed`: how many total states the response can be in.
    * `flickers`: the watched nodes that can change twice or more.
    """

    before: int
    after: int
    ends: Mapping[int, int]
    oscillates: bool
    passed: int
    flickers: frozenset[str]

    @property
    def bad(self) -> bool:
        """Whether the change is a critical race or can oscillate."""
        return self.oscillates or len(self.ends) > 1


def graph_of(session: Session) -> Graph:
    """The graph of all reachable total states."""
    graph = Graph(Packed(session.circuit, session.specification.environment), Limits())
    assert graph.unfinished is None
    return graph


def responses(session: Session, watched: Sequence[str] = ()) -> Iterator[Response]:
    """Every input change from every reachable stable total state (single or simultaneous changes)."""
    graph = graph_of(session)
    edges = graph.change_edges
    for source, target in zip(edges.source.tolist(), edges.target.tolist(), strict=True):
        yield response(graph, source, target, watched)


def response(graph: Graph, source: int, target: int, watched: Sequence[str] = ()) -> Response:
    """The response that begins with the move from vertex `source` to vertex `target`."""
    distance = distances(graph, np.array([target]), np.ones(len(graph), bool))
    passed = np.flatnonzero(distance >= 0)
    ringing = {int(v) for core in graph.cores for v in core}
    word = graph.vertices
    return Response(
        before=int(word[source]),
        after=int(word[target]),
        ends={int(word[v]): int(distance[v]) + 1 for v in passed[graph.end[passed]]},
        oscillates=not ringing.isdisjoint(passed.tolist()),
        passed=len(passed),
        flickers=frozenset(signal for signal in watched if changes_twice(graph, source, target, signal)),
    )


def distances(graph: Graph, seeds: Places, within: Bits) -> Places:
    """The number of steps to each vertex from one of `seeds`, inputs held, all on the way `within`; -1 if none do."""
    distance = np.full(len(graph), -1, np.int64)
    fresh, steps = np.unique(seeds), 0
    while len(fresh):
        distance[fresh] = steps
        _, after = graph.step_edges.out_of(fresh)
        fresh = np.unique(after[(distance[after] < 0) & within[after]])
        steps += 1
    return distance


def changes_twice(graph: Graph, source: int, target: int, signal: str) -> bool:
    """Whether a node can change twice or more from vertex `source` on, after the move to `target`."""
    high = graph.vertices >> np.uint64(graph.packed.circuit.place[signal]) & np.uint64(1) != 0
    across = np.array([target])
    for phase in (high == high[source], high != high[source]):
        inside = distances(graph, across[phase[across]], phase) >= 0
        _, after = graph.step_edges.out_of(np.flatnonzero(inside))
        across = np.concatenate([across[~phase[across]], after[~phase[after]]])
    return len(across) > 0


def walk_order(session: Session, start: int, order: str) -> int:
    """Walk events such as `a+ b-/c+` from a packed total state by the executable meaning; the state they end in.

    Raises `ValueError` when one of them is not lawful or does not change the value that it names.
    """
    place = session.circuit.place
    states = [start]
    for step in order.split():
        events = step.split("/")
        if any(bool(states[-1] >> place[e[:-1]] & 1) == (e[-1] == "+") for e in events):
            raise ValueError(f"{step} does not change every value that it names")
        states.append(states[-1] ^ sum(1 << place[e[:-1]] for e in events))
    walk(Behaviour(session.circuit, session.specification.environment), Run("order", tuple(states)), anywhere=True)
    return states[-1]
