"""Withdrawn excitations on the graph: the shortest run to a step that takes one away (semi-modularity).

Muller and Bartky, "A theory of asynchronous circuits", 1959 (recalled).
"""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from settled.encodings.packed import Words
from settled.verify.explicit.graph import Graph
from settled.verify.explicit.search import Key

CHUNK = 1 << 14


def shortest_withdrawal(graph: Graph, excepted: Sequence[str]) -> list[int] | None:
    """A run, as packed vertices, whose last step takes away the excitation of a node that did not switch, or None.

    In fundamental mode only steps of the response can do so: inputs begin to change when nothing is excited.
    """
    circuit = graph.packed.circuit
    counted = np.uint64(sum(1 << circuit.place[n] for n in circuit.nodes if n not in excepted))
    best: tuple[Key, int, int, Key] | None = None
    for key, layer in graph.search.layers.items():
        if best is not None and (key[0], key[1] + 1) > best[0]:
            break
        found = _in_layer(graph, layer, key, counted)
        if found is not None and (best is None or found < best):
            best = found
    if best is None:
        return None
    _, target, source, key = best
    return [v for _, v in graph.search.path(key, source)] + [target]


def _in_layer(graph: Graph, layer: Words, key: Key, counted: np.uint64) -> tuple[Key, int, int, Key] | None:
    """The least (length of the run, target, source, length to the source) of the withdrawals from one layer."""
    found = []
    for start in range(0, len(layer), CHUNK):
        part = layer[start : start + CHUNK]
        graph.limits.check(f"among {len(graph):,} total states")
        source, target = graph.steps(part)
        before = part[source]
        lost = graph.packed.excited(before) & ~(before ^ target) & ~graph.packed.excited(target) & counted
        bad = lost != 0
        changed = graph.search.changed(before[bad], target[bad])
        for after, hits in (((key[0], key[1] + 1), ~changed), ((key[0] + 1, key[1] + 1), changed)):
            if hits.any():
                order = np.lexsort((before[bad][hits], target[bad][hits]))[0]
                found.append((after, int(target[bad][hits][order]), int(before[bad][hits][order]), key))
    return min(found, default=None)
