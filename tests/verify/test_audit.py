"""What exhaustive search has explored is held against the executable meaning."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from families import latch_chain

from settled.encodings.packed import Packed
from settled.verify.engines.exhaustive import AuditFailed, audit
from settled.verify.explicit.graph import Graph
from settled.verify.limits import Limits
from settled.verify.questions import Task


@pytest.mark.parametrize("changes", ["single", "simultaneous", "burst"])
def test_a_state_left_out_is_noticed(changes: str) -> None:
    circuit, environment = latch_chain(1)
    environment = replace(environment, changes=changes)
    graph = Graph(Packed(circuit, environment), Limits())
    task = Task(circuit, environment, Limits())
    audit(graph, task)
    whole = graph.vertices
    reached = [i for i, word in enumerate(whole) if word not in graph.starts]
    assert reached
    for i in reached:
        graph.vertices = np.delete(whole, i)
        with pytest.raises(AuditFailed, match="leaves the explored set"):
            audit(graph, task)
