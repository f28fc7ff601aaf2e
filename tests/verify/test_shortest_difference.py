"""The fewest input changes that show a fault, in circuits that are too wide to be searched state by state."""

from __future__ import annotations

import pytest
from refactored import ENVIRONMENT, control_block, refactored, with_fault

from settled.encodings.delays import place
from settled.models.states import Behaviour
from settled.verify.engines import correspondence, scheduled_pairs, shortest_difference
from settled.verify.limits import Limits
from settled.verify.properties.equivalent import KIND
from settled.verify.questions import Differs, Task
from settled.verify.replay import replay

FEWEST = {1: 8, 3: 4, 4: 2, 5: 0}
"""By seed of the fault, the input changes that it takes; found by search over pairs of stable states, too."""


@pytest.mark.parametrize("seed", FEWEST)
def test_no_fewer_changes_do_and_the_runs_walk(seed: int) -> None:
    netlist = control_block(60, 3, data=2)
    circuit = place(netlist, "gate")
    question = Differs(place(with_fault(refactored(netlist, seed), seed), "gate"), circuit.outputs)
    answer, again, proof = (
        engine.differs(Task(circuit, ENVIRONMENT, Limits()), question)
        for engine in (shortest_difference, scheduled_pairs, correspondence)
    )
    assert answer.facts["fewest_changes"] == again.facts["fewest_changes"] == FEWEST[seed]
    assert proof.verdict == "undecided"
    replay(KIND, Behaviour(circuit, ENVIRONMENT), question, answer)
