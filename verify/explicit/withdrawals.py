"""Withdrawn excitations on the graph: the least run to a step that takes one away (semi-modularity).

Muller and Bartky, "A theory of asynchronous circuits", 1959 (recalled).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from settled.encodings.packed import Bits, Places, Words
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.normal_form import least_run
from settled.verify.explicit.search import Search

CHUNK = 1 << 14


def least_withdrawal(graph: Graph, excepted: Sequence[str]) -> list[int] | None:
    """A run, as vertices, whose last step takes away the excitation of a node that did not switch, or None.

    In fundamental mode only steps of the response can do so: inputs begin to change when nothing is excited.
    """
    marked = Withdrawing(graph, excepted)
    if not marked.possible():
        return None
    search = Search(graph.packed, graph.packed.bits + 1, marked.moves, graph.limits_for(2), marked.flagged)
    hit = search.begin(graph.starts).run().hit
    assert hit is not None, "a withdrawal that is possible has a run to it"
    return marked.plain(least_run(search, dict([hit])))


class Withdrawing:
    """Vertices with a mark when the step to them has taken away an excitation."""

    def __init__(self, graph: Graph, excepted: Sequence[str]) -> None:
        circuit = graph.packed.circuit
        self.graph, self.mark = graph, np.uint64(1 << graph.packed.bits)
        self.counted = np.uint64(sum(1 << circuit.place[n] for n in circuit.nodes if n not in excepted))

    def possible(self) -> bool:
        """Whether some step on the graph takes away an excitation."""
        vertices = self.graph.vertices
        parts = (vertices[start : start + CHUNK] for start in range(0, len(vertices), CHUNK))
        return any(self._withdraws(part, *self.graph.steps(part)).any() for part in parts)

    def moves(self, words: Words) -> tuple[Places, Words]:
        """Every move; nothing follows a withdrawal."""
        place = np.flatnonzero(~self.flagged(words))
        source, target = self.graph.moves(words[place])
        lost = self._withdraws(words[place], source, target)
        return place[source], np.where(lost, target | self.mark, target)

    def flagged(self, words: Words) -> Bits:
        """Whether there is a mark."""
        found: Bits = words & self.mark != 0
        return found

    def plain(self, run: Sequence[int]) -> list[int]:
        """The run without marks."""
        return [word & ~int(self.mark) for word in run]

    def _withdraws(self, vertices: Words, source: Places, target: Words) -> Bits:
        self.graph.limits.check(f"among {len(self.graph):,} total states")
        before = vertices[source]
        excited = self.graph.packed.excited
        lost = excited(vertices)[source] & ~(before ^ target) & ~excited(target) & self.counted
        found: Bits = lost != 0
        return found
