"""Races on the graph: for each vertex the two nearest ends of its response, with their distances."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from settled.encodings.packed import Places
from settled.verify.explicit.edges import Edges
from settled.verify.explicit.graph import MANY, NONE, Graph

FAR = np.int64(1) << 40


@dataclass
class NearestEnds:
    """`end[:, k]` and `distance[:, k]`: the k-th nearest end (k = 0, 1) of every vertex, -1 and `FAR` if none."""

    end: Places
    distance: Places


def nearest_ends(graph: Graph) -> NearestEnds:
    """Layered search backwards from all ends; a vertex passes on only the two nearest ends it has."""
    size = len(graph)
    end = np.full((size, 2), -1, np.int64)
    distance = np.full((size, 2), FAR, np.int64)
    vertex = target = np.flatnonzero(graph.end)
    steps = 0
    while len(vertex):
        vertex, target = _take(end, distance, vertex, target, steps)
        owner, place = _sources(graph.step_edges, vertex)
        vertex, target = owner, target[place]
        steps += 1
    return NearestEnds(end, distance)


def _take(end: Places, distance: Places, vertex: Places, target: Places, steps: int) -> tuple[Places, Places]:
    order = np.lexsort((target, vertex))
    vertex, target = vertex[order], target[order]
    fresh = np.ones(len(vertex), bool)
    fresh[1:] = (vertex[1:] != vertex[:-1]) | (target[1:] != target[:-1])
    fresh &= (end[vertex, 0] != target) & (end[vertex, 1] < 0)
    vertex, target = vertex[fresh], target[fresh]
    first = np.ones(len(vertex), bool)
    first[1:] = vertex[1:] != vertex[:-1]
    second = np.zeros(len(vertex), bool)
    second[1:] = ~first[1:] & first[:-1]
    kept = first | (second & (end[vertex, 0] < 0))
    vertex, target, second = vertex[kept], target[kept], second[kept]
    slot = np.where(second | (end[vertex, 0] >= 0), 1, 0)
    end[vertex, slot], distance[vertex, slot] = target, steps
    return vertex, target


def _sources(edges: Edges, vertex: Places) -> tuple[Places, Places]:
    """Sources of all edges into `vertex`, and for each the position in `vertex` that it leads to."""
    order = np.argsort(vertex, kind="stable")
    unique, first = np.unique(vertex[order], return_index=True)
    count = np.diff(np.append(first, len(vertex)))
    sources: list[Places] = []
    places: list[Places] = []
    for slot in (0, 1):
        has = count > slot
        before, owner = edges.into(unique[has])
        where = order[first[has] + slot]
        sources.append(before)
        places.append(where[np.searchsorted(unique[has], owner)])
    return np.concatenate(sources), np.concatenate(places)


def run_to(graph: Graph, ends: NearestEnds, start: int, end: int) -> list[int]:
    """A shortest run of the response from vertex `start` to its near end `end`, as indices, least first."""
    path = [start]
    while path[-1] != end:
        here = path[-1]
        left = _distance(ends, here, end)
        _, after = graph.step_edges.out_of(np.array([here]))
        path.append(min(int(v) for v in after if _distance(ends, int(v), end) == left - 1))
    return path


def _distance(ends: NearestEnds, vertex: int, end: int) -> int:
    for slot in (0, 1):
        if ends.end[vertex, slot] == end:
            return int(ends.distance[vertex, slot])
    return int(FAR)


def shortest_race(graph: Graph) -> tuple[list[int], list[int]] | None:
    """The two runs (as indices, both from the same start state) of the shortest critical race, or None."""
    edges = graph.change_edges
    racing = np.flatnonzero(graph.outcome[edges.target] == MANY)
    if not len(racing):
        return None
    ends = nearest_ends(graph)
    source, target = edges.source[racing], edges.target[racing]
    rounds, steps = graph.lengths(source)
    cost = steps + ends.distance[target].sum(axis=1)
    best = np.lexsort((target, source, cost, rounds))[0]
    before, after = graph.path_to(int(source[best])), int(target[best])
    first, second = (run_to(graph, ends, after, int(ends.end[after, slot])) for slot in (0, 1))
    return before + first, before + second


def all_ends(graph: Graph, start: int) -> list[int]:
    """Indices of every end that the response can reach from a vertex, by increasing distance, then value."""
    seen, frontier, found = {start}, [start], []
    while frontier:
        found += [v for v in frontier if graph.end[v]]
        _, after = graph.step_edges.out_of(np.array(frontier))
        frontier = sorted(set(after.tolist()) - seen)
        seen.update(frontier)
    return found


__all__ = ["MANY", "NONE", "all_ends", "nearest_ends", "run_to", "shortest_race"]
