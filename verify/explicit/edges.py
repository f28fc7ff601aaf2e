"""Edges between vertices, looked up from either side, and the sustained oscillations among them."""

from __future__ import annotations

from functools import cached_property

import numpy as np

from settled.encodings.packed import Places, Words
from settled.models.components import components
from settled.verify.explicit.search import distinct

LARGE = 50_000


class Edges:
    """Edges between vertices 0 to size - 1, looked up from either side."""

    def __init__(self, size: int, source: Places, target: Places) -> None:
        self.size = size
        self.source, self.target = source, target

    @cached_property
    def _by_target(self) -> tuple[Places, Places]:
        order = np.argsort(self.target, kind="stable")
        return self.source[order], np.searchsorted(self.target[order], np.arange(self.size + 1))

    @cached_property
    def _by_source(self) -> tuple[Places, Places]:
        order = np.argsort(self.source, kind="stable")
        return self.target[order], np.searchsorted(self.source[order], np.arange(self.size + 1))

    def into(self, targets: Places) -> tuple[Places, Places]:
        """All edges into `targets`: (source, target) of each."""
        other, first = self._by_target
        place, owner = _ranges(first, targets)
        return other[place], owner

    def out_of(self, sources: Places) -> tuple[Places, Places]:
        """All edges out of `sources`: (source, target) of each."""
        other, first = self._by_source
        place, owner = _ranges(first, sources)
        return owner, other[place]


def _ranges(first: Places, rows: Places) -> tuple[Places, Places]:
    """Positions first[r] to first[r + 1] - 1 of every row in one array, and the row that each belongs to."""
    count = first[rows + 1] - first[rows]
    skip = np.repeat(np.cumsum(count) - count, count)
    return np.repeat(first[rows], count) + np.arange(len(skip)) - skip, np.repeat(rows, count)


def fair_components(edges: Edges, vertices: Words, excited: Words) -> list[Places]:
    """The strongly connected sets with an edge inside in which no node is excited with one value throughout."""
    left = _with_successors(edges)
    if not len(left):
        return []
    place = np.full(edges.size, -1, np.int64)
    place[left] = np.arange(len(left))
    source, target = place[edges.source], place[edges.target]
    inside = (source >= 0) & (target >= 0)
    label = _components(len(left), source[inside], target[inside])
    order = np.argsort(label, kind="stable")
    parts = np.split(left[order], np.flatnonzero(np.diff(label[order])) + 1)
    found = [part for part in parts if len(part) > 1 and not stuck(vertices[part], excited[part])]
    return sorted(found, key=lambda part: int(part[0]))


def _components(size: int, source: Places, target: Places) -> Places:
    """A number for each vertex, the same for those that reach one another. scipy costs an import, and wins if large."""
    if len(source) > LARGE:
        from scipy.sparse import coo_array
        from scipy.sparse.csgraph import connected_components

        matrix = coo_array((np.ones(len(source), np.int8), (source, target)), shape=(size, size))
        return np.asarray(connected_components(matrix, directed=True, connection="strong")[1], np.int64)
    successors: dict[int, list[int]] = {v: [] for v in range(size)}
    for v, w in zip(source.tolist(), target.tolist(), strict=True):
        successors[v].append(w)
    label = np.zeros(size, np.int64)
    for number, part in enumerate(components(successors)):
        label[part] = number
    return label


def stuck(vertices: Words, excited: Words) -> int:
    """Whether some node is excited with the same value in all of these states (0 if none is)."""
    high = np.bitwise_and.reduce(excited & vertices)
    low = np.bitwise_and.reduce(excited & ~vertices)
    return int(high | low)


def _with_successors(edges: Edges) -> Places:
    """What is left when vertices without successors are taken away again and again."""
    degree = np.bincount(edges.source, minlength=edges.size)
    fresh = np.flatnonzero(degree == 0)
    while len(fresh):
        before, _ = edges.into(fresh)
        np.subtract.at(degree, before, 1)
        touched = distinct(before)
        fresh = touched[degree[touched] == 0]
    return np.flatnonzero(degree > 0)
