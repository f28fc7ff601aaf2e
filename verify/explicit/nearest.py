"""For each vertex the two nearest of several labelled places, along steps of the response."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from settled.encodings.packed import Bits, Places
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.normal_form import first_of_each, switchings
from settled.verify.explicit.search import distinct

FAR = np.int64(1) << 40


@dataclass(frozen=True)
class Entries:
    """Rows: a vertex or other owner, a label that can be reached from it, and the steps and switchings on the way."""

    owner: Places
    label: Places
    steps: Places
    nodes: Places

    def __len__(self) -> int:
        return len(self.owner)

    def at(self, place: Places) -> Entries:
        """The rows at `place`."""
        return Entries(self.owner[place], self.label[place], self.steps[place], self.nodes[place])

    def two_each(self) -> Entries:
        """Of each owner the two rows with different labels that are least by (steps, switchings, label)."""
        order = np.lexsort((self.nodes, self.steps, self.label, self.owner))
        once = self.at(order)
        once = once.at(np.flatnonzero(first_of_each(once.owner) | first_of_each(once.label)))
        once = once.at(np.lexsort((once.label, once.nodes, once.steps, once.owner)))
        first = first_of_each(once.owner)
        second = np.zeros(len(once), bool)
        second[1:] = first[:-1] & ~first[1:]
        return once.at(np.flatnonzero(first | second))


def joined(*parts: Entries) -> Entries:
    """The rows of all parts."""
    columns = zip(*((p.owner, p.label, p.steps, p.nodes) for p in parts), strict=True)
    return Entries(*(np.concatenate(column) for column in columns))


def pair_sums(column: Places) -> Places:
    """The sums of each two rows of a column."""
    return column.reshape(-1, 2).sum(axis=1)


class Nearest:
    """`label[:, k]`, `steps[:, k]`, `nodes[:, k]`: the k-th nearest label (k = 0, 1) of every vertex, -1 if none."""

    def __init__(self, graph: Graph, seeds: Entries, within: Bits) -> None:
        """Layered search backwards from `seeds`; a vertex passes on only the two nearest labels that it has.

        `within`: the vertices that matter, closed under steps. Raises `LimitReached`.
        """
        size = len(graph)
        seeds = seeds.at(np.flatnonzero(within[seeds.owner]))
        self.label = np.full((size, 2), -1, np.int64)
        self.steps = np.full((size, 2), FAR, np.int64)
        self.nodes = np.full((size, 2), FAR, np.int64)
        wave, steps = seeds.at(np.zeros(0, np.int64)), 0
        while len(wave) or (seeds.steps >= steps).any():
            taken = self._take(joined(wave, seeds.at(np.flatnonzero(seeds.steps == steps))))
            wave = joined(*(_before(graph, part, within) for part in _apart(taken)))
            steps += 1
            graph.limits.check(f"at ends {steps} steps away")

    def of(self, vertices: Places) -> Entries:
        """The labels of some vertices; the owner of a row is the position in `vertices`."""
        owner = np.repeat(np.arange(len(vertices)), 2)
        rows = (column[vertices].ravel() for column in (self.label, self.steps, self.nodes))
        found = Entries(owner, *rows)
        return found.at(np.flatnonzero(found.label >= 0))

    def _take(self, wave: Entries) -> Entries:
        known, full = self.label[wave.owner, 0] == wave.label, self.label[wave.owner, 1] >= 0
        fresh = wave.at(np.flatnonzero(~known & ~full)).two_each()
        first = first_of_each(fresh.owner)
        kept = first | (self.label[fresh.owner, 0] < 0)
        fresh, first = fresh.at(np.flatnonzero(kept)), first[kept]
        slot = np.where(first & (self.label[fresh.owner, 0] < 0), 0, 1)
        for column, row in ((self.label, fresh.label), (self.steps, fresh.steps), (self.nodes, fresh.nodes)):
            column[fresh.owner, slot] = row
        return fresh


def _apart(entries: Entries) -> tuple[Entries, Entries]:
    """Two parts, in each of which an owner has one row; the owners stand in increasing order."""
    first = first_of_each(entries.owner)
    return entries.at(np.flatnonzero(first)), entries.at(np.flatnonzero(~first))


def _before(graph: Graph, entries: Entries, within: Bits) -> Entries:
    """The rows that those of distinct vertices give to the vertices one step before."""
    source, owner = graph.step_edges.into(entries.owner)
    kept = within[source]
    source, owner = source[kept], owner[kept]
    place = np.searchsorted(entries.owner, owner)
    more = switchings(graph.packed, graph.vertices[source], graph.vertices[owner])
    return Entries(source, entries.label[place], entries.steps[place] + 1, entries.nodes[place] + more)


def following(graph: Graph, vertices: Places) -> Bits:
    """Whether each vertex can follow on one of `vertices` in the response, these included."""
    found = np.zeros(len(graph), bool)
    fresh = distinct(vertices)
    while len(fresh):
        found[fresh] = True
        _, after = graph.step_edges.out_of(fresh)
        after = distinct(after)
        fresh = after[~found[after]]
    return found


def ends_as(graph: Graph, labels: Places) -> Entries:
    """The ends of all responses, each with its label."""
    ends = np.flatnonzero(graph.end)
    nothing = np.zeros(len(ends), np.int64)
    return Entries(ends, labels[ends], nothing, nothing)
